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
from numpy.typing import NDArray

from estimators.compiled import compiled, compiled_contracted
from estimators.defaults import EDGE_REACH_SD
from estimators.errors import EstimatorError

FloatArray = NDArray[np.float64]

_RULES: Final = np.array([2, 3, 4, 6, 8])
_LONGEST_FOR_RULE: Final = np.array([0.03, 0.22, 0.6, 1.4, 2.6])
_X, _W = np.zeros((5, 8)), np.zeros((5, 8))
for _row, _count in enumerate(_RULES):
    _X[_row, :_count], _W[_row, :_count] = np.polynomial.legendre.leggauss(_count)
EDGE_ERROR_PER_SD: Final = 2.5e-10
EDGE_ERROR: Final = 1e-12
"""Largest error of one edge's share of the mass: so much per standard deviation of its length, and so much besides.

The integrand g(r²/2)/2 has derivatives in u of order 2n below 1.09 √((2n)!)/(2(n + 1)), so an n-point Gauss rule over
a length L errs by at most L^(2n+1) (n!)⁴ / ((2n + 1) (2n)!³) times that, and the mass by h/2π ≤ 6/2π times as much:
below 2e-10 L for each of `_RULES` up to its `_LONGEST_FOR_RULE`. The table adds less than 2e-11 L; the arctangent and
rounding are the rest.
"""

# g(q) = (1 - exp(-q))/q = ∫₀¹ exp(-qs) ds by its Taylor polynomials around the middles of bins of width 1/8.
# The next term is below 2e-11.
_BINS: Final = 148
_S, _V = np.polynomial.legendre.leggauss(40)
_S, _V = 0.5 * (_S + 1.0), 0.5 * _V
_G: Final = np.array(
    [
        [float(_V @ ((-_S) ** k * np.exp(-0.125 * (b + 0.5) * _S))) / math.factorial(k) for k in range(6)]
        for b in range(_BINS)
    ]
)
NUDGE_SD: Final = 1e-10
"""The mean is moved by this share of a standard deviation, so that it is never on a vertex; P moves by less."""


@compiled_contracted()
def _smooth_integral(h2: float, start: float, end: float) -> float:  # pragma: no cover - compiled
    """∫ (1 - exp(-(h² + u²)/2))/(h² + u²) du."""
    length = end - start
    pieces = 1.0
    if length <= _LONGEST_FOR_RULE[2]:
        rule = 0 if length <= _LONGEST_FOR_RULE[0] else (1 if length <= _LONGEST_FOR_RULE[1] else 2)
    elif length <= _LONGEST_FOR_RULE[4]:
        rule = 3 if length <= _LONGEST_FOR_RULE[3] else 4
    else:
        rule, pieces = 4, math.ceil(length / _LONGEST_FOR_RULE[4])
    half, middle, total = 0.5 * length / pieces, start, 0.0
    middle = start + half
    while middle < end:
        for k in range(_RULES[rule]):
            u = middle + half * _X[rule, k]
            q = 0.5 * (h2 + u * u)
            b = int(8.0 * q)
            d = q - 0.125 * (b + 0.5)
            tail = _G[b, 3] + d * (_G[b, 4] + d * _G[b, 5])
            total += _W[rule, k] * (_G[b, 0] + d * (_G[b, 1] + d * (_G[b, 2] + d * tail)))
        middle += 2.0 * half
    return 0.5 * half * total


@compiled_contracted()
def _angle(sine: float, cosine: float) -> float:  # pragma: no cover - compiled
    """Angle of a direction in the upper half plane, to within 1e-12."""
    if 4.0 * sine >= cosine:
        return math.atan2(sine, cosine)
    t = sine / cosine
    s = t * t
    tail = 1 / 9 - s * (1 / 11 - s * (1 / 13 - s * (1 / 15 - s / 17)))
    return t * (1.0 - s * (1 / 3 - s * (1 / 5 - s * (1 / 7 - s * tail))))


@compiled_contracted()
def edge_loss(x1: float, y1: float, x2: float, y2: float) -> float:  # pragma: no cover - compiled
    """∫ exp(-r²/2) dθ ≥ 0 along an edge in whitened coordinates around the mean; the same for both directions."""
    reach2 = EDGE_REACH_SD * EDGE_REACH_SD
    dx, dy = x2 - x1, y2 - y1
    length2 = dx * dx + dy * dy
    cross = abs(x1 * dy - y1 * dx)
    if cross * cross >= reach2 * length2:
        return 0.0
    first2, last2 = x1 * x1 + y1 * y1, x2 * x2 + y2 * y2
    first, last = x1 * dx + y1 * dy, x2 * dx + y2 * dy
    if (first > 0.0 and first2 > reach2) or (last < 0.0 and last2 > reach2):
        return 0.0
    per_length = 1.0 / math.sqrt(length2)
    h = cross * per_length
    start, end = first * per_length, last * per_length
    if first2 > reach2 or last2 > reach2:
        reach = math.sqrt(reach2 - h * h)
        start, end = max(start, -reach), min(end, reach)
        angle = _angle(h * (end - start), start * end + h * h)
    else:
        angle = _angle(cross, x1 * x2 + y1 * y2)
    return angle - h * _smooth_integral(h * h, start, end)


@compiled()
def is_left(x1: float, y1: float, x2: float, y2: float) -> bool:  # pragma: no cover - compiled
    """Whether the origin is left of an edge that runs upwards (y1 < y2, or level and x1 < x2).

    Edges are always asked about in that direction, so that neighbouring zones agree to the last bit on which of
    them an edge belongs to.
    """
    cross = (x2 - x1) * (-y1) + x1 * (y2 - y1)
    return cross > 0.0 or (cross == 0.0 and y1 == y2)


@compiled()
def upward_edge(out: Any, row: int, x1: float, y1: float, x2: float, y2: float) -> None:  # pragma: no cover
    """Write an edge as lower end, upper end, and 1 if it ran upwards, else -1."""
    if y1 < y2 or (y1 == y2 and x1 < x2):
        out[row, 0], out[row, 1], out[row, 2], out[row, 3], out[row, 4] = x1, y1, x2, y2, 1.0
    else:
        out[row, 0], out[row, 1], out[row, 2], out[row, 3], out[row, 4] = x2, y2, x1, y1, -1.0


@compiled()
def winding_number(edges: Any, first: int, last: int, x: float, y: float) -> float:  # pragma: no cover - compiled
    """What upward edges first to last - 1 add to the winding number around a place (ray to the east)."""
    winding = 0.0
    for k in range(first, last):
        y1, y2 = edges[k, 1] - y, edges[k, 3] - y
        if y1 <= 0.0 < y2 and is_left(edges[k, 0] - x, y1, edges[k, 2] - x, y2):
            winding += edges[k, 4]
    return winding


@compiled()
def mass_of_edges(
    edges: Any, near: int, far: int, x: float, y: float, xx: float, xy: float, yy: float
) -> float:  # pragma: no cover - compiled
    """Mass of a Gaussian inside upward edges.

    Parameters
    ----------
    edges : ndarray, shape (m, 5), rows from `upward_edge`
    near, far : int, the first `near` rows count with their loss, the last `far` rows only wind
    x, y : float, mean
    xx, xy, yy : float, covariance
    """
    a = math.sqrt(xx)
    c = math.sqrt(max(yy - xy * xy / xx, 1e-300))
    x += NUDGE_SD * a
    y += 0.7 * NUDGE_SD * c
    # Whitening: u = x/a, v = (y - (xy/xx) x)/c.
    per_a, per_c, slant = 1.0 / a, 1.0 / c, xy / xx
    mass = winding_number(edges, len(edges) - far, len(edges), x, y)
    for k in range(near):
        x1, y1, x2, y2 = edges[k, 0] - x, edges[k, 1] - y, edges[k, 2] - x, edges[k, 3] - y
        left = is_left(x1, y1, x2, y2)
        v1, v2 = (y1 - slant * x1) * per_c, (y2 - slant * x2) * per_c
        loss = edge_loss(x1 * per_a, v1, x2 * per_a, v2) * (0.5 / math.pi)
        wound = 1.0 if left and y1 <= 0.0 < y2 else 0.0
        mass += edges[k, 4] * (wound - (loss if left else -loss))
    return mass


@compiled()
def _masses(vertices: Any, ring_first: Any, means: Any, covariances: Any) -> Any:  # pragma: no cover - compiled
    edges, near = np.empty((len(vertices), 5)), 0
    for ring in range(len(ring_first) - 1):
        for k in range(ring_first[ring], ring_first[ring + 1] - 1):
            upward_edge(edges, near, vertices[k, 0], vertices[k, 1], vertices[k + 1, 0], vertices[k + 1, 1])
            near += 1
    found = np.empty(len(means))
    for n in range(len(means)):
        v = covariances[n]
        found[n] = mass_of_edges(edges, near, 0, means[n, 0], means[n, 1], v[0, 0], v[0, 1], v[1, 1])
    return found


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
    ndarray, shape (n,), no unit, each in [0, 1] to within 2e-8

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
    return np.asarray(_masses(vertices, first, np.asarray(mean_m, np.float64), covariance))
