"""The Brownian bridge as published (Horne et al. 2007, Ecology 88:2354-2363): independent bridges between fixes.

The movement variance is judged by leaving out every other fix; the left-out fix's own error is included. With
location error the bridges are not independent, so the random walk is the better default; this is by request.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from estimators.frames import earth_centred_m, east_north_axes, plane_coordinates_m
from estimators.gaussian_path import FixMarginals
from estimators.track import Track

FloatArray = NDArray[np.float64]


class BrownianBridge:
    """Independent Brownian bridges for one track.

    Parameters
    ----------
    track : Track
    longest_gap_ms : float, steps longer than this are not bridged
    """

    name = "brownian_bridge"

    def __init__(self, track: Track, longest_gap_ms: float) -> None:
        self._track = track
        left_out = _left_out_fixes(np.diff(track.time_ms) <= longest_gap_ms)
        self._time_s, self._alpha, self._residual, self._error = _residuals(track, left_out)

    def log_likelihood(self, variance_m2_per_s: float) -> float:
        """Log-likelihood of the left-out fixes given their neighbours, at a movement variance in m²/s.

        Residual of fix i from the chord of its neighbours ~ N(0, Tα(1-α)σ² + (1-α)² R₋ + α² R₊ + R).
        """
        spread = (self._time_s * self._alpha * (1.0 - self._alpha) * variance_m2_per_s)[:, None, None]
        covariance = self._error + spread * np.eye(2)
        determinant = covariance[:, 0, 0] * covariance[:, 1, 1] - covariance[:, 0, 1] ** 2
        x, y = self._residual[:, 0], self._residual[:, 1]
        square = x * x * covariance[:, 1, 1] - 2.0 * x * y * covariance[:, 0, 1] + y * y * covariance[:, 0, 0]
        return float(np.sum(-np.log(2.0 * np.pi) - 0.5 * np.log(determinant) - 0.5 * square / determinant))

    def marginals(self, variance_m2_per_s: float) -> FixMarginals:
        """The fixes themselves with their own errors, independent of each other."""
        count = len(self._track)
        return FixMarginals(np.zeros((count, 2)), self._track.covariance_m2, np.zeros((max(count - 1, 0), 2, 2)))


def _left_out_fixes(bridged: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Every other fix of each stretch: the second, the fourth, …, that has a neighbour on either side."""
    found, place = [], 0
    for k, joined in enumerate(bridged):
        place = place + 1 if joined else 0
        if place % 2 == 1 and k + 1 < len(bridged) and bridged[k + 1]:
            found.append(k + 1)
    return np.array(found, dtype=np.int64)


def _residuals(track: Track, left_out: NDArray[np.int64]) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    before, after = left_out - 1, left_out + 1
    time_s = (track.time_ms[after] - track.time_ms[before]) / 1000.0
    alpha = (track.time_ms[left_out] - track.time_ms[before]) / 1000.0 / time_s
    places = earth_centred_m(track.lon_deg, track.lat_deg)
    axes = east_north_axes(track.lon_deg, track.lat_deg)
    ends = [plane_coordinates_m(places[k], places[left_out], axes[left_out]) for k in (before, after)]
    residual = -((1.0 - alpha)[:, None] * ends[0] + alpha[:, None] * ends[1])
    error = track.covariance_m2
    a = alpha[:, None, None]
    # The errors of the neighbours are taken in their own axes; the turn over one step is far below their size.
    total = (1.0 - a) ** 2 * error[before] + a**2 * error[after] + error[left_out]
    return time_s, alpha, residual, total
