"""Time fraction against dense sampling of geodesics with pyproj, and shapely's point in polygon."""

import math
from itertools import pairwise

import numpy as np
import pytest
import shapely

from estimators.frames import WGS84
from tests.estimators.hard_cases import (
    corners,
    only_row,
    rows_of,
    track_of,
    zone_of,
)


def sampled_fraction(track, polygon, per_step):
    """Share of moments inside, the path sampled by pyproj, the zone asked of shapely."""
    hours = np.diff(track.time_ms).astype(float)
    shapely.prepare(polygon)
    total = 0.0
    for k, weight in enumerate(hours / hours.sum()):
        ends = track.lon_deg[k], track.lat_deg[k], track.lon_deg[k + 1], track.lat_deg[k + 1]
        azimuth, _, length = WGS84.inv(*ends)
        share = (np.arange(per_step) + 0.5) / per_step
        lon, lat, _ = WGS84.fwd(*(np.full(per_step, v) for v in (*ends[:2], azimuth)), share * length)
        inside = np.zeros(per_step, bool)
        for turn in (-360.0, 0.0, 360.0):
            inside |= shapely.contains_xy(polygon, np.asarray(lon) + turn, np.asarray(lat))
        total += weight * inside.mean()
    return total


@pytest.mark.parametrize(
    ("lon", "lat", "ring"),
    [
        ([170.0, -170.0, 175.0], [10.0, -10.0, 3.0], corners(178, -5, 183, 6)),
        ([0.0, 90.0], [10.0, 45.0], corners(20, 20, 60, 48)),
        ([-10.0, 80.0, 170.0], [70.0, 85.0, 60.0], [[lon, 78.0] for lon in (*range(0, 180, 30), *range(-180, 1, 30))]),
        ([1.0, -179.0], [80.0, 75.0], corners(-180, 85, 180, 90)),
        ([20.0, -160.0], [-85.0, -85.0], corners(-90, -90, 90, -87)),
        ([12.0, 12.5, 13.1, 12.2], [47.0, 47.3, 46.8, 46.9], [[12.1, 46.7], [13.4, 47.05], [12.6, 47.4], [12.1, 46.7]]),
        ([10.0, 10.0], [30.0, -30.0], corners(9, -7, 11, 13)),
        ([10.0, 10.001, 10.002], [30.0, 30.0, 30.001], corners(10.0003, 29.9, 10.0015, 30.0006)),
        ([80.0, 80.0, -80.0], [90.0, 60.0, 60.0], corners(-90, 70, 90, 90)),
    ],
    ids=[
        "across-180",
        "10000-km",
        "arctic-ring",
        "over-the-pole",
        "antarctic-half",
        "triangle",
        "south",
        "small",
        "from-the-pole",
    ],
)
def test_time_fraction_against_dense_sampling(lon, lat, ring):
    """40,000 moments a step, at most one wrong at each of a few crossings."""
    track = track_of(lon, lat, 10.0)
    zone = zone_of(ring)
    row = only_row(track, zone)
    sampled = sampled_fraction(track, zone.shape.polygon, 40_000)
    assert 0.01 < sampled < 0.99
    assert row.time_fraction == pytest.approx(sampled, abs=1e-4)
    assert row.inside_hours == pytest.approx(row.time_fraction * row.covered_hours, abs=1e-5)


@pytest.mark.parametrize("seed", range(10))
def test_time_fraction_of_random_walks_against_dense_sampling(seed):
    """Random places on Earth, steps of 1 m to 10,000 km, a random star at their middle."""
    draws = np.random.default_rng(seed)
    scale_m = float(10.0 ** draws.uniform(0.0, 6.7))
    middle = float(draws.uniform(-180, 180)), float(np.degrees(np.arcsin(draws.uniform(-0.9, 0.9))))
    azimuth, away = draws.uniform(-180, 180, 6), scale_m * draws.uniform(0.2, 1.0, 6)
    lon, lat, _ = WGS84.fwd(np.full(6, middle[0]), np.full(6, middle[1]), azimuth, away)
    track = track_of(lon, lat, 10.0)
    size = np.degrees(min(scale_m, 8e5) / 6.4e6)
    angles = 2.0 * np.pi * (np.arange(9) + draws.uniform(0, 0.8, 9)) / 9
    radius = size * draws.uniform(0.3, 0.9, 9)
    stretch = min(1.0 / math.cos(math.radians(middle[1])), 4.0)
    ring = np.column_stack([middle[0] + stretch * radius * np.cos(angles), middle[1] + radius * np.sin(angles)])
    zone = zone_of([*ring.tolist(), ring[0].tolist()])
    found = rows_of(track, [zone]).rows
    fraction = found[0].time_fraction if found else 0.0
    assert fraction == pytest.approx(sampled_fraction(track, zone.shape.polygon, 40_000), abs=2e-4)


def test_geodesic_edges_against_dense_sampling():
    """An edge along 60° N that bows north by 1.4°: a path at 60.7° N is outside it if straight, inside if geodesic."""
    ring = corners(0, 50, 40, 60)
    track = track_of([14.0, 26.0], [60.7, 60.7], 10.0)
    straight, geodesic = (rows_of(track, [zone_of(ring, edges=edges)]).rows for edges in ("straight", "geodesic"))
    assert straight[0].time_fraction == 0.0
    fine = shapely.Polygon([place for a, b in pairwise(ring) for place in [tuple(a), *WGS84.npts(*a, *b, 2000)]])
    assert geodesic[0].time_fraction == pytest.approx(sampled_fraction(track, fine, 40_000), abs=1e-4)
