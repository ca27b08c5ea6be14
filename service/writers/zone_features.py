"""Zones as JSON and as GeoJSON features."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import groupby
from typing import Any

import shapely.geometry

from estimators import ZoneShape
from service.store.zones import ZoneVersionRecord
from service.writers.instants import utc_text


def zone_body(programme: str, versions: Sequence[ZoneVersionRecord], *, with_geometry: bool) -> dict[str, Any]:
    """One zone with its live versions.

    Parameters
    ----------
    programme : str
    versions : sequence of ZoneVersionRecord of one zone, at least one
    with_geometry : bool
    """
    return {
        "zone": versions[0].zone,
        "programme": programme,
        "revision": max(version.revision for version in versions),
        "versions": [_version_body(version, with_geometry=with_geometry) for version in versions],
    }


def zone_bodies(programme: str, versions: Sequence[ZoneVersionRecord]) -> list[dict[str, Any]]:
    """Zones of a list of versions that is ordered by zone, without geometry."""
    return [
        zone_body(programme, list(group), with_geometry=False)
        for _, group in groupby(versions, key=lambda version: version.zone)
    ]


def _version_body(version: ZoneVersionRecord, *, with_geometry: bool) -> dict[str, Any]:
    body = _properties(version) | {"bbox": bbox(version.geometry)}
    return body | {"geometry": version.geometry} if with_geometry else body


def _properties(version: ZoneVersionRecord) -> dict[str, Any]:
    return {
        "version": version.version,
        "name": version.name,
        "in_force_from": version.in_force_from,
        "in_force_until": version.in_force_until,
        "effective_from": utc_text(version.from_ms),
        "effective_until": utc_text(version.until_ms),
        "season": version.season,
        "edges": version.edges,
        "notes": list(version.notes),
        "commit": version.commit_no,
    }


def zone_feature(version: ZoneVersionRecord) -> dict[str, Any]:
    """GeoJSON feature of a zone version; the id is repeated in the properties for map clients that drop it."""
    return {
        "type": "Feature",
        "id": feature_id(version.zone, version.version),
        "bbox": bbox(version.geometry),
        "geometry": version.geometry,
        "properties": {
            "id": feature_id(version.zone, version.version),
            "zone": version.zone,
            **_properties(version),
        },
    }


def ended_feature(zone: str, version: int) -> dict[str, Any]:
    """Feature without geometry, of a version that has just ended while rows still speak of it."""
    properties = {"id": feature_id(zone, version), "zone": zone, "version": version, "name": None}
    return {"type": "Feature", "id": properties["id"], "geometry": None, "properties": properties}


def feature_id(zone: str, version: int) -> str:
    """Identifier of a zone version among features; no zone's identifier has a slash."""
    return f"{zone}/{version}"


def bbox(geometry: dict[str, Any]) -> list[float]:
    """West, south, east, north of a stored geometry in degrees; west > east across the antimeridian."""
    return ZoneShape(shapely.geometry.shape(geometry)).bbox


def feature_collection(features: list[dict[str, Any]], **members: Any) -> dict[str, Any]:
    """GeoJSON feature collection with foreign members."""
    return {"type": "FeatureCollection", **members, "features": features}
