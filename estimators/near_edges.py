"""Which edges of a zone matter to a place: the near ones as they are, the far ones as a few straight stand-ins."""

from __future__ import annotations

import math
from typing import Any

from estimators.compiled import compiled
from estimators.frames import plane_point_m
from estimators.polygon_mass import upward_edge


@compiled()
def place_in_space_m(x: float, y: float, origin_m: Any, axes: Any, place: Any) -> None:  # pragma: no cover - compiled
    """Fill in the Earth-centred place of a point of a local plane; errs by its distance to the fourth power over R³."""
    radius = math.sqrt(origin_m[0] ** 2 + origin_m[1] ** 2 + origin_m[2] ** 2)
    drop = (x * x + y * y) / (2.0 * radius * radius)
    for k in range(3):
        place[k] = origin_m[k] * (1.0 - drop) + axes[0, k] * x + axes[1, k] * y


@compiled()
def _is_far(ball: Any, place: Any, reach: float) -> bool:  # pragma: no cover - compiled
    """Whether a ball keeps clear of a place's surroundings."""
    near = (ball[0] - place[0]) ** 2 + (ball[1] - place[1]) ** 2 + (ball[2] - place[2]) ** 2
    clear = ball[3] + reach
    return bool(near > clear * clear)


@compiled()
def collect_edges(
    edges: Any,
    level: int,
    place: Any,
    reach: float,
    origin_m: Any,
    axes: Any,
    out: Any,
    stack: Any,
) -> tuple[int, int]:  # pragma: no cover - compiled
    """Edges around a place, in the plane frame of an origin.

    Parameters
    ----------
    edges : ZoneEdges
    level : int, level of detail
    place : ndarray, shape (3,), Earth-centred, metres
    reach : float, metres
    out : ndarray, shape (m, 5), gains near pieces from the front and far stand-ins from the back (`upward_edge`)
    stack : ndarray of int, working space

    Returns
    -------
    tuple of int : near pieces, far stand-ins
    """
    near, far_ones = 0, 0
    margin = reach * 1.001 + 1.0
    last_vertex, last_x, last_y = -1, 0.0, 0.0
    for r in range(edges.level_first_root[level], edges.level_first_root[level + 1]):
        stack[0], depth = edges.root[r], 1
        if _is_far(edges.node_ball_m[edges.root[r]], place, margin):
            continue
        while depth > 0:
            depth -= 1
            node = stack[depth]
            far = _is_far(edges.node_ball_m[node], place, margin)
            if not far and edges.node_left[node] >= 0:
                stack[depth], stack[depth + 1] = edges.node_right[node], edges.node_left[node]
                depth += 2
                continue
            a, b = edges.node_first[node], edges.node_last[node]
            if a != last_vertex:
                v = edges.vertices_m[a]
                last_x, last_y = plane_point_m(v[0], v[1], v[2], origin_m, axes)
            v = edges.vertices_m[b]
            x, y = plane_point_m(v[0], v[1], v[2], origin_m, axes)
            if far:
                far_ones += 1
                upward_edge(out, len(out) - far_ones, last_x, last_y, x, y)
            else:
                upward_edge(out, near, last_x, last_y, x, y)
                near += 1
            last_vertex, last_x, last_y = b, x, y
    return near, far_ones
