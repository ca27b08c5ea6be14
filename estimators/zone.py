"""Management zones: a shape on the ellipsoid, dates in force, and a season."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Final, Literal

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import MultiPolygon, Polygon
from shapely.errors import GEOSException

from estimators.errors import ZoneGeometryError
from estimators.frames import earth_centred_m
from estimators.months import Season, Span, intersect_spans
from estimators.zone_cutting import GIANT_RADIUS_M, cut_at_date_line, follow_geodesics, pieces_by_degrees
from estimators.zone_edges import ZoneEdges, zone_edges
from estimators.zone_rings import ReadRing, read_ring

FloatArray = NDArray[np.float64]
Edges = Literal["straight", "geodesic"]
LEAST_AREA_DEG2: Final = 1e-15
"""Smallest area that is told from a line, square degrees: about a tenth of a square centimetre at the equator."""

_PLACE = re.compile(r"(.*?)\s*\[([-+\d.eE]+) ([-+\d.eE]+)\]")
_INVALID_CODES = {
    "Self-intersection": "self_crossing_ring",
    "Ring Self-intersection": "self_crossing_ring",
    "Hole lies outside shell": "hole_outside",
    "Holes are nested": "nested_holes",
    "Interior is disconnected": "disconnected_interior",
    "Too few points in geometry component": "too_few_positions",
}


@dataclass(frozen=True)
class ZoneShape:
    """Geometry of a zone version, as it was understood.

    Attributes
    ----------
    polygon : shapely.MultiPolygon
        Longitudes run on across ±180°, so that no part is broken; a shape around a pole is closed through it.
        Outer rings anticlockwise. Parts may touch, never overlap.
    edges : {"straight", "geodesic"}
        Straight in longitude and latitude, as RFC 7946 says, or geodesics.
    notes : tuple of str
        What was read in a way worth telling.
    """

    polygon: MultiPolygon
    edges: Edges = "straight"
    notes: tuple[str, ...] = field(default=())

    @classmethod
    def from_geojson(cls, geometry: Mapping[str, Any], edges: Edges = "straight") -> ZoneShape:
        """Read a GeoJSON Polygon or MultiPolygon.

        Parameters
        ----------
        geometry : mapping with ``type`` and ``coordinates`` (RFC 7946)
        edges : {"straight", "geodesic"}

        Raises
        ------
        ZoneGeometryError
            The geometry cannot be a zone; code, pointer and place say why and where.
        """
        kind, coordinates = geometry.get("type"), geometry.get("coordinates")
        if kind not in ("Polygon", "MultiPolygon") or not isinstance(coordinates, Sequence):
            raise ZoneGeometryError(
                "not_a_polygon",
                f"A zone is a Polygon or a MultiPolygon with coordinates, got {str(kind)[:40]!r}.",
            )
        parts = [coordinates] if kind == "Polygon" else coordinates
        if not parts:
            raise ZoneGeometryError("zero_area", "The geometry is empty. Give at least one polygon.", "/coordinates")
        notes: list[str] = []
        polygons: list[Polygon] = []
        try:
            for number, rings in enumerate(parts):
                pointer = "/coordinates" if kind == "Polygon" else f"/coordinates/{number}"
                polygons += _read_polygon(rings, pointer, notes)
            _check_parts_apart(polygons)
        except GEOSException as fault:
            # Rings that cross only once they are closed through a pole, or cut, are first seen there.
            message = f"The rings do not fit together: {str(fault)[:200]} Mend them there and send the zone again."
            raise ZoneGeometryError("invalid_polygon", message, "/coordinates") from fault
        return cls(MultiPolygon(polygons), edges, tuple(dict.fromkeys(notes)))

    @cached_property
    def cut_polygon(self) -> MultiPolygon:
        """The shape cut at ±180°, all longitudes in [-180, 180]."""
        return cut_at_date_line(self.polygon)

    @property
    def bbox(self) -> list[float]:
        """West, south, east, north in degrees; west > east for a shape across the antimeridian (RFC 7946, 5.2)."""
        cut = self.cut_polygon
        west, south, east, north = (float(value) for value in cut.bounds)
        if west == -180.0 and east == 180.0 and len(cut.geoms) > 1:
            gap = _widest_empty_lon(cut)
            if gap is not None:
                west, east = gap[1], gap[0]
        return [round(value, 6) for value in (west, south, east, north)]

    def to_geojson(self) -> dict[str, Any]:
        """MultiPolygon by RFC 7946: right-hand rule, cut at ±180°, six decimals; nine where that is too coarse."""
        rounded = []
        west, south, east, north = self.polygon.bounds
        decimals = 6 if min(east - west, north - south) > 1e-3 else 9
        for part in self.cut_polygon.geoms:
            rings = [
                [[round(float(x), decimals), round(float(y), decimals)] for x, y in ring.coords]
                for ring in (part.exterior, *part.interiors)
            ]
            rounded.append(rings)
        return {"type": "MultiPolygon", "coordinates": rounded}

    @cached_property
    def boundaries(self) -> tuple[ZoneEdges, ...]:
        """The boundary prepared for the kernels; of a giant zone, the boundaries of the pieces that it is cut into."""
        geodesic = self.edges == "geodesic"
        if self.rough_ball_m is not None:
            return (zone_edges(self.polygon, geodesic=geodesic),)
        polygon = follow_geodesics(self.polygon) if geodesic else self.polygon
        return tuple(zone_edges(piece, geodesic=False) for piece in pieces_by_degrees(cut_at_date_line(polygon)))

    @property
    def prepared_vertices(self) -> int:
        """Vertices that `boundaries` holds, about 170 bytes each; 0 as long as nobody has asked for it."""
        prepared: tuple[ZoneEdges, ...] = self.__dict__.get("boundaries", ())
        return sum(len(edges.vertices_m) for edges in prepared)

    @cached_property
    def rough_ball_m(self) -> FloatArray | None:
        """Ball that surely holds the zone: Earth-centred centre and radius, shape (4,), metres; None if it is giant."""
        lon, lat = shapely.get_coordinates(self.polygon).T
        places = earth_centred_m(lon, lat)
        centre = 0.5 * (places.min(axis=0) + places.max(axis=0))
        same_side = lat[:-1] * lat[1:] > 0.0
        nearest_equator = np.where(same_side, np.minimum(np.abs(lat[:-1]), np.abs(lat[1:])), 0.0)
        width = np.diff(lon) * np.cos(np.deg2rad(nearest_equator))
        # An edge strays from its ends by at most half its length; no radius of the ellipsoid is above 6400 km.
        stray_m = 0.5 * 6_400_000.0 * np.deg2rad(np.hypot(width, np.diff(lat)).max())
        radius_m = float(np.sqrt(((places - centre) ** 2).sum(axis=1).max()) + stray_m)
        return np.array([*centre, radius_m]) if radius_m < GIANT_RADIUS_M else None

    def contains(self, lon_deg: FloatArray, lat_deg: FloatArray) -> NDArray[np.bool_]:
        """Whether places lie inside in longitude and latitude (straight edges).

        Parameters
        ----------
        lon_deg, lat_deg : ndarray, shape (n,), degrees in [-180, 180] and [-90, 90]
        """
        shapely.prepare(self.cut_polygon)
        return np.asarray(shapely.contains_xy(self.cut_polygon, lon_deg, lat_deg))


@dataclass(frozen=True)
class Zone:
    """A zone version: a shape, the dates it is in force, and its season.

    Attributes
    ----------
    shape : ZoneShape
    in_force_from_ms, in_force_until_ms : int or None, half-open, milliseconds since 1970-01-01 UTC; None is open
    season : Season or None, for a zone that is in force only for a part of every year
    """

    shape: ZoneShape
    in_force_from_ms: int | None = None
    in_force_until_ms: int | None = None
    season: Season | None = None

    def in_force_spans(self, start_ms: int, end_ms: int, time_zone: str) -> list[Span]:
        """Parts of a span in which the zone is in force, in order, disjoint, half-open milliseconds."""
        opens = start_ms if self.in_force_from_ms is None else max(start_ms, self.in_force_from_ms)
        closes = end_ms if self.in_force_until_ms is None else min(end_ms, self.in_force_until_ms)
        if closes <= opens:
            return []
        if self.season is None:
            return [(opens, closes)]
        return intersect_spans([(opens, closes)], self.season.spans(opens, closes, time_zone))


def _read_polygon(rings: Any, pointer: str, notes: list[str]) -> list[Polygon]:
    if not isinstance(rings, Sequence) or isinstance(rings, str) or not rings:
        raise ZoneGeometryError("too_few_positions", "A polygon needs at least one ring, got none.", pointer)
    read = [read_ring(ring, f"{pointer}/{number}", notes) for number, ring in enumerate(rings)]
    shell, holes = read[0], read[1:]
    if shell.around_pole or any(hole.around_pole for hole in holes):
        return _polar_polygons(shell, holes, pointer)
    polygon = Polygon(shell.positions, [_beside(shell, hole) for hole in holes])
    _check_valid(polygon, pointer)
    if not shell.anticlockwise:
        notes.append("An outer ring ran clockwise and was turned; the inside is the side it encloses.")
    return [shapely.orient_polygons(polygon)]


def _beside(shell: ReadRing, hole: ReadRing) -> FloatArray:
    """The hole's ring moved by whole turns of longitude to where the shell is."""
    middle = 0.5 * (shell.positions[:, 0].min() + shell.positions[:, 0].max())
    turns = np.round((middle - hole.positions[:, 0].mean()) / 360.0)
    return np.asarray(hole.positions + np.array([360.0 * turns, 0.0]))


def _polar_polygons(shell: ReadRing, holes: list[ReadRing], pointer: str) -> list[Polygon]:
    if not shell.around_pole:
        raise ZoneGeometryError(
            "hole_outside", "A hole goes around a pole that the outer ring does not enclose.", pointer
        )
    area = cut_at_date_line(MultiPolygon([_checked(shell, pointer)]))
    for hole in holes:
        ring = cut_at_date_line(MultiPolygon([_checked(hole, pointer)]))
        if not area.buffer(1e-9).covers(ring):
            x, y = hole.positions[0]
            raise ZoneGeometryError(
                "hole_outside",
                f"A hole starting at {x:g}, {y:g} lies outside its outer ring.",
                pointer,
                (x, y),
            )
        area = area.difference(ring)
    parts = [part for part in getattr(area, "geoms", [area]) if isinstance(part, Polygon) and part.area > 0]
    return [shapely.orient_polygons(part) for part in parts]


def _checked(ring: ReadRing, pointer: str) -> Polygon:
    polygon = Polygon(ring.positions)
    _check_valid(polygon, pointer)
    return polygon


def _check_valid(polygon: Polygon, pointer: str) -> None:
    flat = Polygon(polygon.exterior)
    if flat.convex_hull.area < LEAST_AREA_DEG2 or (polygon.is_valid and polygon.area < LEAST_AREA_DEG2):
        raise ZoneGeometryError(
            "zero_area",
            "The ring encloses no area, or less than a tenth of a square centimetre. Check the positions.",
            pointer,
        )
    if polygon.is_valid:
        return
    reason = shapely.is_valid_reason(polygon)
    parts = _PLACE.match(reason)
    what, place = (parts[1], (float(parts[2]), float(parts[3]))) if parts else (reason, None)
    where = f" at longitude {place[0]:g}, latitude {place[1]:g}" if place else ""
    raise ZoneGeometryError(
        _INVALID_CODES.get(what, "invalid_polygon"),
        f"The polygon is not valid: {what.lower()}{where}. Mend the ring there and send it again.",
        pointer,
        place,
    )


def _check_parts_apart(polygons: list[Polygon]) -> None:
    if len(polygons) < 2:
        return
    cut = [cut_at_date_line(MultiPolygon([polygon])) for polygon in polygons]
    tree = shapely.STRtree(cut)
    first, second = tree.query(cut, predicate="intersects")
    for i, j in zip(first, second, strict=True):
        if i < j and (shared := cut[i].intersection(cut[j])).area > 1e-12:
            point = shared.representative_point()
            raise ZoneGeometryError(
                "overlapping_parts",
                f"Parts {i} and {j} of the MultiPolygon overlap near longitude {point.x:g}, latitude {point.y:g}. "
                "Unite them or send them as two zones.",
                f"/coordinates/{j}",
                (point.x, point.y),
            )


def _widest_empty_lon(cut: MultiPolygon) -> tuple[float, float] | None:
    """Widest range of longitudes between the parts, or None where they leave none free."""
    ranges = sorted((part.bounds[0], part.bounds[2]) for part in cut.geoms)
    reached, best = ranges[0][1], (0.0, 0.0)
    for west, east in ranges[1:]:
        if west - reached > best[1] - best[0]:
            best = (reached, west)
        reached = max(reached, east)
    return best if best[1] > best[0] else None
