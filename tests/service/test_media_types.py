"""The choice of the form of an answer."""

import pytest

from service.media_types import CSV, GEOJSON, JSON, negotiated
from service.problems import Problem

ALL = (JSON, CSV, GEOJSON)


@pytest.mark.parametrize(
    ("short_name", "accept", "chosen"),
    [
        (None, None, JSON),
        (None, "", JSON),
        (None, "*/*", JSON),
        (None, "text/csv", CSV),
        (None, "TEXT/CSV; charset=utf-8", CSV),
        (None, "text/*", CSV),
        (None, "application/*", JSON),
        (None, "application/geo+json, application/json;q=0.9", GEOJSON),
        (None, "application/geo+json;q=0.2, application/json;q=0.1", GEOJSON),
        (None, "*/*;q=0.1, text/csv;q=0.5", CSV),
        (None, "application/json;q=0, */*", CSV),
        (None, "text/html,application/xhtml+xml,*/*;q=0.8", JSON),
        ("csv", "application/json", CSV),
        ("geojson", None, GEOJSON),
    ],
)
def test_f_beats_accept_and_accept_is_read_by_its_weights(short_name, accept, chosen):
    assert negotiated(ALL, short_name, accept) == chosen


@pytest.mark.parametrize(
    ("short_name", "accept"), [("xml", "*/*"), ("", None), (None, "text/html"), (None, "*/*;q=0"), (None, "*/*;q=x")]
)
def test_what_is_not_offered_is_refused_with_what_is(short_name, accept):
    with pytest.raises(Problem) as refusal:
        negotiated(ALL, short_name, accept)
    assert refusal.value.status == 406
    assert refusal.value.extra == {"offered": list(ALL)}
