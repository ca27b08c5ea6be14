"""Exact mass of a bivariate normal inside a polygon, without a grid.

With the normal whitened to N(0, I) and the boundary walked with the inside on the left,

    P = W - (1/2π) Σ_edges ∫ exp(-r²/2) dθ,        W = how often the boundary winds around the mean,

and per edge ∫ exp(-r²/2) dθ = Δθ - h ∫ (1 - exp(-r²/2))/r² du, with h the distance of the edge's line, u the
position along it and r² = h² + u². The last integrand is entire, so a Gauss rule of few points is exact to the
digits that matter, on an edge as far from it. The edge term equals a difference of Owen's T function (Owen, D. B.,
Ann. Math. Stat. 27, 1956; DiDonato and Hageman, NSWC TR 80-166, 1980).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any, Final

import numpy as np
from numba import njit
from numpy.typing import NDArray

from estimators.defaults import EDGE_REACH_SD
from estimators.errors import EstimatorError

FloatArray = NDArray[np.float64]

_X6, _W6 = (np.ascontiguousarray(v) for v in np.polynomial.legendre.leggauss(6))
_X12, _W12 = (np.ascontiguousarray(v) for v in np.polynomial.legendre.leggauss(12))
NUDGE_SD: Final = 1e-10
"""The mean is moved by this share of a standard deviation, so that it is never on a vertex; P moves by less."""


@njit(cache=True)
def _smooth_integral(h: float, start: float, end: float) -> float:  # pragma: no cover - compiled
    """∫ (1 - exp(-(h² + u²)/2))/(h² + u²) du; error below 1e-10 by the bound for entire integrands."""
    length = end - start
    if length <= 0.8:
        half, middle, total = 0.5 * length, 0.5 * (start + end), 0.0
        for k in range(6):
            u = middle + half * _X6[k]
            r2 = max(h * h + u * u, 1e-30)
            total += _W6[k] * (1.0 - math.exp(-0.5 * r2)) / r2
        return total * half
    chunks = int(math.ceil(length / 3.0))  # noqa: RUF046 - a float in compiled code
    half, total = 0.5 * length / chunks, 0.0
    for chunk in range(chunks):
        middle = start + (2 * chunk + 1) * half
        for k in range(12):
            u = middle + half * _X12[k]
            r2 = max(h * h + u * u, 1e-30)
            total += _W12[k] * (1.0 - math.exp(-0.5 * r2)) / r2
    return total * half


@njit(cache=True)
def edge_loss(x1: float, y1: float, x2: float, y2: float, left: bool) -> float:  # pragma: no cover - compiled
    """∫ exp(-r²/2) dθ along an edge in whitened coordinates around the mean.

    ``left`` says on which side of the directed edge the mean is held to be, so that the winding number and the
    angle always agree.
    """
    dx, dy = x2 - x1, y2 - y1
    length = math.sqrt(dx * dx + dy * dy)
    if length == 0.0:
        return 0.0
    h = abs(x1 * dy - y1 * dx) / length
    if h >= EDGE_REACH_SD:
        return 0.0
    reach = math.sqrt(EDGE_REACH_SD * EDGE_REACH_SD - h * h)
    start = max((x1 * dx + y1 * dy) / length, -reach)
    end = min((x2 * dx + y2 * dy) / length, reach)
    if start >= end:
        return 0.0
    angle = math.atan2(h * (end - start), start * end + h * h)
    loss = angle - h * _smooth_integral(h, start, end)
    return loss if left else -loss


@njit(cache=True)
def left_of_upward(x1: float, y1: float, x2: float, y2: float) -> bool:  # pragma: no cover - compiled
    """Whether the origin is left of an edge, taken from its lower to its upper end.

    The same arithmetic for both directions of the edge, so that neighbouring zones agree to the last bit on
    which of them an edge belongs to.
    """
    if y1 > y2 or (y1 == y2 and x1 > x2):
        x1, y1, x2, y2 = x2, y2, x1, y1
    cross = (x2 - x1) * (-y1) + x1 * (y2 - y1)
    return cross > 0.0 or (cross == 0.0 and y1 == y2)


@njit(cache=True)
def winding_step(x1: float, y1: float, x2: float, y2: float) -> int:  # pragma: no cover - compiled
    """What an edge adds to the winding number around the origin (ray to the east)."""
    if (y1 <= 0.0) == (y2 <= 0.0):
        return 0
    if not left_of_upward(x1, y1, x2, y2):
        return 0
    return 1 if y2 > y1 else -1


@njit(cache=True)
def is_left(x1: float, y1: float, x2: float, y2: float) -> bool:  # pragma: no cover - compiled
    """Whether the origin is left of the directed edge, in agreement with `winding_step`."""
    upward = y1 < y2 or (y1 == y2 and x1 < x2)
    return left_of_upward(x1, y1, x2, y2) == upward


@njit(cache=True)
def _mass(vertices: Any, ring_first: Any, mean: Any, xx: float, xy: float, yy: float) -> float:  # pragma: no cover
    a = math.sqrt(xx)
    b = xy / a
    c = math.sqrt(yy - b * b)
    mx, my = mean[0] + NUDGE_SD * a, mean[1] + 0.7 * NUDGE_SD * c
    winding, loss = 0, 0.0
    for ring in range(len(ring_first) - 1):
        for k in range(ring_first[ring], ring_first[ring + 1] - 1):
            x1, y1 = vertices[k, 0] - mx, vertices[k, 1] - my
            x2, y2 = vertices[k + 1, 0] - mx, vertices[k + 1, 1] - my
            winding += winding_step(x1, y1, x2, y2)
            left = is_left(x1, y1, x2, y2)
            u1, u2 = x1 / a, x2 / a
            loss += edge_loss(u1, (y1 - b * u1) / c, u2, (y2 - b * u2) / c, left)
    return winding - loss / (2.0 * math.pi)


def gaussian_mass_in_polygon(
    mean_m: FloatArray, covariance_m2: FloatArray, rings_m: Sequence[FloatArray]
) -> FloatArray:
    """Probability that a bivariate normal point lies in a plane polygon.

    Parameters
    ----------
    mean_m : ndarray, shape (n, 2), metres
    covariance_m2 : ndarray, shape (n, 2, 2), square metres, positive definite
    rings_m : sequence of ndarray, shape (k, 2), metres
        Closed rings; outer rings anticlockwise, holes clockwise.

    Returns
    -------
    ndarray, shape (n,), no unit, each in [0, 1] to within 1e-9

    Raises
    ------
    EstimatorError
        A covariance is not positive definite.

    Notes
    -----
    See the module's own text for the formula. A mean on an edge gives one half.
    """
    covariance = np.asarray(covariance_m2, np.float64)
    determinant = covariance[:, 0, 0] * covariance[:, 1, 1] - covariance[:, 0, 1] ** 2
    if not np.all((covariance[:, 0, 0] > 0.0) & (determinant > 0.0)):
        worst = int(np.argmin(determinant))
        raise EstimatorError(
            "degenerate_covariance",
            f"Covariance {worst} is not positive definite: {covariance[worst].tolist()}. State a positive error.",
        )
    vertices = np.concatenate([np.asarray(ring, np.float64) for ring in rings_m])
    first = np.concatenate([[0], np.cumsum([len(ring) for ring in rings_m])]).astype(np.int64)
    return np.array(
        [
            _mass(vertices, first, mean, cov[0, 0], cov[0, 1], cov[1, 1])
            for mean, cov in zip(np.asarray(mean_m, np.float64), covariance, strict=True)
        ]
    )
