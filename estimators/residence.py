"""Time inside a zone along the straight (geodesic) path between fixes, with exact crossing times; visits.

A path on an edge belongs to the zone on one fixed side, the same for both zones that share the edge.
"""

from __future__ import annotations

import math
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from estimators.compiled import compiled
from estimators.gaussian_path import CoveredSteps
from estimators.near_edges import collect_edges, place_in_space_m
from estimators.polygon_mass import winding_number
from estimators.zone_edges import ZoneEdges
from estimators.zone_mass import Cells

FloatArray = NDArray[np.float64]
_SIDE_M: Final = 1e-6
"""A path on an edge, to within rounding, is judged this far to the east and a little to the north of it."""


@compiled()
def _crossings(out: Any, near: int, start: Any, end: Any, lo: float, hi: float, found: Any) -> int:  # pragma: no cover
    """Shares at which the straight way crosses edges, sorted, between lo and hi."""
    dx, dy = end[0] - start[0], end[1] - start[1]
    n = 0
    for k in range(near):
        ex, ey = out[k, 2] - out[k, 0], out[k, 3] - out[k, 1]
        denominator = dx * ey - dy * ex
        if denominator == 0.0:
            continue
        px, py = out[k, 0] - start[0], out[k, 1] - start[1]
        share = (px * ey - py * ex) / denominator
        along = (px * dy - py * dx) / denominator
        # A little beyond the edge's ends too: a crossing too many splits a stretch and changes nothing.
        if -1e-6 <= along <= 1.0 + 1e-6 and lo < share < hi:
            found[n] = share
            n += 1
    found[:n].sort()
    return n


@compiled()
def _inside_stretches(
    edges: Any, origins: Any, axes: Any, starts: Any, ends: Any, cells: Any
) -> Any:  # pragma: no cover - compiled
    """Rows of cell, first share, last share for every stretch inside, in order."""
    part, lows, highs = cells
    room = len(edges.vertices_m) + 64 * len(edges.root) + 64
    out, stack, found = np.empty((room, 5)), np.empty(256, np.int64), np.empty(room + 2)
    rows = np.empty((256, 3))
    n, ball, place = 0, edges.ball_m, np.empty(3)
    for c in range(len(part)):
        k = part[c]
        dx, dy = ends[k, 0] - starts[k, 0], ends[k, 1] - starts[k, 1]
        reach = 0.5 * math.hypot(dx, dy) + 1.0
        gap2 = (ball[0] - origins[k, 0]) ** 2 + (ball[1] - origins[k, 1]) ** 2 + (ball[2] - origins[k, 2]) ** 2
        if gap2 > (ball[3] + 1.001 * reach + 1.0) ** 2:
            continue
        mx, my = starts[k, 0] + 0.5 * dx, starts[k, 1] + 0.5 * dy
        place_in_space_m(mx, my, origins[k], axes[k], place)
        near, far = collect_edges(edges, 0, place, reach, origins[k], axes[k], out, stack)
        m = _crossings(out, near, starts[k], ends[k], lows[c], highs[c], found)
        found[m] = highs[c]
        lo = lows[c]
        for j in range(m + 1):
            hi = found[j]
            if hi <= lo:
                continue
            share = 0.5 * (lo + hi)
            px, py = starts[k, 0] + share * dx + _SIDE_M, starts[k, 1] + share * dy + 0.7 * _SIDE_M
            winding = winding_number(out, 0, near, px, py)
            winding += winding_number(out, len(out) - far, len(out), px, py)
            if winding > 0:
                if n > 0 and rows[n - 1, 0] == c and rows[n - 1, 2] == lo:
                    rows[n - 1, 2] = hi
                else:
                    if n == len(rows):
                        grown = np.empty((2 * n, 3))
                        grown[:n] = rows
                        rows = grown
                    rows[n, 0], rows[n, 1], rows[n, 2] = c, lo, hi
                    n += 1
            lo = hi
    return rows[:n]


def inside_stretches(
    steps: CoveredSteps, edges: ZoneEdges, cells: Cells
) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
    """Stretches of time that the straight path is inside a zone.

    Parameters
    ----------
    steps : CoveredSteps
    edges : ZoneEdges
    cells : Cells, in time order

    Returns
    -------
    tuple of ndarray, shape (n,): period; start and end, milliseconds, in order
    """
    parts = steps.parts
    rows = _inside_stretches(
        edges,
        parts.origin_m,
        parts.axes,
        parts.start_m,
        parts.end_m,
        (cells.part, cells.start, cells.end),
    )
    cell = rows[:, 0].astype(np.int64)
    part = cells.part[cell]
    begin, length = steps.start_ms[part], steps.end_ms[part] - steps.start_ms[part]
    return cells.period[cell], begin + rows[:, 1] * length, begin + rows[:, 2] * length


def visits_per_period(
    period: NDArray[np.int64], start_ms: FloatArray, end_ms: FloatArray, n_periods: int, minimum_ms: float
) -> NDArray[np.int64]:
    """Stays of at least a stated duration, counted in every period that they touch.

    Parameters
    ----------
    period, start_ms, end_ms : ndarray, shape (n,), from `inside_stretches`
    n_periods : int
    minimum_ms : float

    Notes
    -----
    Stretches that meet (within a millisecond) are one stay, also across the edge of a month; a gap in the
    covered time ends a stay.
    """
    counts = np.zeros(n_periods, dtype=np.int64)
    if len(period) == 0:
        return counts
    stay = np.concatenate([[0], np.cumsum(start_ms[1:] - end_ms[:-1] > 1.0)])
    length = np.bincount(stay, weights=end_ms - start_ms)
    for number, of in {(int(s), int(p)) for s, p in zip(stay, period, strict=True)}:
        if length[number] >= minimum_ms:
            counts[of] += 1
    return counts
