"""Random walk with location error, smoothed exactly (Pozdnyakov et al. 2014).

The state is the deviation from the fix in the fix's own east and north axes. It is carried along the geodesic to
the next fix and turned with it, so that no projection of the whole track is needed. Each stretch between gaps that
are too long to bridge starts afresh with a flat prior; all stretches share the movement variance.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from estimators.compiled import compiled
from estimators.gaussian_path import FixMarginals, fix_displacements
from estimators.track import Track

FloatArray = NDArray[np.float64]


@compiled()
def _filter(
    seen: Any, turn: Any, noise: Any, gap_s: Any, longest_s: float, q: float, mean: Any, cov: Any, keep: bool
) -> float:  # pragma: no cover - compiled
    """Kalman filter of deviations; returns the log-likelihood, fills `mean` and `cov` where asked to."""
    total = 0.0
    m0, m1 = 0.0, 0.0
    c00, c01, c11 = noise[0, 0, 0], noise[0, 0, 1], noise[0, 1, 1]
    if keep:
        mean[0, 0], mean[0, 1] = m0, m1
        cov[0, 0], cov[0, 1], cov[0, 2] = c00, c01, c11
    for k in range(len(gap_s)):
        r00, r01, r11 = noise[k + 1, 0, 0], noise[k + 1, 0, 1], noise[k + 1, 1, 1]
        if gap_s[k] > longest_s:
            m0, m1, c00, c01, c11 = 0.0, 0.0, r00, r01, r11
        else:
            a, b, c, d = turn[k, 0, 0], turn[k, 0, 1], turn[k, 1, 0], turn[k, 1, 1]
            p0 = seen[k, 0] + a * m0 + b * m1
            p1 = seen[k, 1] + c * m0 + d * m1
            p00 = a * a * c00 + 2 * a * b * c01 + b * b * c11 + q * gap_s[k]
            p01 = a * c * c00 + (a * d + b * c) * c01 + b * d * c11
            p11 = c * c * c00 + 2 * c * d * c01 + d * d * c11 + q * gap_s[k]
            s00, s01, s11 = p00 + r00, p01 + r01, p11 + r11
            det = s00 * s11 - s01 * s01
            i00, i01, i11 = s11 / det, -s01 / det, s00 / det
            total += -math.log(2.0 * math.pi) - 0.5 * math.log(det)
            total -= 0.5 * (p0 * p0 * i00 + 2 * p0 * p1 * i01 + p1 * p1 * i11)
            # The new fix is at deviation 0: innovation -p; gain P S⁻¹.
            g00, g01 = p00 * i00 + p01 * i01, p00 * i01 + p01 * i11
            g10, g11 = p01 * i00 + p11 * i01, p01 * i01 + p11 * i11
            m0, m1 = p0 - g00 * p0 - g01 * p1, p1 - g10 * p0 - g11 * p1
            # (I - G) P = G R, positive definite in floating point too.
            c00 = g00 * r00 + g01 * r01
            c01 = 0.5 * (g00 * r01 + g01 * r11 + g10 * r00 + g11 * r01)
            c11 = g10 * r01 + g11 * r11
        if keep:
            mean[k + 1, 0], mean[k + 1, 1] = m0, m1
            cov[k + 1, 0], cov[k + 1, 1], cov[k + 1, 2] = c00, c01, c11
    return total


@compiled()
def _product(p: Any, q: Any) -> Any:  # pragma: no cover - compiled
    """Product of two 2×2 matrices, each as its rows one after the other."""
    return (
        p[0] * q[0] + p[1] * q[2],
        p[0] * q[1] + p[1] * q[3],
        p[2] * q[0] + p[3] * q[2],
        p[2] * q[1] + p[3] * q[3],
    )


@compiled()
def _turned(p: Any, q: Any) -> Any:  # pragma: no cover - compiled
    """P q pᵀ for 2×2 matrices."""
    return _product(_product(p, q), (p[0], p[2], p[1], p[3]))


@compiled()
def _smooth(
    seen: Any, turn: Any, gap_s: Any, longest_s: float, q: float, mean: Any, cov: Any, lag: Any
) -> None:  # pragma: no cover - compiled
    """Rauch-Tung-Striebel smoother, in place; `lag` gains Cov(deviation k, deviation k + 1)."""
    for k in range(len(gap_s) - 1, -1, -1):
        if gap_s[k] > longest_s:
            lag[k, :, :] = 0.0
            continue
        grown = q * gap_s[k]
        rot = (turn[k, 0, 0], turn[k, 0, 1], turn[k, 1, 0], turn[k, 1, 1])
        p = (cov[k, 0], cov[k, 1], cov[k, 1], cov[k, 2])
        s00, s01, _, s11 = _turned(rot, p)
        s00, s11 = s00 + grown, s11 + grown
        det = s00 * s11 - s01 * s01
        gain = _product(_product(p, (rot[0], rot[2], rot[1], rot[3])), (s11 / det, -s01 / det, -s01 / det, s00 / det))
        step0 = mean[k + 1, 0] - (seen[k, 0] + rot[0] * mean[k, 0] + rot[1] * mean[k, 1])
        step1 = mean[k + 1, 1] - (seen[k, 1] + rot[2] * mean[k, 0] + rot[3] * mean[k, 1])
        mean[k, 0] += gain[0] * step0 + gain[1] * step1
        mean[k, 1] += gain[2] * step0 + gain[3] * step1
        # P - G (A - after) Gᵀ, written so that nothing is subtracted: Joseph form of the backward step.
        carried = _product(gain, rot)
        kept = _turned((1.0 - carried[0], -carried[1], -carried[2], 1.0 - carried[3]), p)
        v00, v01, v11 = cov[k + 1, 0], cov[k + 1, 1], cov[k + 1, 2]
        fed = _turned(gain, (v00 + grown, v01, v01, v11 + grown))
        cov[k, 0], cov[k, 2] = kept[0] + fed[0], kept[3] + fed[3]
        cov[k, 1] = 0.5 * (kept[1] + kept[2] + fed[1] + fed[2])
        lag[k, 0, 0], lag[k, 0, 1], lag[k, 1, 0], lag[k, 1, 1] = _product(gain, (v00, v01, v01, v11))


class RandomWalk:
    """Random walk with location error for one track.

    Parameters
    ----------
    track : Track
    longest_gap_ms : float, steps longer than this are not bridged
    """

    name = "random_walk"

    def __init__(self, track: Track, longest_gap_ms: float) -> None:
        self._track = track
        self._seen, self._turn = fix_displacements(track)
        self._gap_s = np.diff(track.time_ms) / 1000.0
        self._longest_s = longest_gap_ms / 1000.0

    def log_likelihood(self, variance_m2_per_s: float) -> float:
        """Log-likelihood of the fixes, each stretch's first given, at a movement variance in m²/s."""
        none = np.empty((0, 3))
        return float(
            _filter(
                self._seen,
                self._turn,
                self._track.covariance_m2,
                self._gap_s,
                self._longest_s,
                variance_m2_per_s,
                none,
                none,
                False,
            )
        )

    def marginals(self, variance_m2_per_s: float) -> FixMarginals:
        """Smoothed deviations at the fixes and their lag-one covariances."""
        count = len(self._track)
        mean, packed, lag = np.zeros((count, 2)), np.zeros((count, 3)), np.zeros((max(count - 1, 0), 2, 2))
        _filter(
            self._seen,
            self._turn,
            self._track.covariance_m2,
            self._gap_s,
            self._longest_s,
            variance_m2_per_s,
            mean,
            packed,
            True,
        )
        _smooth(self._seen, self._turn, self._gap_s, self._longest_s, variance_m2_per_s, mean, packed, lag)
        covariance = np.stack([packed[:, :2], packed[:, 1:]], axis=1)
        return FixMarginals(mean, covariance, lag)
