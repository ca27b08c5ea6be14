"""Mass of a Gaussian path inside a zone, integrated over covered time with a proven error bound.

On a panel of a step the mean is linear and the covariance quadratic in time, and both continue to complex time. With
A and B the real and imaginary part of the covariance and b the imaginary part of the mean, the mass inside any set is
there at most M = √(|det(A + iB)| / det A) · exp(bᵀA⁻¹b / 2) while A is positive definite. So an n-point Gauss rule on
a panel of length L errs by at most (64/15) M ρ^(-2(n-1)) / (1 - ρ⁻²) · L/2 on the Bernstein ellipse of parameter ρ
(Trefethen, Approximation Theory and Approximation Practice, theorem 19.3). Panels are halved until that holds.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from estimators.compiled import compiled
from estimators.defaults import (
    EDGE_DEVIATION_FINEST_M,
    EDGE_DEVIATION_SD_SHARE,
    EDGE_REACH_SD,
    INTEGRATION_LIMIT,
    TRIVIAL_NUMERICAL_ERROR,
)
from estimators.gaussian_path import GaussianPath
from estimators.near_edges import collect_edges, place_in_space_m
from estimators.polygon_mass import EDGE_ERROR, EDGE_ERROR_PER_SD, mass_of_edges, winding_number
from estimators.zone_edges import ZoneEdges

FloatArray = NDArray[np.float64]

_DEEPEST: Final = 60
_COUNTS: Final = np.array([4, 5, 6, 7, 8, 9, 10, 12])
_X, _W = np.zeros((len(_COUNTS), 12)), np.zeros((len(_COUNTS), 12))
for _row, _count in enumerate(_COUNTS):
    _X[_row, :_count], _W[_row, :_count] = np.polynomial.legendre.leggauss(_count)
_RHOS: Final = np.array([1.5, 1.8, 2.2, 2.6, 3.2, 4.0, 5.0, 6.5, 9.0, 13.0, 20.0])
# (64/15)/2 ρ^(-2(n-1))/(1 - ρ⁻²): the bound without M, per unit of a panel's length.
_DECAY: Final = np.array([[(64 / 30) * r ** (-2.0 * (n - 1)) / (1.0 - r**-2.0) for n in _COUNTS] for r in _RHOS])


@dataclass(frozen=True)
class Cells:
    """Pieces of covered time: a stretch of one part of the path that belongs to one period.

    Attributes
    ----------
    part, period : ndarray of int, shape (n,)
    start, end : ndarray, shape (n,), shares of the part
    duration_ms : ndarray, shape (n,)
    """

    part: NDArray[np.int64]
    period: NDArray[np.int64]
    start: FloatArray
    end: FloatArray
    duration_ms: FloatArray


@compiled()
def _largest_eigenvalue(xx: float, xy: float, yy: float) -> float:  # pragma: no cover - compiled
    return 0.5 * (xx + yy) + math.sqrt(0.25 * (xx - yy) * (xx - yy) + xy * xy)


@compiled()
def _at(p: Any, share: float, k: int) -> float:  # pragma: no cover - compiled
    return float(p[0, k] + share * (p[1, k] + share * p[2, k]))


@compiled()
def _panel_sds(p: Any, lo: float, hi: float) -> tuple[float, float]:  # pragma: no cover - compiled
    """Upper bound of the standard deviation over a panel, and its least value at the panel's ends and middle."""
    top, low = 0.0, 1e300
    for k in range(3):
        share = lo + 0.5 * k * (hi - lo)
        xx, xy, yy = _at(p, share, 0), _at(p, share, 1), _at(p, share, 2)
        large = _largest_eigenvalue(xx, xy, yy)
        low = min(low, xx + yy - large)
        if k != 1:
            top = max(top, large)
    # The middle Bernstein coefficient: value at the start and half the slope over the panel.
    half = 0.5 * (hi - lo)
    xx = _at(p, lo, 0) + half * (p[1, 0] + 2.0 * lo * p[2, 0])
    xy = _at(p, lo, 1) + half * (p[1, 1] + 2.0 * lo * p[2, 1])
    yy = _at(p, lo, 2) + half * (p[1, 2] + 2.0 * lo * p[2, 2])
    top = max(top, _largest_eigenvalue(xx, xy, yy))
    return math.sqrt(top), math.sqrt(max(low, 0.0))


@compiled()
def _whitened(p: Any, middle: float, half: float, dx: float, dy: float, q: Any) -> float:  # pragma: no cover
    """Covariance polynomial in z, share = middle + half z, whitened at z = 0; returns the whitened mean's speed."""
    a = math.sqrt(_at(p, middle, 0))
    b = _at(p, middle, 1) / a
    c = math.sqrt(max(_at(p, middle, 2) - b * b, 1e-300))
    for order in range(1, 3):
        if order == 1:
            xx = half * (p[1, 0] + 2.0 * middle * p[2, 0])
            xy = half * (p[1, 1] + 2.0 * middle * p[2, 1])
            yy = half * (p[1, 2] + 2.0 * middle * p[2, 2])
        else:
            xx, xy, yy = half * half * p[2, 0], half * half * p[2, 1], half * half * p[2, 2]
        q[order, 0], q[order, 1] = xx / (a * a), (xy - b * xx / a) / (a * c)
        q[order, 2] = (yy - 2.0 * b * xy / a + b * b * xx / (a * a)) / (c * c)
    ux = dx * half / a
    uy = (dy * half - b * ux) / c
    return math.hypot(ux, uy)


@compiled()
def _norm(xx: float, xy: float, yy: float) -> float:  # pragma: no cover - compiled
    return abs(0.5 * (xx + yy)) + math.sqrt(0.25 * (xx - yy) * (xx - yy) + xy * xy)


@compiled()
def _rule_for_panel(
    p: Any, lo: float, hi: float, dx: float, dy: float, q: Any, limit: float
) -> tuple[int, float]:  # pragma: no cover
    """Smallest Gauss rule whose bound is below the limit (an index, or -1), and that bound per unit of length."""
    half = 0.5 * (hi - lo)
    speed = _whitened(p, lo + half, half, dx, dy, q)
    convex = max(0.0, _largest_eigenvalue(q[2, 0], q[2, 1], q[2, 2]))
    bend, slope = _norm(q[2, 0], q[2, 1], q[2, 2]), _norm(q[1, 0], q[1, 1], q[1, 2])
    rule, bound = len(_COUNTS), 1.0
    for row in range(len(_RHOS)):
        rho = _RHOS[row]
        width, height = 0.5 * (rho + 1.0 / rho), 0.5 * (rho - 1.0 / rho)
        # Least eigenvalue of the real part over the rectangle |Re z| ≤ width, |Im z| ≤ height.
        ends = 1e300
        for sign in (-1.0, 1.0):
            xx = 1.0 + sign * width * q[1, 0] + width * width * q[2, 0]
            xy = sign * width * q[1, 1] + width * width * q[2, 1]
            yy = 1.0 + sign * width * q[1, 2] + width * width * q[2, 2]
            ends = min(ends, xx + yy - _largest_eigenvalue(xx, xy, yy))
        least = ends - convex * (width * width + height * height)
        if least <= 1e-3:
            break
        turn = height * (slope + 2.0 * width * bend)
        power = 0.5 * (speed * height) ** 2 / least
        if power > 600.0:
            break
        growth = math.sqrt(1.0 + (turn / least) ** 2) * math.exp(power)
        better = False
        for k in range(min(rule + 1, len(_COUNTS))):
            reached = growth * _DECAY[row, k]
            if reached <= limit and (k < rule or reached < bound):
                rule, bound, better = k, reached, True
                break
        if not better and rule < len(_COUNTS):
            break
    return (rule, bound) if rule < len(_COUNTS) else (-1, 1.0)


@compiled()
def _panel_mass(
    out: Any, near: int, far: int, rule: int, start: Any, end: Any, p: Any, lo: float, hi: float
) -> float:  # pragma: no cover - compiled
    """Mean mass over a panel by a Gauss rule."""
    middle, half, total = 0.5 * (lo + hi), 0.5 * (hi - lo), 0.0
    for k in range(_COUNTS[rule]):
        share = middle + half * _X[rule, k]
        x, y = start[0] + share * (end[0] - start[0]), start[1] + share * (end[1] - start[1])
        xx, xy, yy = _at(p, share, 0), _at(p, share, 1), _at(p, share, 2)
        total += _W[rule, k] * mass_of_edges(out, near, far, x, y, xx, xy, yy)
    return 0.5 * total


@compiled()
def _edges_error(out: Any, near: int, least_sd_m: float) -> float:  # pragma: no cover - compiled
    """Bound on the error of all near edges' shares of the mass; no edge counts beyond its chord within reach."""
    length = 0.0
    for k in range(near):
        dx, dy = out[k, 2] - out[k, 0], out[k, 3] - out[k, 1]
        length += min(math.sqrt(dx * dx + dy * dy) / least_sd_m, 2.0 * EDGE_REACH_SD)
    return length * EDGE_ERROR_PER_SD + near * EDGE_ERROR


@compiled()
def _level_of_detail(edges: Any, least_sd_m: float) -> int:  # pragma: no cover - compiled
    """Coarsest level of the boundary that a path of at least this standard deviation may be held against."""
    level, deviation_m, top = 0, EDGE_DEVIATION_FINEST_M, len(edges.level_first_root) - 2
    while level < top and 4.0 * deviation_m <= EDGE_DEVIATION_SD_SHARE * least_sd_m:
        level, deviation_m = level + 1, 4.0 * deviation_m
    return level


@compiled()
def _cell_mass(
    edges: Any, origin: Any, axes: Any, start: Any, end: Any, p: Any, lo0: float, hi0: float, limit: float, work: Any
) -> tuple[float, float, int]:  # pragma: no cover - compiled
    """Integral of the mass over the shares [lo0, hi0] of a part, its error bound, and pairs of node and near edge."""
    out, stack, panels, q, place = work
    panels[0, 0], panels[0, 1], panels[0, 2] = lo0, hi0, 0.0
    depth, total, error, pairs = 1, 0.0, 0.0, 0
    dx, dy = end[0] - start[0], end[1] - start[1]
    while depth > 0:
        depth -= 1
        lo, hi, halvings = panels[depth, 0], panels[depth, 1], panels[depth, 2]
        largest, least = _panel_sds(p, lo, hi)
        middle, width = 0.5 * (lo + hi), hi - lo
        mx, my = start[0] + middle * dx, start[1] + middle * dy
        reach = EDGE_REACH_SD * largest + 0.5 * width * math.sqrt(dx * dx + dy * dy)
        rule, bound = -1, 1.0
        if halvings > 0.0:
            rule, bound = _rule_for_panel(p, lo, hi, dx, dy, q, limit)
        # Edges are looked for at every other halving only; until then a panel is held to be near.
        if rule >= 0 or halvings % 2.0 == 0.0:
            place_in_space_m(mx, my, origin, axes, place)
            level = _level_of_detail(edges, least)
            near, far = collect_edges(edges, level, place, reach, origin, axes, out, stack)
            if near == 0:
                total += width * winding_number(out, len(out) - far, len(out), mx, my)
                continue
        if halvings == 0.0:
            rule, bound = _rule_for_panel(p, lo, hi, dx, dy, q, limit)
        if rule < 0 and halvings < _DEEPEST:
            panels[depth, 0], panels[depth, 1], panels[depth, 2] = middle, hi, halvings + 1.0
            panels[depth + 1, 0], panels[depth + 1, 1], panels[depth + 1, 2] = lo, middle, halvings + 1.0
            depth += 2
            continue
        rule = max(rule, 0)
        error += width * (bound + _edges_error(out, near, least))
        pairs += near * _COUNTS[rule]
        total += width * _panel_mass(out, near, far, rule, start, end, p, lo, hi)
    return total, error, pairs


@compiled()
def _integrate(
    edges: Any,
    origins: Any,
    axes: Any,
    starts: Any,
    ends: Any,
    covariances: Any,
    reaches: Any,
    cells: Any,
    limit: float,
    sums: Any,
) -> None:  # pragma: no cover - compiled
    part, period, lows, highs, durations = cells
    room = len(edges.vertices_m) + 64 * len(edges.root) + 64
    work = (np.empty((room, 5)), np.empty(256, np.int64), np.empty((130, 3)), np.zeros((3, 3)), np.empty(3))
    ball = edges.ball_m
    for c in range(len(part)):
        k = part[c]
        gap2 = (ball[0] - origins[k, 0]) ** 2 + (ball[1] - origins[k, 1]) ** 2 + (ball[2] - origins[k, 2]) ** 2
        if gap2 > (ball[3] + reaches[k]) ** 2:
            continue
        total, error, pairs = _cell_mass(
            edges, origins[k], axes[k], starts[k], ends[k], covariances[k], lows[c], highs[c], limit, work
        )
        width = highs[c] - lows[c]
        if width <= 0.0:
            continue
        sums[period[c], 0] += durations[c] * total / width
        sums[period[c], 1] += durations[c] * error / width
        sums[period[c], 2] += pairs


def integrated_zone_mass(
    path: GaussianPath, edges: ZoneEdges, cells: Cells, n_periods: int, share: float = 1.0
) -> FloatArray:
    """Time that a path is expected to spend inside a zone, per period.

    Parameters
    ----------
    path : GaussianPath
    edges : ZoneEdges, a prepared boundary
    cells : Cells, the covered time to integrate over
    n_periods : int
    share : float
        Share of the allowed error, where the boundary is one of several pieces of a zone; the pieces are disjoint, so
        what lies beyond the reach of all their edges is lost only once.

    Returns
    -------
    ndarray, shape (n_periods, 3): milliseconds expected inside; bound of their error; pairs of node and edge
        in reach

    Notes
    -----
    The bound holds the panel bounds, the edges left out beyond `EDGE_REACH_SD` and the edge integrals' own error.
    It speaks of the integration, not of the model and not of the geometry.
    """
    sums = np.zeros((n_periods, 3))
    parts = path.steps.parts
    _integrate(
        edges,
        parts.origin_m,
        parts.axes,
        path.start_m,
        path.end_m,
        path.covariance_m2,
        path.reach_m(),
        (cells.part, cells.period, cells.start, cells.end, cells.duration_ms),
        share * INTEGRATION_LIMIT,
        sums,
    )
    covered = np.bincount(cells.period, weights=cells.duration_ms, minlength=n_periods)
    sums[:, 1] += share * TRIVIAL_NUMERICAL_ERROR * covered
    return sums
