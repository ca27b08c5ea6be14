"""Errors of unusual size or shape, and paths along an edge."""

import numpy as np
import pytest

from estimators import TrackError
from estimators.frames import WGS84
from tests.estimators.hard_cases import (
    HOUR_MS,
    corners,
    needle_track,
    only_row,
    rows_of,
    track_of,
    zone_of,
)
from tests.estimators.simulated import START_MS
from tests.estimators.test_hard_zones import wavy_ring


@pytest.mark.parametrize("sd_m", [325.0, 4100.0, 6810.0])
def test_fifty_thousand_vertices_within_an_argos_error(sd_m):
    """Every vertex in reach of every moment; the stated error keeps its limit."""
    draws = np.random.default_rng(3)
    lon, lat = 10.0 + np.cumsum(draws.normal(0, 0.01, 20)), 45 + np.cumsum(draws.normal(0, 0.01, 20))
    row = only_row(track_of(lon, lat, sd_m), zone_of(wavy_ring(50_000, 0.04)))
    assert 0.1 < row.probability_mass < 0.9
    assert row.numerical_error <= 1e-6


def test_turning_an_animal_that_stays_on_a_parallel():
    """The edge along 60° N runs through the place, its error 5 m; turned by up to 0.003°, no mass changes."""
    masses = [
        only_row(
            track_of([10 + turn] * 3, [60.0] * 3, 5.0, step_ms=60_000), zone_of(corners(9 + turn, 60, 11 + turn, 61))
        ).probability_mass
        for turn in np.linspace(0.0, 0.003, 7)
    ]
    assert max(masses) - min(masses) <= 1e-6


@pytest.mark.parametrize("away_km", [10, 300, 1000, 3000])
def test_a_fix_with_a_huge_error_far_away(away_km):
    """Six good fixes, and one that knows the place to 10,000 km: it changes nothing, or the row is flagged."""
    lon, lat = (
        10 + np.array([0, 0.01, 0.003, -0.004, 0.01, 0.002]),
        45 + np.array([0, 0.005, 0.004, -0.01, 0.002, 0.003]),
    )
    zone = zone_of(corners(9.98, 44.98, 10.005, 45.006))
    astray = WGS84.fwd(10, 45, 70.0, away_km * 1000.0)
    time_ms = START_MS + np.arange(6) * HOUR_MS
    use = rows_of(
        track_of(
            np.append(lon, astray[0]),
            np.append(lat, astray[1]),
            np.append(np.full(6, 20.0), 1e7),
            time_ms=np.append(time_ms, time_ms[2] + HOUR_MS // 2),
        ),
        [zone],
    )
    change = abs(use.rows[0].probability_mass - only_row(track_of(lon, lat, 20.0), zone).probability_mass)
    assert change <= 1e-6 or "wide_spread" in use.months[0].flags


@pytest.mark.parametrize("semi_minor_m", [1e-3, 1e-4])
def test_an_ellipse_as_thin_as_a_hair_is_refused(semi_minor_m):
    """50 km by a millimetre: refused, never computed for ever."""
    with pytest.raises(TrackError, match="too narrow"):
        needle_track(semi_minor_m)


@pytest.mark.parametrize("lon_deg", [10.0, 123.4567, -80.03, 179.99])
def test_path_along_a_shared_meridian_belongs_to_one_side(lon_deg):
    """To the zone on the east, whole: rounding must not split it."""
    lat = 44.0 + 0.013 * np.arange(20)
    track = track_of(np.full(20, lon_deg), lat, 50.0)
    west, east = corners(lon_deg - 1, 40, lon_deg, 50), corners(lon_deg, 40, lon_deg + 1, 50)
    assert [only_row(track, zone_of(ring)).time_fraction for ring in (west, east)] == [0.0, 1.0]


WORLD = corners(-180, -90, 180, 90)


@pytest.mark.parametrize("edges", ["straight", "geodesic"])
@pytest.mark.parametrize("ends", [((10, 45), (-170, -45)), ((0, 90), (0, -90))])
def test_the_whole_world_holds_an_animal_that_jumps_to_the_other_side_every_hour(ends, edges):
    """Nonsense in, but no nonsense out: the mass is 1, and the row says that the spread is wide."""
    lon, lat = np.array(ends * 5, float).T
    use = rows_of(track_of(lon, lat, 100.0), [zone_of(WORLD, edges=edges)])
    assert use.rows[0].probability_mass == pytest.approx(1.0, abs=1e-6)
    assert "wide_spread" in use.months[0].flags
