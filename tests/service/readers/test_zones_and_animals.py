"""Zones and animals from whatever is sent."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.problems import Problem
from service.readers.animal_attributes import ATTRIBUTES, read_animal_attributes
from service.readers.zones_geojson import read_zone, read_zones

JSON = st.recursive(
    st.none() | st.booleans() | st.integers(-400, 400) | st.floats(-400, 400) | st.text(max_size=5),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=12,
)
POSITION = st.tuples(st.integers(-370, 370), st.integers(-92, 92)).map(list)
RING = st.lists(POSITION, min_size=3, max_size=7).map(lambda ring: [*ring, ring[0]])
GEOMETRY = st.one_of(
    JSON,
    st.fixed_dictionaries({"type": st.sampled_from(["Polygon", "MultiPolygon", "Point"]), "coordinates": JSON}),
    st.fixed_dictionaries({"type": st.just("Polygon"), "coordinates": st.lists(RING, max_size=3)}),
    st.fixed_dictionaries({"type": st.just("MultiPolygon"), "coordinates": st.lists(st.lists(RING, max_size=2))}),
)
PROPERTIES = st.one_of(
    JSON,
    st.fixed_dictionaries(
        {},
        optional={
            "name": JSON,
            "in_force_from": st.sampled_from(["2026-01-01", "2026-13-01", "9999-12-31", "0001-01-01", "", 7]),
            "in_force_until": st.sampled_from(["2026-06-01", "2025-01-01", "0001-01-01T00:00:00+14:00", None]),
            "season": st.sampled_from(["11-15/02-29", "02-30/03-01", "x", 5]),
            "edges": st.sampled_from(["straight", "geodesic", "round", []]),
        },
    ),
)
FEATURE = st.fixed_dictionaries(
    {"type": st.just("Feature"), "geometry": GEOMETRY, "properties": PROPERTIES}, optional={"crs": JSON, "id": JSON}
)


@settings(max_examples=300)
@given(FEATURE)
def test_a_feature_is_a_zone_or_a_problem_that_names_every_fault(feature):
    try:
        zone = read_zone(feature, "z", "Pacific/Auckland")
    except Problem as refusal:
        assert refusal.status == 422  # noqa: PT017 - both outcomes are right; any other exception is not
        assert all(fault["code"] and fault["detail"] for fault in refusal.extra["errors"])  # noqa: PT017
    else:
        assert zone.shape.polygon.area > 0.0
        assert zone.geometry_sent == feature["geometry"]
        assert zone.shape.to_geojson()["type"] == "MultiPolygon"


@settings(max_examples=100)
@given(st.fixed_dictionaries({"type": st.just("FeatureCollection"), "features": st.lists(FEATURE | JSON, max_size=4)}))
def test_a_collection_is_zones_or_a_problem(collection):
    try:
        zones = read_zones(collection, "UTC")
    except Problem as refusal:
        assert refusal.status == 422  # noqa: PT017 - as above
    else:
        assert len(zones) == len(collection["features"])


@given(st.dictionaries(st.sampled_from([*ATTRIBUTES, "animal", "other"]), JSON, max_size=4))
def test_attributes_are_complete_or_a_problem(body):
    try:
        attributes = read_animal_attributes(body, "a", "UTC")
    except Problem as refusal:
        assert refusal.status == 422  # noqa: PT017 - as above
    else:
        assert tuple(attributes) == ATTRIBUTES


SQUARE = {"type": "Polygon", "coordinates": [[[10, 50], [11, 50], [11, 51], [10, 51], [10, 50]]]}


@pytest.mark.parametrize("identifier", [7, "7", None])
def test_the_id_of_a_feature_is_that_of_its_path_as_number_or_text(identifier):
    feature = {"type": "Feature", "id": identifier, "properties": None, "geometry": SQUARE}
    assert read_zone(feature, "7", "UTC").identifier == "7"


def test_a_zone_twice_at_one_instant_is_refused_however_it_is_written():
    features = [
        {"type": "Feature", "id": "z", "properties": {"in_force_from": begins}, "geometry": SQUARE}
        for begins in ("2026-01-01", "2025-12-31T11:00:00Z")
    ]
    with pytest.raises(Problem, match="there twice"):
        read_zones({"type": "FeatureCollection", "features": features}, "Pacific/Auckland")
