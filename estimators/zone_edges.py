"""A zone's boundary as straight pieces, in a tree of balls that finds those near a place.

Each level of detail holds the whole boundary in pieces within a stated distance of the true edges. Over each ring
lies a binary tree: a node covers consecutive pieces and knows a ball around them. A far node can stand for its
pieces as one straight line, since seen from outside the ball they sweep the same angle.
"""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Any, Final, NamedTuple

import numpy as np
from numpy.typing import NDArray
from shapely import MultiPolygon

from estimators.compiled import compiled
from estimators.defaults import EDGE_DEVIATION_FINEST_M
from estimators.frames import MEAN_RADIUS_M, WGS84, earth_centred_m

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

LEVELS: Final = 8
_LONGEST_PIECE_M: Final = 2000.0


class ZoneEdges(NamedTuple):
    """Boundary of a zone, ready for the compiled kernels.

    Attributes
    ----------
    vertices_m : ndarray, shape (n_vertices, 3), Earth-centred, metres; rings one after the other, closed
    node_first, node_last : ndarray of int, shape (n_nodes,), the node's first and last vertex
    node_left, node_right : ndarray of int, shape (n_nodes,), children, -1 for a leaf (one piece)
    node_ball_m : ndarray, shape (n_nodes, 4), centre and radius of the ball around the node's pieces
    root : ndarray of int, shape (n_roots,), a node a ring and level
    level_first_root : ndarray of int, shape (n_levels + 1,)
    ball_m : ndarray, shape (4,), ball around the whole boundary
    """

    vertices_m: FloatArray
    node_first: IntArray
    node_last: IntArray
    node_left: IntArray
    node_right: IntArray
    node_ball_m: FloatArray
    root: IntArray
    level_first_root: IntArray
    ball_m: FloatArray


def zone_edges(polygon: MultiPolygon, *, geodesic: bool) -> ZoneEdges:
    """Prepare a zone's boundary for the kernels.

    Parameters
    ----------
    polygon : shapely.MultiPolygon, degrees, longitudes running on
    geodesic : bool, edges are geodesics, not straight in longitude and latitude

    Returns
    -------
    ZoneEdges

    Notes
    -----
    Level j holds the boundary to within 4^j · `EDGE_DEVIATION_FINEST_M`; levels stop where nothing changes.
    Cuts lie on a lattice of longitudes or latitudes that no zone chooses, so that zones with a common edge
    have the same pieces along it.
    """
    rings = [np.asarray(ring.coords)[:, :2] for part in polygon.geoms for ring in (part.exterior, *part.interiors)]
    tree = _Tree()
    for level in range(LEVELS):
        pieces = [_pieces(ring, level, geodesic) for ring in rings]
        for piece in pieces:
            tree.add_ring(earth_centred_m(piece[:, 0], piece[:, 1]))
        tree.level_first_root.append(len(tree.roots))
        if all(len(piece) == len(ring) for piece, ring in zip(pieces, rings, strict=True)):
            break
    return tree.finish()


class _Tree:
    """Builder of the arrays of `ZoneEdges`."""

    def __init__(self) -> None:
        self.vertices: list[FloatArray] = []
        self.count = 0
        self.spans: list[IntArray] = []
        self.children: list[IntArray] = []
        self.balls: list[FloatArray] = []
        self.nodes = 0
        self.roots: list[int] = []
        self.level_first_root: list[int] = [0]

    def add_ring(self, points_m: FloatArray) -> None:
        spans, children = _halvings(len(points_m) - 1)
        self.roots.append(self.nodes)
        self.spans.append(spans + self.count)
        self.children.append(np.where(children < 0, -1, children + self.nodes))
        self.balls.append(_balls(points_m, spans, children))
        self.vertices.append(points_m)
        self.count += len(points_m)
        self.nodes += len(spans)

    def finish(self) -> ZoneEdges:
        vertices, balls = np.concatenate(self.vertices), np.concatenate(self.balls)
        spans, children = np.concatenate(self.spans), np.concatenate(self.children)
        centre = 0.5 * (vertices.min(axis=0) + vertices.max(axis=0))
        radius = float(np.sqrt(((vertices - centre) ** 2).sum(axis=1).max()))
        return ZoneEdges(
            vertices,
            np.ascontiguousarray(spans[:, 0]),
            np.ascontiguousarray(spans[:, 1]),
            np.ascontiguousarray(children[:, 0]),
            np.ascontiguousarray(children[:, 1]),
            balls,
            np.array(self.roots, dtype=np.int64),
            np.array(self.level_first_root, dtype=np.int64),
            np.array([*centre, radius]),
        )


def _halvings(pieces: int) -> tuple[IntArray, IntArray]:
    """Spans and children of a balanced binary tree over consecutive pieces, parents before children."""
    first, last = [np.array([0])], [np.array([pieces])]
    left: list[IntArray] = []
    right: list[IntArray] = []
    known = 1
    while True:
        lo, hi = first[-1], last[-1]
        splits = hi - lo > 1
        order = np.cumsum(splits) - 1
        left.append(np.where(splits, known + 2 * order, -1))
        right.append(np.where(splits, known + 2 * order + 1, -1))
        if not splits.any():
            break
        lo, hi = lo[splits], hi[splits]
        middle = (lo + hi) // 2
        first.append(np.stack([lo, middle], axis=1).ravel())
        last.append(np.stack([middle, hi], axis=1).ravel())
        known += len(first[-1])
    spans = np.stack([np.concatenate(first), np.concatenate(last)], axis=1)
    return spans.astype(np.int64), np.stack([np.concatenate(left), np.concatenate(right)], axis=1).astype(np.int64)


def _balls(points_m: FloatArray, spans: IntArray, children: IntArray) -> FloatArray:
    """Balls around the nodes, from the leaves up: a parent's ball holds its children's."""
    balls = np.zeros((len(spans), 4))
    leaf = children[:, 0] < 0
    a, b = points_m[spans[leaf, 0]], points_m[spans[leaf, 1]]
    balls[leaf, :3], balls[leaf, 3] = 0.5 * (a + b), 0.5 * np.linalg.norm(b - a, axis=1)
    for level in reversed(_levels(children)):
        nodes = level[children[level, 0] >= 0]
        one, two = balls[children[nodes, 0]], balls[children[nodes, 1]]
        gap = np.linalg.norm(two[:, :3] - one[:, :3], axis=1)
        radius = np.maximum(np.maximum(one[:, 3], two[:, 3]), 0.5 * (gap + one[:, 3] + two[:, 3]))
        share = np.where(gap > 0, (radius - one[:, 3]) / np.where(gap > 0, gap, 1.0), 0.0)
        share = np.clip(share, 0.0, 1.0)[:, None]
        balls[nodes, :3] = one[:, :3] + share * (two[:, :3] - one[:, :3])
        reach = [np.linalg.norm(side[:, :3] - balls[nodes, :3], axis=1) + side[:, 3] for side in (one, two)]
        balls[nodes, 3] = np.maximum(*reach)
    return balls


def _levels(children: IntArray) -> list[IntArray]:
    levels = [np.array([0])]
    while True:
        below = children[levels[-1]]
        below = below[below[:, 0] >= 0]
        if not len(below):
            return levels
        levels.append(below.ravel())


def _pieces(ring: FloatArray, level: int, geodesic: bool) -> FloatArray:
    """Positions of a ring with cuts put in wherever a straight piece would leave the true edge."""
    if not geodesic:
        return np.asarray(_straight_pieces(np.ascontiguousarray(ring), level))
    out = [ring[:1]]
    for a, b in pairwise(ring):
        out += [geodesic_cuts(a, b, _LONGEST_PIECE_M * 2.0**level), b[None, :]]
    return np.concatenate(out)


@compiled()
def _straight_pieces(ring: Any, level: int) -> Any:  # pragma: no cover - compiled
    steps, count = np.empty(len(ring) - 1), len(ring)
    for k in range(len(ring) - 1):
        steps[k] = _lattice_step_deg(ring[k, 0], ring[k, 1], ring[k + 1, 0], ring[k + 1, 1], level)
        count += _lattice_cuts(ring[k], ring[k + 1], steps[k], ring, -1)
    pieces = np.empty((count, 2))
    pieces[0] = ring[0]
    row = 1
    for k in range(len(ring) - 1):
        row += _lattice_cuts(ring[k], ring[k + 1], steps[k], pieces, row)
        pieces[row] = ring[k + 1]
        row += 1
    return pieces


@compiled()
def _lattice_step_deg(x1: float, y1: float, x2: float, y2: float, level: int) -> float:  # pragma: no cover
    """Distance of the cuts of an edge along its longer axis, a power of two of degrees; 0 where none is needed.

    The sagitta of an edge straight in longitude and latitude against the geodesic is at most
    R/8 · Δλ · (Δλ |sin φ cos φ| + 2 |Δφ sin φ|).
    """
    width, height = abs(x2 - x1), abs(y2 - y1)
    if (width == 0.0 and height == 0.0) or (abs(y1) == 90.0 and y1 == y2):
        return 0.0
    extent, slope = max(width, height), (height / width if width > 0.0 else 1e300)
    step = math.degrees(_LONGEST_PIECE_M * 2.0**level / MEAN_RADIUS_M)
    if width > 0.0:
        # The latitude rounded up in bands, so that a part of an edge is cut as the whole of it.
        band = math.sin(math.radians(min(90.0, 15.0 * math.ceil(max(abs(y1), abs(y2)) / 15.0))))
        bend = max(min(0.5, band) + 2.0 * slope * band, 1e-12)
        longest = math.sqrt(8.0 * EDGE_DEVIATION_FINEST_M * 4.0**level / (MEAN_RADIUS_M * bend))
        step = min(step, math.degrees(longest) * max(1.0, slope))
    return 2.0 ** math.floor(math.log2(step)) if extent > step else 0.0


@compiled()
def _lattice_cuts(a: Any, b: Any, step_deg: float, out: Any, row: int) -> int:  # pragma: no cover - compiled
    """Number of cuts of an edge where its longer axis is a multiple of the step; written from `row` on, if ≥ 0."""
    if step_deg == 0.0:
        return 0
    axis = 0 if abs(b[0] - a[0]) >= abs(b[1] - a[1]) else 1
    start, end = min(a[axis], b[axis]), max(a[axis], b[axis])
    first, last = math.floor(start / step_deg) + 1, math.ceil(end / step_deg) - 1
    count = max(int(last - first) + 1, 0)
    if row < 0:
        return count
    # From the same end whichever way the edge runs, so that neighbours get the same cuts to the last bit.
    forward = a[0] < b[0] or (a[0] == b[0] and a[1] <= b[1])
    x, y = (a[0], a[1]) if forward else (b[0], b[1])
    dx, dy = (b[0] - a[0], b[1] - a[1]) if forward else (a[0] - b[0], a[1] - b[1])
    rising = b[axis] > a[axis]
    for k in range(count):
        line = (first + k if rising else last - k) * step_deg
        share = (line - x) / dx if axis == 0 else (line - y) / dy
        out[row + k, 0], out[row + k, 1] = x + share * dx, y + share * dy
    return count


def geodesic_cuts(a: FloatArray, b: FloatArray, longest_m: float) -> FloatArray:
    """Places that cut the geodesic between two places into equal pieces of at most a stated length.

    Parameters
    ----------
    a, b : ndarray, shape (2,), longitude and latitude, degrees
    longest_m : float, metres

    Returns
    -------
    ndarray, shape (n, 2), degrees, longitudes running on; the same to the last bit whichever way the edge runs
    """
    low, high = (a, b) if tuple(a) <= tuple(b) else (b, a)
    azimuth_deg, _, length_m = WGS84.inv(low[0], low[1], high[0], high[1])
    count = int(np.ceil(length_m / longest_m))
    if count < 2:
        return np.empty((0, 2))
    lengths = length_m * np.arange(1, count) / count
    lon, lat, _ = WGS84.fwd(
        np.full(count - 1, low[0]), np.full(count - 1, low[1]), np.full(count - 1, azimuth_deg), lengths
    )
    # Longitudes run on across ±180°, as the ring's own do.
    lon = low[0] + np.mod(np.asarray(lon) - low[0] + 180.0, 360.0) - 180.0
    cuts = np.column_stack([lon, lat])
    return cuts[::-1] if low is b else cuts
