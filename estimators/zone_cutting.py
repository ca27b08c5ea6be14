"""Zones cut along meridians and parallels: at the antimeridian, and giant ones into pieces."""

from __future__ import annotations

from itertools import pairwise
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import MultiPolygon, Polygon

from estimators.frames import MEAN_RADIUS_M
from estimators.zone_edges import geodesic_cuts

FloatArray = NDArray[np.float64]

GIANT_RADIUS_M: Final = 0.7 * MEAN_RADIUS_M
"""A zone whose ball is larger is prepared in pieces.

In the plane frame of a place, its antipode is infinitely far away in all directions, so no edge may come near there.
"""
_PIECE_DEG: Final = 45
_FOLLOWED_M: Final = 2000.0


def cut_at_date_line(shape: MultiPolygon) -> MultiPolygon:
    """A shape whose longitudes run on, cut so that all of them lie in [-180, 180]; outer rings anticlockwise."""
    west, _, east, _ = shape.bounds
    if west >= -180.0 and east <= 180.0:
        return shape
    pieces: list[Polygon] = []
    for turn in range(int(np.floor((west + 180.0) / 360.0)), int(np.ceil((east - 180.0) / 360.0)) + 1):
        window = shapely.box(-180.0 + 360.0 * turn, -90.0, 180.0 + 360.0 * turn, 90.0)
        inside = shape.intersection(window)
        for part in getattr(inside, "geoms", [inside]):
            if isinstance(part, Polygon) and part.area > 0.0:
                pieces.append(shapely.transform(part, lambda xy, by=360.0 * turn: xy - np.array([by, 0.0])))
    return MultiPolygon([shapely.orient_polygons(piece) for piece in pieces])


def pieces_by_degrees(shape: MultiPolygon) -> list[MultiPolygon]:
    """A shape in [-180, 180] cut at the equator and at every eighth of the meridians; the pieces' common edges cancel.

    These lines are geodesics, which need far fewer straight pieces than other parallels.
    """
    pieces = []
    for west in range(-180, 180, _PIECE_DEG):
        for south in (-90, 0):
            inside = shape.intersection(shapely.box(west, south, west + _PIECE_DEG, south + 90))
            parts = [part for part in getattr(inside, "geoms", [inside]) if isinstance(part, Polygon)]
            if parts and any(part.area > 0.0 for part in parts):
                pieces.append(MultiPolygon([shapely.orient_polygons(part) for part in parts if part.area > 0.0]))
    return pieces


def follow_geodesics(shape: MultiPolygon) -> MultiPolygon:
    """A shape with geodesic edges as one with straight edges in longitude and latitude, each 2 km long.

    Those stay within R/8 · (L/R)² tan φ of the geodesic: 8 cm at 45° latitude, half a metre at 80°.
    """

    def ring(positions: FloatArray) -> FloatArray:
        out = [positions[:1]]
        for a, b in pairwise(positions):
            out += [geodesic_cuts(a, b, _FOLLOWED_M), b[None, :]]
        return np.concatenate(out)

    return MultiPolygon(
        [
            Polygon(ring(np.asarray(part.exterior.coords)), [ring(np.asarray(hole.coords)) for hole in part.interiors])
            for part in shape.geoms
        ]
    )
