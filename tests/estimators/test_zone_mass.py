"""The integral of zone mass against brute force, and the properties that it must keep."""

import numpy as np
import pytest

from estimators import Track, Zone, ZoneShape, ZoneUseOptions, estimate_zone_use
from estimators.frames import WGS84, earth_centred_m, plane_coordinates_m
from estimators.gaussian_path import covered_steps, path_between_fixes
from estimators.polygon_mass import gaussian_mass_in_polygon
from estimators.random_walk import RandomWalk
from estimators.zone_mass import Cells, integrated_zone_mass
from tests.estimators.simulated import START_MS, box, random_walk_track, whole_span

OPTIONS = ZoneUseOptions()


def use(track, zones, options=OPTIONS):
    return {
        (row.zone_index, row.month): row for row in estimate_zone_use(track, whole_span(track), zones, options).rows
    }


def strip_case():
    """5 km step, 100 m process deviation, 5 m fixes, a 200 m strip across it."""
    lon, lat, _ = WGS84.fwd([0.0, 0.0], [0.0, 0.0], [90.0, 90.0], [0.0, 5000.0])
    track = Track.from_fixes(
        np.array([START_MS, START_MS + 3_600_000]),
        np.array(lon),
        np.array(lat),
        np.tile([25.0, 0, 25.0], (2, 1)),
        np.zeros(2, bool),
    )
    west, _, _ = WGS84.fwd(0.0, 0.0, 90.0, 1650.0)
    east, _, _ = WGS84.fwd(0.0, 0.0, 90.0, 1850.0)
    return track, box(west, -0.1, east, 0.1)


def path_and_cells(track, variance):
    steps = covered_steps(track, 1e12)
    path = path_between_fixes(track, steps, RandomWalk(track, 1e12).marginals(variance), variance, 1.0)
    n = len(steps)
    duration = steps.end_ms - steps.start_ms
    return path, Cells(np.arange(n), np.zeros(n, np.int64), np.zeros(n), np.ones(n), duration)


def brute_force(path, zone, part, n):
    """Midpoint rule over time of the static mass; the zone brought into the part's plane with fine edges."""
    ring = np.asarray(zone.shape.polygon.geoms[0].segmentize(1e-4).exterior.coords)
    places = earth_centred_m(ring[:, 0], ring[:, 1])
    parts = path.steps.parts
    plane = plane_coordinates_m(
        places,
        np.repeat(parts.origin_m[part : part + 1], len(ring), 0),
        np.repeat(parts.axes[part : part + 1], len(ring), 0),
    )
    shares = (np.arange(n) + 0.5) / n
    means = np.array([path.mean_m(part, s) for s in shares])
    covariances = np.array([path.covariance_at_m2(part, s) for s in shares])
    return gaussian_mass_in_polygon(means, covariances, [plane]).mean()


def test_strip_against_brute_force():
    """The strip that quadrature differences miss: within the stated error of 20,000 moments."""
    track, zone = strip_case()
    path, cells = path_and_cells(track, 100.0**2 * 4 / 3600.0)
    edges = zone.shape.boundaries[0]
    sums = integrated_zone_mass(path, edges, cells, 1)[0] / cells.duration_ms.sum()
    slow = brute_force(path, zone, 0, 20_000)
    assert slow == pytest.approx(0.0400, abs=2e-4)
    assert sums[1] <= 1e-6
    assert sums[0] == pytest.approx(slow, abs=1e-6)


@pytest.mark.parametrize("seed", range(4))
def test_tilted_ellipses_against_brute_force(seed):
    """General covariance, a step past the corner of a box: within 1e-6 of brute force."""
    draws = np.random.default_rng(seed)
    lon, lat = 10.0 + draws.normal(0, 0.01, 3), 45.0 + draws.normal(0, 0.01, 3)
    errors = np.column_stack([draws.uniform(5e4, 9e4, 3), draws.uniform(-4e4, 4e4, 3), draws.uniform(5e4, 9e4, 3)])
    track = Track.from_fixes(START_MS + np.arange(3) * 3_600_000, lon, lat, errors, np.zeros(3, bool))
    zone = box(9.995, 44.99, 10.02, 45.002)
    path, cells = path_and_cells(track, 20.0)
    for part in range(2):
        one = Cells(*(np.atleast_1d(column[part]) for column in vars(cells).values()))
        sums = integrated_zone_mass(path, zone.shape.boundaries[0], one, 1)[0] / one.duration_ms.sum()
        assert sums[1] <= 1e-6
        assert sums[0] == pytest.approx(brute_force(path, zone, part, 4000), abs=2e-6)


@pytest.fixture(scope="module")
def track():
    return random_walk_track(400)


def test_splitting_a_zone_sums(track):
    """A cut anywhere leaves the sum of the parts, for mass and for time."""
    whole, left, right = (
        box(9.9, 44.9, 10.013, 45.1),
        box(9.9, 44.9, 9.9973, 45.1),
        box(9.9973, 44.9, 10.013, 45.1),
    )
    rows = use(track, [whole, left, right])
    month = "2026-01"
    assert rows[0, month].probability_mass == pytest.approx(
        rows[1, month].probability_mass + rows[2, month].probability_mass, abs=2e-6
    )
    assert rows[0, month].time_fraction == pytest.approx(
        rows[1, month].time_fraction + rows[2, month].time_fraction, abs=1e-8
    )


def test_zone_and_complement(track):
    """A zone and the box around it with that zone as a hole hold everything."""
    inner = [[9.998, 44.998], [10.01, 44.998], [10.01, 45.01], [9.998, 45.01], [9.998, 44.998]]
    outer = [[5.0, 40.0], [15.0, 40.0], [15.0, 50.0], [5.0, 50.0], [5.0, 40.0]]
    zones = [
        Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [inner]})),
        Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [outer, inner]})),
    ]
    rows = use(track, zones)
    pair = [rows[k, "2026-01"] for k in (0, 1)]
    assert sum(row.probability_mass for row in pair) == pytest.approx(1.0, abs=2e-6)
    assert sum(row.time_fraction for row in pair) == pytest.approx(1.0, abs=1e-8)
    assert 0.001 < pair[0].probability_mass < 0.999


@pytest.mark.parametrize("turn", [37.5, 170.0, 179.99, -190.0])
def test_turning_all_longitudes_changes_nothing(turn):
    """No seam: across 180 degrees the mass is the same to 1e-6."""
    here = random_walk_track(200)
    there = Track.from_fixes(
        here.time_ms,
        here.lon_deg + turn,
        here.lat_deg,
        np.tile([400.0, 0, 400.0], (200, 1)),
        np.zeros(200, bool),
    )
    first = use(here, [box(9.998, 44.99, 10.01, 45.004)])[0, "2026-01"]
    lon = np.mod(9.998 + turn + 180, 360) - 180
    second = use(there, [box(lon, 44.99, lon + 0.012, 45.004)])[0, "2026-01"]
    assert 0.01 < first.probability_mass < 0.99
    assert second.probability_mass == pytest.approx(first.probability_mass, abs=1e-6)
    assert second.time_fraction == pytest.approx(first.time_fraction, abs=1e-7)


def test_polar_zone_around_an_animal_at_the_pole():
    """A cap around the pole, and the two halves of it, agree at the pole itself."""
    track = random_walk_track(200, lat_deg=89.99)
    ring = [[lon, 89.99] for lon in range(-180, 180, 10)]
    cap = Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [[*ring, ring[0]]]}))
    rows = use(track, [cap, box(-180, 89.99, 0, 90), box(0, 89.99, 180, 90)])
    cap_row, west, east = (rows[k, "2026-01"] for k in range(3))
    assert 0.01 < cap_row.probability_mass < 0.99
    assert west.probability_mass + east.probability_mass == pytest.approx(cap_row.probability_mass, abs=2e-6)
    assert west.time_fraction + east.time_fraction == pytest.approx(cap_row.time_fraction, abs=1e-7)


def test_order_of_the_fixes_does_not_show(track):
    """Shuffled input gives the very same answer."""
    order = np.random.default_rng(5).permutation(len(track))
    shuffled = Track.from_fixes(
        track.time_ms[order],
        track.lon_deg[order],
        track.lat_deg[order],
        np.tile([400.0, 0, 400.0], (400, 1)),
        np.zeros(400, bool),
    )
    zone = [box(9.99, 44.99, 10.01, 45.01)]
    assert estimate_zone_use(shuffled, whole_span(track), zone, OPTIONS) == estimate_zone_use(
        track, whole_span(track), zone, OPTIONS
    )


def test_dense_exact_fixes_give_the_time_fraction():
    """As fixes get dense and errors small, mass becomes the time fraction."""
    track = random_walk_track(800, step_s=60.0, sd_m=1.0, variance_m2_per_s=0.5)
    row = use(track, [box(9.9995, 44.999, 10.001, 45.0005)])[0, "2026-01"]
    assert 0.02 < row.time_fraction < 0.98
    assert row.probability_mass == pytest.approx(row.time_fraction, abs=0.01)


def test_time_fraction_against_dense_sampling():
    """Straight path sampled every second with pyproj and shapely."""
    track = random_walk_track(60, variance_m2_per_s=50.0, seed=4)
    zone = box(9.98, 44.97, 10.02, 45.02)
    lon, lat = [], []
    for k in range(59):
        azimuth, _, length = WGS84.inv(track.lon_deg[k], track.lat_deg[k], track.lon_deg[k + 1], track.lat_deg[k + 1])
        at = (np.arange(3600) + 0.5) / 3600 * length
        x, y, _ = WGS84.fwd(*(np.full(3600, v) for v in (track.lon_deg[k], track.lat_deg[k], azimuth)), at)
        lon.append(x)
        lat.append(y)
    sampled = zone.shape.contains(np.concatenate(lon), np.concatenate(lat)).mean()
    assert use(track, [zone])[0, "2026-01"].time_fraction == pytest.approx(sampled, abs=2e-4)
