"""The one interface of every movement model: where the animal was at any covered time, as a Gaussian.

Between two fixes, in the plane frame of its part of the step, the mean is linear in time and the covariance
quadratic; that holds for the random walk with location error and for the Brownian bridge.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from estimators.defaults import EDGE_REACH_SD, LONGEST_STEP_M, WIDEST_SPREAD_M
from estimators.frames import WGS84, StepParts, carrying_rotation, east_north_axes, step_parts
from estimators.track import Track

FloatArray = NDArray[np.float64]
_BLOCK: Final = 128


@dataclass(frozen=True)
class CoveredSteps:
    """Steps between consecutive fixes that are bridged, cut into parts with plane frames.

    Attributes
    ----------
    parts : StepParts, n parts
    start_ms, end_ms : ndarray of float, shape (n,), time of the part's ends
    from_fix, to_fix : ndarray, shape (n, 2, 2), rotation carrying a deviation at the step's first and second fix
        into the part's axes
    """

    parts: StepParts
    start_ms: FloatArray
    end_ms: FloatArray
    from_fix: FloatArray
    to_fix: FloatArray

    def __len__(self) -> int:
        return len(self.start_ms)


def covered_steps(track: Track, longest_gap_ms: float) -> CoveredSteps:
    """Steps of a track that are no longer in time than the longest bridged gap.

    Parameters
    ----------
    track : Track
    longest_gap_ms : float, milliseconds
    """
    steps = np.nonzero(np.diff(track.time_ms) <= longest_gap_ms)[0]
    parts = step_parts(track.lon_deg, track.lat_deg, steps, LONGEST_STEP_M)
    begin = track.time_ms[parts.step].astype(np.float64)
    length = (track.time_ms[parts.step + 1] - track.time_ms[parts.step]).astype(np.float64)
    fix_axes = east_north_axes(track.lon_deg, track.lat_deg)
    return CoveredSteps(
        parts,
        begin + length * parts.start_share,
        begin + length * parts.end_share,
        carrying_rotation(fix_axes[parts.step], parts.axes),
        carrying_rotation(fix_axes[parts.step + 1], parts.axes),
    )


@dataclass(frozen=True)
class FixMarginals:
    """What a model knows of the animal's deviation from each fix, in the fix's own axes.

    Attributes
    ----------
    mean_m : ndarray, shape (n_fixes, 2), metres
    covariance_m2 : ndarray, shape (n_fixes, 2, 2)
    lag_covariance_m2 : ndarray, shape (n_fixes - 1, 2, 2), Cov(deviation k, deviation k + 1); each side in the
        axes of its own fix
    """

    mean_m: FloatArray
    covariance_m2: FloatArray
    lag_covariance_m2: FloatArray


@dataclass(frozen=True)
class GaussianPath:
    """One Gaussian path over the covered parts of a track.

    At the share b of a part (0 at its start, 1 at its end) the mean is ``start + b (end - start)`` and the
    covariance ``p0 + b p1 + b² p2``.

    Attributes
    ----------
    weight : float, share of this path in the mixture over the movement parameters
    steps : CoveredSteps, n parts
    start_m, end_m : ndarray, shape (n, 2), metres in the part's plane
    covariance_m2 : ndarray, shape (n, 3, 3); rows are p0, p1, p2, columns east variance, covariance, north variance
    """

    weight: float
    steps: CoveredSteps
    start_m: FloatArray
    end_m: FloatArray
    covariance_m2: FloatArray

    def mean_m(self, part: int, share: float) -> FloatArray:
        """Mean at a share of a part, shape (2,), metres in the part's plane."""
        return np.asarray(self.start_m[part] + share * (self.end_m[part] - self.start_m[part]))

    def covariance_at_m2(self, part: int, share: float) -> FloatArray:
        """Covariance at a share of a part, shape (2, 2), square metres."""
        xx, xy, yy = self.covariance_m2[part].T @ np.array([1.0, share, share * share])
        return np.array([[xx, xy], [xy, yy]])

    def reach_m(self) -> FloatArray:
        """Distance from each part's origin beyond which no edge matters to it, shape (n,), metres."""
        length_m = np.maximum(np.hypot(*self.start_m.T), np.hypot(*self.end_m.T))
        return np.asarray((EDGE_REACH_SD * self.largest_sd_m() + length_m) * 1.001 + 1.0)

    def largest_shift_m(self) -> FloatArray:
        """Distance of the mean from the straight path between the fixes, shape (n,), the larger of the part's ends."""
        parts = self.steps.parts
        shifts = (self.start_m - parts.start_m, self.end_m - parts.end_m)
        return np.asarray(np.maximum(*(np.hypot(shift[:, 0], shift[:, 1]) for shift in shifts)))

    def block_balls_m(self) -> FloatArray:
        """Balls around consecutive parts and their reach, shape (n_blocks, 4), centre and radius, metres."""
        if len(self.steps) == 0:
            return np.empty((0, 4))
        origins, reach = self.steps.parts.origin_m, self.reach_m()
        first = np.arange(0, len(origins), _BLOCK)
        count = np.diff(np.append(first, len(origins)))
        centre = np.add.reduceat(origins, first) / count[:, None]
        away = np.linalg.norm(origins - np.repeat(centre, count, axis=0), axis=1) + reach
        return np.column_stack([centre, np.maximum.reduceat(away, first)])

    def largest_sd_m(self) -> FloatArray:
        """Upper bound of the standard deviation over each part, shape (n,), metres."""
        return _largest_sd_m(self.covariance_m2)


def _largest_sd_m(covariance_m2: FloatArray) -> FloatArray:
    # The covariance is a convex combination of its three Bernstein coefficients.
    p0, p1, p2 = (covariance_m2[:, k] for k in range(3))
    bernstein = np.stack([p0, p0 + 0.5 * p1, p0 + p1 + p2])
    half = 0.5 * (bernstein[..., 0] + bernstein[..., 2])
    swing = np.hypot(0.5 * (bernstein[..., 0] - bernstein[..., 2]), bernstein[..., 1])
    return np.asarray(np.sqrt((half + swing).max(axis=0)))


def _at_most(values: FloatArray, size: FloatArray, limit: float) -> FloatArray:
    """Values scaled down, entry by entry, where their size is above a limit."""
    scale = np.minimum(1.0, limit / np.maximum(size, 1e-300))
    return np.asarray(values * scale.reshape((-1,) + (1,) * (values.ndim - 1)))


def path_between_fixes(
    track: Track, steps: CoveredSteps, marginals: FixMarginals, variance_m2_per_s: float, weight: float
) -> GaussianPath:
    """Path between fixes of a Brownian motion whose ends have the given joint Gaussian.

    Parameters
    ----------
    track : Track
    steps : CoveredSteps
    marginals : FixMarginals
    variance_m2_per_s : float, movement variance per axis
    weight : float, share in the mixture

    Notes
    -----
    With α the share of the step's time T, A and B the deviations at its ends: mean (1-α)E[A] + αE[B]; covariance
    (1-α)² Var A + α² Var B + α(1-α)(Cov(A, B) + Cov(B, A)) + α(1-α) T σ² (Horne et al. 2007, Appendix A, with
    the cross-covariance of the ends added). Spreads beyond `WIDEST_SPREAD_M` are taken as that wide.
    """
    k, parts = steps.parts.step, steps.parts
    shift_m = _at_most(marginals.mean_m, np.linalg.norm(marginals.mean_m, axis=1), WIDEST_SPREAD_M)
    mean_a = np.einsum("nij,nj->ni", steps.from_fix, shift_m[k])
    mean_b = np.einsum("nij,nj->ni", steps.to_fix, shift_m[k + 1])
    var_a = _carried(steps.from_fix, marginals.covariance_m2[k], steps.from_fix)
    var_b = _carried(steps.to_fix, marginals.covariance_m2[k + 1], steps.to_fix)
    lag = _carried(steps.from_fix, marginals.lag_covariance_m2[k], steps.to_fix)
    duration_s = (track.time_ms[k + 1] - track.time_ms[k]) / 1000.0
    middle = lag + np.swapaxes(lag, 1, 2) + (duration_s * variance_m2_per_s)[:, None, None] * np.eye(2)
    whole = _packed(var_a), _packed(middle - 2.0 * var_a), _packed(var_a + var_b - middle)
    s, width = parts.start_share[:, None], (parts.end_share - parts.start_share)[:, None]
    covariance = np.stack(
        [
            whole[0] + s * whole[1] + s * s * whole[2],
            width * (whole[1] + 2.0 * s * whole[2]),
            width**2 * whole[2],
        ],
        axis=1,
    )
    covariance = _at_most(covariance, _largest_sd_m(covariance) ** 2, WIDEST_SPREAD_M**2)
    e = parts.end_share[:, None]
    return GaussianPath(
        weight,
        steps,
        parts.start_m + (1.0 - s) * mean_a + s * mean_b,
        parts.end_m + (1.0 - e) * mean_a + e * mean_b,
        np.ascontiguousarray(covariance),
    )


def _carried(left: FloatArray, matrix: FloatArray, right: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("nij,njk,nlk->nil", left, matrix, right))


def _packed(matrix: FloatArray) -> FloatArray:
    return np.stack([matrix[:, 0, 0], 0.5 * (matrix[:, 0, 1] + matrix[:, 1, 0]), matrix[:, 1, 1]], axis=-1)


def fix_displacements(track: Track) -> tuple[FloatArray, FloatArray]:
    """Where fix k lies as seen from fix k + 1, and the rotation from its axes into those.

    Returns
    -------
    tuple of ndarray, shapes (n - 1, 2) metres and (n - 1, 2, 2)
    """
    _, back_deg, length_m = WGS84.inv(track.lon_deg[:-1], track.lat_deg[:-1], track.lon_deg[1:], track.lat_deg[1:])
    angle = np.deg2rad(back_deg)
    seen = np.stack([length_m * np.sin(angle), length_m * np.cos(angle)], axis=-1)
    axes = east_north_axes(track.lon_deg, track.lat_deg)
    return seen, carrying_rotation(axes[:-1], axes[1:])
