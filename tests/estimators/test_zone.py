"""Zone geometry: what is accepted, how it is understood, and what is refused where."""

import pytest

from estimators import ZoneGeometryError, ZoneShape

BOX = [[0, 0], [1, 0], [1, 1], [0, 1], [0, 0]]


def shape(*rings, kind="Polygon"):
    return ZoneShape.from_geojson({"type": kind, "coordinates": list(rings)})


def test_box_across_the_antimeridian():
    """Written the short way, or run on past 180: cut in two, west > east in the bbox (RFC 7946, 3.1.9 and 5.2)."""
    for ring in (
        [[177, -20], [-178, -20], [-178, -16], [177, -16], [177, -20]],
        [[177, -20], [182, -20], [182, -16], [177, -16], [177, -20]],
    ):
        found = shape(ring)
        assert found.bbox == [177, -20, -178, -16]
        assert len(found.to_geojson()["coordinates"]) == 2
        assert found.notes


@pytest.mark.parametrize(
    "ring",
    [
        [[0, 80], [90, 80], [180, 80], [-90, 80], [0, 80]],
        [[-180, 80], [-90, 80], [0, 80], [90, 80], [180, 80], [-180, 80]],
        [[-180, 80], [180, 80], [180, 90], [-180, 90], [-180, 80]],
    ],
)
def test_polar_caps(ring):
    """A ring around the pole, closed or not along the antimeridian, is the cap."""
    found = shape(ring)
    assert found.cut_polygon.area == pytest.approx(3600.0)
    assert found.contains([12.0, -170.0, 12.0], [89.0, 85.0, 79.0]).tolist() == [True, True, False]


def test_hole_around_the_pole():
    """A band around the pole: cap without its middle."""
    ring = [[lon, 70] for lon in (0, 90, 180, -90, 0)]
    hole = [[lon, 80] for lon in (10, 100, -170, -80, 10)]
    assert shape(ring, hole).contains([5.0, 5.0], [75.0, 85.0]).tolist() == [True, False]


@pytest.mark.parametrize(
    ("rings", "code"),
    [
        ([BOX[:-1]], "unclosed_ring"),
        ([[[0, 0], [2, 2], [2, 0], [0, 1], [0, 0]]], "self_crossing_ring"),
        ([[[0, 0], [1, 1], [1, 0], [0, 1], [0, 0]]], "self_crossing_ring"),
        ([[[0, 0], [1, 1], [2, 2], [0, 0]]], "zero_area"),
        ([BOX, [[5, 5], [5, 6], [6, 6], [5, 5]]], "hole_outside"),
        ([[[-100, 0], [100, 0], [100, 10], [-100, 10], [-100, 0]]], "ambiguous_width"),
        ([[[0, 0], [1, 95], [1, 1], [0, 0]]], "bad_position"),
        ([[[0, 0], [1, float("nan")], [1, 1], [0, 0]]], "bad_position"),
        ([[[0, 0], [1, 1], [0, 0]]], "too_few_positions"),
        ([], "too_few_positions"),
        ([[[0, 1], [1, 0], [-359, 0], [0, 0], [0, 1]], [[0, 0], [0, 1], [1, 0], [0, 0]]], "invalid_polygon"),
    ],
)
def test_refusals(rings, code):
    """Each fault has its own code and says where it is."""
    with pytest.raises(ZoneGeometryError) as refusal:
        shape(*rings)
    assert refusal.value.code == code


def test_wide_zone_with_positions_between():
    """Over 180 degrees wide is fine once no edge is in doubt."""
    assert shape([[-100, 0], [0, 0], [100, 0], [100, 10], [0, 10], [-100, 10], [-100, 0]]).bbox == [
        -100,
        0,
        100,
        10,
    ]


def test_a_tiny_zone_keeps_its_area_in_geojson():
    """A square of a centimetre: six decimals would make it a point."""
    side = 1e-7
    geometry = shape([[0, 0], [side, 0], [side, side], [0, side], [0, 0]]).to_geojson()
    assert ZoneShape.from_geojson(geometry).polygon.area == pytest.approx(side**2, rel=0.03)
