"""Hard zones: very many vertices, holes that touch, all but an island, hemispheres, polar caps, half-shared edges."""

import numpy as np
import pytest

from tests.estimators.hard_cases import (
    corners,
    fixed_variance,
    only_row,
    rows_of,
    track_of,
    zone_of,
)


def wavy_ring(count, radius_deg):
    angles = np.linspace(0.0, 2.0 * np.pi, count, endpoint=False)
    radius = radius_deg * (1.0 + 0.02 * np.sin(37 * angles))
    ring = np.column_stack([10.0 + 1.4 * radius * np.cos(angles), 45.0 + radius * np.sin(angles)]).tolist()
    return [*ring, ring[0]]


def test_fifty_thousand_vertices_are_those_of_a_coarser_ring():
    """A ring drawn 25 times finer than needed is the same zone; the stated error stays within its limit."""
    draws = np.random.default_rng(3)
    lon, lat = 10.7 + np.cumsum(draws.normal(0, 0.01, 50)), 45 + np.cumsum(draws.normal(0, 0.01, 50))
    fine, coarse = zone_of(wavy_ring(50_000, 0.5)), zone_of(wavy_ring(5_000, 0.5))
    for sd_m in (20.0, 5000.0):
        track = track_of(lon, lat, sd_m)
        first, second = (only_row(track, zone) for zone in (fine, coarse))
        assert 0.05 < first.probability_mass < 0.95
        assert first.numerical_error <= 1e-6
        # Chords of the coarser ring cut off up to 1 m of the waves.
        assert first.probability_mass == pytest.approx(second.probability_mass, abs=2e-4)


def test_hole_touching_the_outer_ring():
    """A hole that meets the shell in one position: valid, and taken away like any other."""
    hole = [[0.0, 1.0], [0.5, 1.5], [0.5, 0.5], [0.0, 1.0]]
    zones = [zone_of(corners(0, 0, 2, 2), hole), zone_of(hole), zone_of(corners(0, 0, 2, 2))]
    track = track_of([-0.1, 0.3, 0.6, 0.4], [1.0, 1.01, 1.2, 0.7], 3000.0)
    masses = [row.probability_mass for row in rows_of(track, zones).rows]
    assert masses[0] + masses[1] == pytest.approx(masses[2], abs=3e-6)
    assert min(masses) > 0.05


@pytest.fixture(scope="module")
def all_but_an_island():
    """The globe with one hole, and the hole."""
    island = corners(10, 45, 10.1, 45.1)
    return zone_of(corners(-180, -90, 180, 90), island), zone_of(island)


@pytest.mark.parametrize(
    ("lon", "lat"),
    [
        ([10.05, 10.15, 10.05], [45.05, 45.05, 45.02]),
        ([179.9, -179.9, 179.95], [5.0, 5.0, 5.1]),
        ([0.0, 90.0, 180.0], [89.9, 90.0, 89.9]),
        ([0.0, 0.0, 0.0], [0.0, 0.0, 0.0]),
        ([-169.95, -169.95], [-45.05, -45.05]),
        ([-169.95, -169.9], [-44.86, -45.24]),
    ],
    ids=["at-the-island", "across-180", "over-the-pole", "at-0-0", "antipode", "near-the-antipode"],
)
def test_all_but_a_small_island(all_but_an_island, lon, lat):
    """Everywhere on Earth the island and the rest of the globe hold everything, exactly once."""
    track = track_of(lon, lat, 500.0)
    rows = rows_of(track, list(all_but_an_island), parameters=fixed_variance(10.0)).rows
    assert sum(row.probability_mass for row in rows) == pytest.approx(1.0, abs=2e-6)
    assert sum(row.time_fraction for row in rows) == pytest.approx(1.0, abs=1e-8)
    assert all(row.numerical_error <= 1e-6 for row in rows)


@pytest.fixture(scope="module")
def hemispheres():
    """North and south of the equator."""
    return zone_of(corners(-180, 0, 180, 90)), zone_of(corners(-180, -90, 180, 0))


@pytest.mark.parametrize("lat", [[0.0, 0.0, 0.0], [1e-5, -1e-5, 1e-5], [0.3, -0.2, 0.1]])
def test_hemispheres_share_a_track_along_their_edge(hemispheres, lat):
    """An edge that runs round the whole globe, through the track and through its antipode."""
    track = track_of([0.0, 0.1, 0.2], lat, 50.0)
    rows = rows_of(track, list(hemispheres), parameters=fixed_variance(1.0)).rows
    assert sum(row.probability_mass for row in rows) == pytest.approx(1.0, abs=2e-6)
    assert sum(row.time_fraction for row in rows) == pytest.approx(1.0, abs=1e-8)
    if max(lat) < 1e-3:
        assert rows[0].probability_mass == pytest.approx(0.5, abs=0.01)


@pytest.mark.parametrize("sign", [1, -1])
def test_polar_caps_at_both_poles(sign):
    """A cap drawn as a ring, and as a box from seam to seam, are the same zone; sectors of it add up."""
    ring = [[lon, sign * 89.9] for lon in (*range(0, 180, 10), *range(-180, 1, 10))]
    south, north = sorted((sign * 89.9, sign * 90.0))
    zones = [zone_of(ring), zone_of(corners(-180, south, 180, north))]
    sectors = [zone_of(corners(west, south, west + 120, north)) for west in (-180, -60, 60)]
    track = track_of([0.0, 120.0, -150.0, 80.0], [sign * v for v in (89.95, 89.85, 89.93, 89.88)], 2000.0)
    use = rows_of(track, [*zones, *sectors], parameters=fixed_variance(50.0), estimator="brownian_bridge")
    rows = use.rows
    assert 0.05 < rows[0].probability_mass < 0.95
    assert rows[1].probability_mass == pytest.approx(rows[0].probability_mass, abs=2e-6)
    assert sum(row.probability_mass for row in rows[2:]) == pytest.approx(rows[0].probability_mass, abs=4e-6)
    assert sum(row.time_fraction for row in rows[2:]) == pytest.approx(rows[0].time_fraction, abs=1e-7)


def test_neighbours_that_share_only_part_of_an_edge():
    """A path exactly along the common meridian is inside one or the other at every moment, never both or neither."""
    east, west = zone_of(corners(10, 44, 11, 46)), zone_of(corners(9, 43, 10, 47))
    for lats in ([44.5, 44.7, 45.1], [44.51234, 44.756, 45.12]):
        rows = rows_of(track_of([10.0, 10.0, 10.0], lats, 5.0), [east, west]).rows
        assert sum(row.time_fraction for row in rows) == pytest.approx(1.0, abs=1e-8)
