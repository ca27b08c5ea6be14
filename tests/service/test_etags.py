"""Entity tags and preconditions."""

import pytest

from service.etags import check_preconditions, entity_tag, not_modified
from service.problems import Problem


def test_two_forms_of_a_revision_have_two_tags_and_guard_the_same_write():
    tags = [entity_tag(7, "application/json"), entity_tag(7, "application/geo+json")]
    assert tags == ['"7-json"', '"7-geo+json"']
    for tag in (*tags, "*", f'"1-json", {tags[0]}'):
        check_preconditions({"if-match": tag}, 7)


@pytest.mark.parametrize(
    ("headers", "revision"),
    [
        ({"if-match": '"6-json"'}, 7),
        ({"if-match": '"7-json"'}, None),
        ({"if-match": "*"}, None),
        ({"if-none-match": "*"}, 7),
    ],
)
def test_a_precondition_that_does_not_hold_is_refused(headers, revision):
    with pytest.raises(Problem) as refusal:
        check_preconditions(headers, revision)
    assert refusal.value.status == 412


def test_a_write_without_preconditions_goes_through():
    check_preconditions({}, None)
    check_preconditions({"if-none-match": "*"}, None)


def test_who_has_a_revision_already_is_told_so():
    tag = entity_tag(7, "application/json")
    assert not_modified({"if-none-match": f'W/"x", W/{tag}'}, tag).status_code == 304
    assert not_modified({"if-none-match": '"6-json"'}, tag) is None
    assert not_modified({}, tag) is None
