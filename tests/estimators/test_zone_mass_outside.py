"""The integral of zone mass against quadrature of a P(t) written anew, and against places drawn on the ellipsoid."""

import math
from itertools import pairwise

import numpy as np
import pytest
import shapely
from scipy.integrate import quad
from scipy.special import owens_t

from estimators import (
    Track,
)
from estimators.frames import WGS84
from tests.estimators.hard_cases import (
    corners,
    fixed_variance,
    rows_of,
    track_of,
    zone_of,
)
from tests.estimators.simulated import START_MS


def mass_by_owens_t(ring, mean, covariance):
    """Mass of a normal in a plane ring: angles and Owen's T edge by edge (Owen 1956), nothing from the estimators."""
    white = np.linalg.solve(np.linalg.cholesky(covariance), (np.asarray(ring) - mean).T).T
    total = 0.0
    for (x1, y1), (x2, y2) in pairwise(white):
        length = math.hypot(x2 - x1, y2 - y1)
        cross = x1 * y2 - y1 * x2
        h = cross / length
        if abs(h) < 1e-12:
            continue
        ux, uy = (x2 - x1) / length, (y2 - y1) / length
        a1, a2 = (x1 * ux + y1 * uy) / abs(h), (x2 * ux + y2 * uy) / abs(h)
        angle = (math.atan(a2) - math.atan(a1)) / (2.0 * math.pi)
        total += math.copysign(1.0, h) * (angle - (owens_t(abs(h), a2) - owens_t(abs(h), a1)))
    return total


def dense_moments(times_s, q, noise, places, t, *, independent):
    """Mean and covariance at time t, by one dense Gaussian (random walk) or by independent bridges."""
    if independent:
        k = min(int(np.searchsorted(times_s, t, side="right")) - 1, len(times_s) - 2)
        length = times_s[k + 1] - times_s[k]
        a = (t - times_s[k]) / length
        mean = (1 - a) * places[k] + a * places[k + 1]
        return mean, (1 - a) ** 2 * noise[k] + a**2 * noise[k + 1] + length * a * (1 - a) * q * np.eye(2)
    # A flat start is the first fix itself with its error; the others are then conditioned on.
    later = times_s[1:]
    seen = np.kron(q * np.minimum.outer(later, later), np.eye(2)) + np.kron(np.ones((len(later),) * 2), noise[0])
    for k in range(len(later)):
        seen[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] += noise[k + 1]
    cross = np.kron(q * np.minimum(t, later)[None, :], np.eye(2)) + np.kron(np.ones((1, len(later))), noise[0])
    gain = np.linalg.solve(seen, cross.T).T
    mean = places[0] + gain @ (places[1:] - places[0]).ravel()
    return mean, noise[0] + q * t * np.eye(2) - gain @ cross.T


def plane_scene(seed):
    """A few fixes within half a kilometre of a place on the equator, and a star; plane metres and degrees."""
    draws = np.random.default_rng(seed)
    n = int(draws.integers(2, 5))
    times_s = np.concatenate([[0.0], np.cumsum(np.round(draws.uniform(60.0, 5000.0, n - 1)))])
    sd_m = float(np.exp(draws.uniform(np.log(3.0), np.log(60.0))))
    places = draws.normal(0.0, 200.0, (n, 2))
    # From far too small for these steps, where the smoother bends the path, to what they suggest.
    q = 200.0**2 / times_s[-1] * float(np.exp(draws.uniform(-5.0, 0.5)))
    tilt, ratio = draws.uniform(-0.9, 0.9, n), draws.uniform(0.3, 1.0, n)
    noise = np.array(
        [[[sd_m**2, r * c * sd_m**2], [r * c * sd_m**2, (r * sd_m) ** 2]] for r, c in zip(ratio, tilt, strict=True)]
    )
    m = int(draws.integers(3, 10))
    angles = 2.0 * np.pi * (np.arange(m) + draws.uniform(0.0, 0.8, m)) / m
    centre = 0.5 * (places[0] + places[1]) + draws.normal(0.0, 30.0, 2)
    star = centre + np.column_stack([np.cos(angles), np.sin(angles)]) * draws.uniform(30.0, 200.0, (m, 1))
    return times_s, q, places, noise, np.vstack([star, star[:1]])


def to_degrees(offsets_m):
    azimuth = np.degrees(np.arctan2(offsets_m[:, 0], offsets_m[:, 1]))
    n = len(offsets_m)
    lon, lat, _ = WGS84.fwd(np.full(n, 7.0), np.zeros(n), azimuth, np.hypot(*offsets_m.T))
    return np.asarray(lon), np.asarray(lat)


@pytest.mark.parametrize("estimator", ["random_walk", "brownian_bridge"])
@pytest.mark.parametrize("seed", range(1, 16))
def test_numerical_error_bounds_the_difference_to_quadrature(seed, estimator):
    """|mass - adaptive quadrature of an independently written P(t)| is at most the stated numerical error.

    1e-8 is allowed on top for the quadrature and for half a kilometre of the ellipsoid taken as a plane.
    """
    times_s, q, places, noise, star = plane_scene(seed)
    lon, lat = to_degrees(places)
    covariance = np.column_stack([noise[:, 0, 0], noise[:, 0, 1], noise[:, 1, 1]])
    time_ms = (START_MS + times_s * 1000).astype(np.int64)
    track = Track.from_fixes(time_ms, lon, lat, covariance, np.zeros(len(lon), bool))
    zone = zone_of(np.column_stack(to_degrees(star)).tolist())
    use = rows_of(track, [zone], parameters=fixed_variance(q), estimator=estimator)
    row = use.rows[0]

    def moment_mass(t):
        mean, spread = dense_moments(times_s, q, noise, places, t, independent=estimator == "brownian_bridge")
        return mass_by_owens_t(star, mean, spread)

    truth, claimed = 0.0, 0.0
    for a, b in pairwise(times_s):
        cuts = np.linspace(a, b, 9)
        for c, d in pairwise(cuts):
            value, error = quad(moment_mass, c, d, epsabs=1e-9 * (d - c), epsrel=1e-11, limit=400)
            truth, claimed = truth + value, claimed + error
    truth, claimed = truth / times_s[-1], claimed / times_s[-1]
    assert claimed < 1e-8
    assert 0.01 < row.probability_mass < 0.999
    assert row.numerical_error <= 1e-6
    assert abs(row.probability_mass - truth) <= row.numerical_error + 1e-8


def share_inside_by_simulation(track, polygon, q, draws, count):
    """Independent bridges with circular errors, drawn: a geodesic point, then a step in any direction by geodesic."""
    hours = np.diff(track.time_ms).astype(float)
    step = draws.choice(len(hours), size=count, p=hours / hours.sum())
    a = draws.uniform(0.0, 1.0, count)
    variance = track.covariance_m2[:, 0, 0]
    spread = (1 - a) ** 2 * variance[step] + a**2 * variance[step + 1] + hours[step] / 1000.0 * a * (1 - a) * q
    azimuth, _, length = WGS84.inv(track.lon_deg[:-1], track.lat_deg[:-1], track.lon_deg[1:], track.lat_deg[1:])
    lon, lat, _ = WGS84.fwd(
        track.lon_deg[step], track.lat_deg[step], np.asarray(azimuth)[step], np.asarray(length)[step] * a
    )
    away = np.sqrt(-2.0 * spread * np.log(draws.uniform(0.0, 1.0, count)))
    lon, lat, _ = WGS84.fwd(lon, lat, draws.uniform(-180.0, 180.0, count), away)
    shapely.prepare(polygon)
    inside = np.zeros(count, bool)
    for turn in (-360.0, 0.0, 360.0):
        inside |= shapely.contains_xy(polygon, np.asarray(lon) + turn, np.asarray(lat))
    return inside.mean()


@pytest.mark.parametrize(
    ("lon", "lat", "ring"),
    [
        ([24.9, 25.3, 25.1], [69.98, 70.02, 70.01], corners(24, 70, 26, 71)),
        ([179.9, -179.8, 180.0], [-17.0, -17.1, -16.9], corners(179.95, -18, 180.5, -17.02)),
        ([0.0, 120.0, 240.0], [89.9, 89.95, 89.8], [[lon, 89.9] for lon in (*range(0, 180, 20), *range(-180, 1, 20))]),
        (
            [0.0, 50.0, 0.0],
            [90.0, 89.9, 90.0],
            [[-180, 89.95], [-60, 89.95], [60, 89.95], [60, 90], [-180, 90], [-180, 89.95]],
        ),
        ([-60.0, 120.0], [-89.7, -89.8], corners(-100, -90, 40, -89.9)),
        ([10.0, 14.0], [60.0, 60.0], [[10, 60], [14, 60], [12, 61], [10, 60]]),
    ],
    ids=["parallel-70N", "antimeridian", "cap-north", "sector-at-the-pole", "sector-south", "long-parallel"],
)
def test_mass_against_simulation_on_the_ellipsoid(lon, lat, ring):
    """400,000 moments and places drawn along geodesics; five standard errors of the share."""
    track = track_of(lon, lat, [800.0, 500.0, 1000.0][: len(lon)])
    zone, q = zone_of(ring), 2000.0
    (row,) = rows_of(track, [zone], parameters=fixed_variance(q), estimator="brownian_bridge").rows
    share = share_inside_by_simulation(track, zone.shape.polygon, q, np.random.default_rng(11), 400_000)
    assert 0.02 < share < 0.98
    assert abs(row.probability_mass - share) <= 5.0 * math.sqrt(share * (1.0 - share) / 400_000)
    assert row.numerical_error <= 1e-6
