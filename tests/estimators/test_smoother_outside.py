"""The random walk's smoother and likelihood against Gaussian-process regression and a dense Gaussian conditional."""

import numpy as np
import pytest
from scipy.stats import multivariate_normal
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import Kernel

from estimators import Track
from estimators.frames import WGS84
from estimators.gaussian_path import covered_steps, path_between_fixes
from estimators.random_walk import RandomWalk

BASE_LON_DEG = 5.0
DIFFUSE_M2 = 1e8
DAY_MS = 86_400_000.0


class Wiener(Kernel):
    """Brownian motion started at time 0 from a wide normal: c + q·min(s, t)."""

    def __init__(self, q=1.0, start_variance=DIFFUSE_M2):
        self.q = q
        self.start_variance = start_variance

    def __call__(self, X, Y=None, eval_gradient=False):
        other = X if Y is None else Y
        return self.start_variance + self.q * np.minimum.outer(X[:, 0], other[:, 0])

    def diag(self, X):
        return self.start_variance + self.q * X[:, 0]

    def is_stationary(self):
        return False


def track_at(places_m, times_s, covariance):
    """Fixes at plane offsets in metres from a place on the equator, where east and north keep their directions."""
    azimuth = np.degrees(np.arctan2(places_m[:, 0], places_m[:, 1]))
    n = len(places_m)
    lon, lat, _ = WGS84.fwd(np.full(n, BASE_LON_DEG), np.zeros(n), azimuth, np.hypot(*places_m.T))
    return Track.from_fixes(np.round(times_s * 1000).astype(np.int64), lon, lat, covariance, np.zeros(n, bool))


def simulated(seed, n=15):
    """Times, true noise and fixes of one random walk, everything within a few hundred metres."""
    draws = np.random.default_rng(seed)
    times_s = np.concatenate([[0.0], np.cumsum(np.round(draws.uniform(30.0, 900.0, n - 1)))])
    q = float(np.exp(draws.uniform(-3.0, 1.0)))
    sd_m = np.exp(draws.uniform(np.log(2.0), np.log(40.0), n))
    way = np.cumsum(draws.normal(0.0, 1.0, (n, 2)) * np.sqrt(q * np.diff(times_s, prepend=0.0))[:, None], axis=0)
    return times_s, q, sd_m, way + draws.normal(0.0, 1.0, (n, 2)) * sd_m[:, None]


def origin_offset_m(steps, part):
    """Where a part's plane has its origin, in metres from the base."""
    azimuth, _, length = WGS84.inv(
        BASE_LON_DEG, 0.0, steps.parts.origin_lon_deg[part], steps.parts.origin_lat_deg[part]
    )
    return length * np.array([np.sin(np.radians(azimuth)), np.cos(np.radians(azimuth))])


@pytest.mark.parametrize("seed", range(8))
def test_fixes_and_moments_between_against_gaussian_process_regression(seed):
    """scikit-learn, one regression an axis: mean and variance at the fixes and at 0.2, 0.5, 0.9 of every step."""
    times_s, q, sd_m, places = simulated(seed)
    track = track_at(places, times_s, np.column_stack([sd_m**2, 0 * sd_m, sd_m**2]))
    found = RandomWalk(track, DAY_MS).marginals(q)
    steps = covered_steps(track, DAY_MS)
    path = path_between_fixes(track, steps, found, q, 1.0)
    shares = np.array([0.2, 0.5, 0.9])
    between_s = (times_s[:-1, None] + shares * np.diff(times_s)[:, None]).ravel()
    for axis in range(2):
        process = GaussianProcessRegressor(Wiener(q), alpha=sd_m**2, optimizer=None)
        process.fit(times_s[:, None], places[:, axis])
        mean, covariance = process.predict(times_s[:, None], return_cov=True)
        assert found.mean_m[:, axis] + places[:, axis] == pytest.approx(mean, abs=2e-3)
        assert found.covariance_m2[:, axis, axis] == pytest.approx(np.diag(covariance), rel=1e-4)
        assert found.lag_covariance_m2[:, axis, axis] == pytest.approx(np.diag(covariance, 1), rel=1e-3, abs=1e-3)
        mean, sd = process.predict(between_s[:, None], return_std=True)
        ours = [
            path.mean_m(part, share)[axis] + origin_offset_m(steps, part)[axis]
            for part in range(len(steps))
            for share in shares
        ]
        spreads = [path.covariance_at_m2(part, share)[axis, axis] for part in range(len(steps)) for share in shares]
        assert np.array(ours) == pytest.approx(mean, abs=2e-3)
        assert np.array(spreads) == pytest.approx(sd**2, rel=1e-4)


@pytest.mark.parametrize("seed", range(8))
def test_likelihood_against_gaussian_process_regression(seed):
    """Log marginal likelihood of both axes less that of the first fix alone, which a flat start takes as given."""
    times_s, q, sd_m, places = simulated(seed)
    track = track_at(places, times_s, np.column_stack([sd_m**2, 0 * sd_m, sd_m**2]))
    for variance in (0.3 * q, q, 5.0 * q):
        expected = 0.0
        for axis in range(2):
            process = GaussianProcessRegressor(Wiener(variance), alpha=sd_m**2, optimizer=None)
            process.fit(times_s[:, None], places[:, axis])
            first = multivariate_normal.logpdf(places[0, axis], 0.0, DIFFUSE_M2 + sd_m[0] ** 2)
            expected += process.log_marginal_likelihood_value_ - first
        assert RandomWalk(track, DAY_MS).log_likelihood(variance) == pytest.approx(expected, abs=2e-3)


def dense_conditional(times_s, q, noise, places, at_s):
    """Mean and covariance of the walk at any times given the fixes, by one big Gaussian with a flat start."""
    walk = DIFFUSE_M2 + q * np.minimum.outer(times_s, times_s)
    cross = DIFFUSE_M2 + q * np.minimum.outer(at_s, times_s)
    own = DIFFUSE_M2 + q * np.minimum.outer(at_s, at_s)
    seen = np.kron(walk, np.eye(2)) + noise
    gain = np.linalg.solve(seen, np.kron(cross, np.eye(2)).T).T
    return gain @ places.ravel(), np.kron(own, np.eye(2)) - gain @ np.kron(cross, np.eye(2)).T, seen


@pytest.mark.parametrize("seed", range(8))
def test_full_error_ellipses_against_a_dense_gaussian(seed):
    """Tilted ellipses up to 20 times as long as wide: states, covariances, lags, moments between, likelihood."""
    times_s, q, _, places = simulated(100 + seed, n=10)
    draws = np.random.default_rng(seed)
    major, ratio, angle = draws.uniform(10, 80, 10), draws.uniform(0.05, 1.0, 10), draws.uniform(0, np.pi, 10)
    turn = np.stack([np.stack([np.cos(angle), -np.sin(angle)], -1), np.stack([np.sin(angle), np.cos(angle)], -1)], -2)
    blocks = np.einsum("nij,nj,nkj->nik", turn, np.column_stack([major**2, (ratio * major) ** 2]), turn)
    noise = np.zeros((20, 20))
    for k in range(10):
        noise[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = blocks[k]
    track = track_at(places, times_s, np.column_stack([blocks[:, 0, 0], blocks[:, 0, 1], blocks[:, 1, 1]]))
    walk = RandomWalk(track, DAY_MS)
    found = walk.marginals(q)

    mean, covariance, seen = dense_conditional(times_s, q, noise, places, times_s)
    assert found.mean_m + places == pytest.approx(mean.reshape(10, 2), abs=3e-3)
    for k in range(10):
        block = covariance[2 * k : 2 * k + 2, 2 * k : 2 * k + 2]
        assert found.covariance_m2[k] == pytest.approx(block, rel=1e-3, abs=5e-3)
        if k < 9:
            lag = covariance[2 * k : 2 * k + 2, 2 * k + 2 : 2 * k + 4]
            assert found.lag_covariance_m2[k] == pytest.approx(lag, rel=1e-3, abs=5e-3)

    steps = covered_steps(track, DAY_MS)
    path = path_between_fixes(track, steps, found, q, 1.0)
    middle_s = 0.7 * times_s[:-1] + 0.3 * times_s[1:]
    mean, covariance, _ = dense_conditional(times_s, q, noise, places, middle_s)
    for part in range(9):
        block = covariance[2 * part : 2 * part + 2, 2 * part : 2 * part + 2]
        assert path.mean_m(part, 0.3) + origin_offset_m(steps, part) == pytest.approx(
            mean[2 * part : 2 * part + 2], abs=3e-3
        )
        assert path.covariance_at_m2(part, 0.3) == pytest.approx(block, rel=1e-3, abs=5e-3)

    first = multivariate_normal.logpdf(places[0], np.zeros(2), seen[:2, :2])
    expected = multivariate_normal.logpdf(places.ravel(), np.zeros(20), seen) - first
    assert walk.log_likelihood(q) == pytest.approx(expected, abs=3e-3)


def test_a_gap_too_long_to_bridge_parts_the_walk_in_two():
    """The likelihood is the sum of the two stretches, their states are those of each alone."""
    times_s, q, sd_m, places = simulated(42, n=12)
    times_s = times_s + np.where(np.arange(12) >= 7, 10_000.0, 0.0)
    covariance = np.column_stack([sd_m**2, 0 * sd_m, sd_m**2])
    whole = RandomWalk(track_at(places, times_s, covariance), 5_000_000.0)
    stretches = [
        RandomWalk(track_at(places[part], times_s[part], covariance[part]), 5_000_000.0)
        for part in (slice(0, 7), slice(7, 12))
    ]
    assert whole.log_likelihood(q) == pytest.approx(sum(part.log_likelihood(q) for part in stretches), rel=1e-12)
    means = np.concatenate([part.marginals(q).mean_m for part in stretches])
    assert whole.marginals(q).mean_m == pytest.approx(means, abs=1e-9)
