"""The random walk's likelihood and smoother against worked values and a dense Gaussian."""

import numpy as np
import pytest
from scipy.stats import multivariate_normal

from estimators import Track
from estimators.brownian_bridge import BrownianBridge
from estimators.frames import WGS84
from estimators.gaussian_path import covered_steps, path_between_fixes
from estimators.random_walk import RandomWalk

HOUR_MS = 3_600_000


def eastward_track(places_m, times_s, sd_m):
    """Fixes along the equator, at distances in metres east of a place."""
    n = len(places_m)
    lon, lat, _ = WGS84.fwd(np.zeros(n), np.zeros(n), np.full(n, 90.0), np.array(places_m, dtype=float))
    covariance = np.tile([sd_m**2, 0.0, sd_m**2], (n, 1))
    time_ms = (np.array(times_s) * 1000).astype(np.int64)
    return Track.from_fixes(time_ms, lon, lat, covariance, np.zeros(n, bool))


def test_three_fixes_smoothed():
    """q = R = 1, y = (0, 3, 0): means, variances, lag-one covariance (derived by hand)."""
    track = eastward_track([0, 3, 0], [0, 1, 2], 1.0)
    found = RandomWalk(track, HOUR_MS).marginals(1.0)
    assert found.mean_m[:, 0] + np.array([0, 3, 0]) == pytest.approx([0.75, 1.5, 0.75], abs=1e-6)
    assert found.covariance_m2[:, 0, 0] == pytest.approx([0.625, 0.5, 0.625])
    assert found.lag_covariance_m2[:, 0, 0] == pytest.approx([0.25, 0.25])


def test_likelihood_of_three_fixes():
    """Log-likelihood of the differences (derived by hand); the second axis adds that of no movement."""
    track = eastward_track([0, 3, 0], [0, 1, 2], 1.0)
    covariance = np.array([[3.0, -1.0], [-1.0, 3.0]])
    still = multivariate_normal.logpdf([0.0, 0.0], cov=covariance)
    assert RandomWalk(track, HOUR_MS).log_likelihood(1.0) - still == pytest.approx(-5.127598, abs=1e-5)


def test_between_fixes():
    """Mean and variance at t = 0.5 (derived by hand); the independent bridge puts 0.75."""
    track = eastward_track([0, 3, 0], [0, 1, 2], 1.0)
    steps = covered_steps(track, HOUR_MS)
    walk = path_between_fixes(track, steps, RandomWalk(track, HOUR_MS).marginals(1.0), 1.0, 1.0)
    assert walk.mean_m(0, 0.5)[0] + 1.5 == pytest.approx(1.125, abs=1e-6)
    assert walk.covariance_at_m2(0, 0.5)[0, 0] == pytest.approx(0.65625)
    bridge = path_between_fixes(track, steps, BrownianBridge(track, HOUR_MS).marginals(1.0), 1.0, 1.0)
    assert bridge.covariance_at_m2(0, 0.5)[0, 0] == pytest.approx(0.75)


@pytest.mark.parametrize(("ratio", "share"), [(1.0, 0.447214), (0.1, 0.156174), (10.0, 0.845154)])
def test_steady_state(ratio, share):
    """Smoothed variance over R far from the ends: q/sqrt(q^2 + 4q) (derived)."""
    track = eastward_track(np.zeros(201), np.arange(201), 1.0)
    assert RandomWalk(track, HOUR_MS).marginals(ratio).covariance_m2[100, 0, 0] == pytest.approx(share, abs=1e-6)


def test_smoother_against_a_dense_gaussian():
    """Ellipses at 70 degrees north: smoother = conditional of one big Gaussian in a plane."""
    draws = np.random.default_rng(3)
    n, q = 12, 0.5
    times_s = np.cumsum(draws.uniform(60, 600, n))
    places = np.cumsum(draws.normal(0, 15, (n, 2)), axis=0)
    azimuth = np.degrees(np.arctan2(places[:, 0], places[:, 1]))
    lon, lat, _ = WGS84.fwd(np.full(n, 25.0), np.full(n, 70.0), azimuth, np.hypot(*places.T))
    errors = np.column_stack([draws.uniform(50, 90, n), draws.uniform(-20, 20, n), draws.uniform(50, 90, n)])
    track = Track.from_fixes((times_s * 1000).astype(np.int64), lon, lat, errors, np.zeros(n, bool))
    found = RandomWalk(track, 24 * HOUR_MS).marginals(q)

    walk = 1e9 + q * np.minimum.outer(times_s, times_s)
    prior = np.kron(walk, np.eye(2))
    noise = np.zeros((2 * n, 2 * n))
    for k in range(n):
        noise[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = [
            [errors[k, 0], errors[k, 1]],
            [errors[k, 1], errors[k, 2]],
        ]
    precision = np.linalg.inv(prior) + np.linalg.inv(noise)
    covariance = np.linalg.inv(precision)
    mean = (covariance @ np.linalg.solve(noise, places.ravel())).reshape(n, 2)
    assert found.mean_m + places == pytest.approx(mean, abs=2e-3)
    for k in range(n):
        block = covariance[2 * k : 2 * k + 2, 2 * k : 2 * k + 2]
        assert found.covariance_m2[k] == pytest.approx(block, rel=1e-3, abs=1e-3)


def test_bridge_variance_with_and_without_the_left_out_error():
    """Equal steps of 60 min, residual 100 m, error 20 m: 146.667 m²/min with the left-out fix's error (derived)."""
    track = eastward_track([0, 100, 0, 100, 0], np.arange(5) * 3600.0, 20.0)
    bridge = BrownianBridge(track, 10 * HOUR_MS)
    variances = np.linspace(1.0, 3.0, 20001)
    values = [bridge.log_likelihood(v) for v in variances]
    assert variances[int(np.argmax(values))] * 60 == pytest.approx(146.667, abs=0.01)
