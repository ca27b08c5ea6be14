"""Zones from GeoJSON: a Feature, or a FeatureCollection whose features have ids."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

from estimators import CalendarError, Season, ZoneGeometryError, ZoneShape
from service.problems import Problem
from service.readers.dates import date_ms
from service.readers.identifiers import identifier_fault

PROPERTIES: Final = ("name", "in_force_from", "in_force_until", "season", "edges")
EDGES: Final = ("straight", "geodesic")
LONGEST_NAME: Final = 300

_WGS84 = frozenset(
    {
        "urn:ogc:def:crs:OGC:1.3:CRS84",
        "urn:ogc:def:crs:OGC::CRS84",
        "http://www.opengis.net/def/crs/OGC/1.3/CRS84",
        "https://www.opengis.net/def/crs/OGC/1.3/CRS84",
        "urn:ogc:def:crs:EPSG::4326",
        "http://www.opengis.net/def/crs/EPSG/0/4326",
        "EPSG:4326",
        "OGC:CRS84",
    }
)

Fault = dict[str, Any]


@dataclass(frozen=True)
class ReadZone:
    """A zone version as it was sent and understood.

    Attributes
    ----------
    identifier : str
    name, in_force_from, in_force_until, season : str or None, as sent
    edges : {"straight", "geodesic"}
    geometry_sent : dict, the GeoJSON geometry as sent
    shape : ZoneShape
    unknown_properties : list of str, properties that were not used
    """

    identifier: str
    name: str | None
    in_force_from: str | None
    in_force_until: str | None
    season: str | None
    edges: str
    geometry_sent: dict[str, Any]
    shape: ZoneShape
    unknown_properties: list[str]


def read_zone(body: Mapping[str, Any], identifier: str, time_zone: str) -> ReadZone:
    """The zone of one Feature.

    Parameters
    ----------
    body : mapping, the Feature
    identifier : str, from the path; an id in the Feature must be the same
    time_zone : str, IANA name, for dates

    Raises
    ------
    Problem
        It is not a Feature, or cannot be a zone; every fault is named (422).
    """
    if body.get("type") != "Feature":
        raise _not_geojson("Feature", body)
    faults = _crs_faults(body, "")
    zone = _read_feature(body, identifier, "", time_zone, faults)
    if (given := body.get("id")) is not None and _as_text(given) != identifier:
        message = (
            f"The Feature's id {str(given)[:40]!r} is not {identifier!r}, the zone of the path. Make them the same."
        )
        faults.append(_fault("id_mismatch", message, "/id"))
    if faults or zone is None:
        raise _invalid_zone(faults)
    return zone


def read_zones(body: Mapping[str, Any], time_zone: str) -> list[ReadZone]:
    """The zones of a FeatureCollection, all of them or none.

    Parameters
    ----------
    body : mapping, the FeatureCollection
    time_zone : str, IANA name, for dates

    Raises
    ------
    Problem
        It is not a FeatureCollection, or a feature cannot be a zone; the faults of all are named (422).
    """
    features = body.get("features")
    if body.get("type") != "FeatureCollection" or not isinstance(features, list):
        raise _not_geojson("FeatureCollection", body)
    if not features:
        raise Problem(422, "no-rows", "The body holds no rows", "The FeatureCollection is empty. Send at least one.")
    faults = _crs_faults(body, "")
    zones: list[ReadZone] = []
    seen: set[tuple[str, float]] = set()
    for number, feature in enumerate(features):
        pointer = f"/features/{number}"
        if not isinstance(feature, dict) or feature.get("type") != "Feature":
            faults.append(_fault("not_a_feature", "This is not a GeoJSON Feature.", pointer))
            continue
        faults += _crs_faults(feature, pointer)
        identifier = _identifier(feature, pointer, faults)
        zone = _read_feature(feature, identifier, pointer, time_zone, faults)
        if zone is None:
            continue
        if (key := (identifier, _begins_ms(zone, time_zone))) in seen:
            message = f"The zone {identifier[:40]!r} is there twice with the same in_force_from. Keep one."
            faults.append(_fault("duplicate_zone", message, f"{pointer}/id"))
        seen.add(key)
        zones.append(zone)
    if faults:
        raise _invalid_zone(faults)
    # The earlier version of a zone first, so that the later one ends it.
    return sorted(zones, key=lambda zone: _begins_ms(zone, time_zone))


def _begins_ms(zone: ReadZone, time_zone: str) -> float:
    return -math.inf if zone.in_force_from is None else date_ms(zone.in_force_from, time_zone)


def _not_geojson(wanted: str, body: Mapping[str, Any]) -> Problem:
    detail = f"Expected a GeoJSON {wanted}, got type {str(body.get('type'))[:40]!r}. See RFC 7946."
    return Problem(422, "not-geojson", "The body is not the GeoJSON expected", detail)


def _invalid_zone(faults: list[Fault]) -> Problem:
    first = faults[0]
    more = f" There are {len(faults)} faults; all are listed." if len(faults) > 1 else ""
    # The members of the first fault stand at the top too, where a reader of one zone looks for them.
    extra = {name: first[name] for name in ("code", "pointer", "place")} | {"errors": faults}
    return Problem(422, "invalid-zone", "A zone is not valid", f"{first['detail']}{more}", extra)


def _fault(code: str, message: str, pointer: str, place: tuple[float, float] | None = None) -> Fault:
    return {"code": code, "detail": message, "pointer": pointer, "place": None if place is None else list(place)}


def _crs_faults(member: Mapping[str, Any], pointer: str) -> list[Fault]:
    crs = member.get("crs")
    if crs is None:
        return []
    name = (
        crs.get("properties", {}).get("name")
        if isinstance(crs, dict) and isinstance(crs.get("properties"), dict)
        else crs
    )
    if isinstance(name, str) and name in _WGS84:
        return []
    message = f"The coordinate reference system {str(name)[:80]!r} is not WGS 84. Send longitude, latitude in WGS 84."
    return [_fault("foreign_crs", message, f"{pointer}/crs")]


def _identifier(feature: Mapping[str, Any], pointer: str, faults: list[Fault]) -> str:
    given = feature.get("id")
    identifier = _as_text(given)
    if given is None:
        faults.append(_fault("missing_id", "The feature has no id. Give the zone's identifier as its id.", pointer))
        return ""
    if not isinstance(identifier, str):
        faults.append(_fault("bad_id", f"The id is a {type(given).__name__}. Write a text.", f"{pointer}/id"))
        return ""
    if message := identifier_fault(identifier):
        faults.append(_fault("bad_id", message, f"{pointer}/id"))
    return identifier


def _as_text(given: Any) -> Any:
    # RFC 7946 allows numbers as ids; a whole number is the same identifier in figures.
    return str(given) if isinstance(given, int) and not isinstance(given, bool) else given


def _read_feature(
    feature: Mapping[str, Any], identifier: str, pointer: str, time_zone: str, faults: list[Fault]
) -> ReadZone | None:
    given = feature.get("properties")
    properties = given if isinstance(given, dict) else {}
    if given is not None and not isinstance(given, dict):
        faults.append(_fault("bad_properties", "properties must be an object or null.", f"{pointer}/properties"))
    texts = {name: _text(properties, name, pointer, faults) for name in PROPERTIES}
    _check_dates(texts, pointer, time_zone, faults)
    _check_season(texts["season"], pointer, faults)
    edges = texts["edges"] or "straight"
    if edges not in EDGES:
        message = f"edges {edges[:40]!r} is unknown. Write straight (in longitude and latitude) or geodesic."
        faults.append(_fault("unknown_edges", message, f"{pointer}/properties/edges"))
        edges = "straight"
    shape = _shape(feature.get("geometry"), edges, pointer, faults)
    if shape is None:
        return None
    unknown = sorted(name for name in properties if name not in PROPERTIES)
    sent = dict(feature["geometry"])
    return ReadZone(
        identifier,
        texts["name"],
        texts["in_force_from"],
        texts["in_force_until"],
        texts["season"],
        edges,
        sent,
        shape,
        unknown,
    )


def _text(properties: Mapping[str, Any], name: str, pointer: str, faults: list[Fault]) -> str | None:
    value = properties.get(name)
    if value is None or isinstance(value, str):
        text = value.strip() if value else None
        if text and len(text) > LONGEST_NAME:
            message = f"{name} has {len(text)} characters; at most {LONGEST_NAME} are allowed."
            faults.append(_fault("too_long", message, f"{pointer}/properties/{name}"))
            return None
        return text or None
    message = f"{name} must be a text or null, got a {type(value).__name__}."
    faults.append(_fault("not_a_text", message, f"{pointer}/properties/{name}"))
    return None


def _check_dates(texts: dict[str, str | None], pointer: str, time_zone: str, faults: list[Fault]) -> None:
    instants = {}
    for name in ("in_force_from", "in_force_until"):
        text = texts[name]
        if text is not None:
            try:
                instants[name] = date_ms(text, time_zone)
            except CalendarError as fault:
                faults.append(_fault(fault.code, f"{name}: {fault.message}", f"{pointer}/properties/{name}"))
                texts[name] = None
    if len(instants) == 2 and instants["in_force_until"] <= instants["in_force_from"]:
        message = (
            f"in_force_until {texts['in_force_until']} is not after in_force_from {texts['in_force_from']}. "
            "The zone would never be in force."
        )
        faults.append(_fault("empty_time_in_force", message, f"{pointer}/properties/in_force_until"))


def _check_season(text: str | None, pointer: str, faults: list[Fault]) -> None:
    if text is not None:
        try:
            Season.parse(text)
        except CalendarError as fault:
            faults.append(_fault(fault.code, fault.message, f"{pointer}/properties/season"))


def _shape(geometry: Any, edges: str, pointer: str, faults: list[Fault]) -> ZoneShape | None:
    if not isinstance(geometry, dict):
        message = "The feature has no geometry. A zone is a Polygon or a MultiPolygon."
        faults.append(_fault("not_a_polygon", message, f"{pointer}/geometry"))
        return None
    faults += _crs_faults(geometry, f"{pointer}/geometry")
    try:
        return ZoneShape.from_geojson(geometry, "geodesic" if edges == "geodesic" else "straight")
    except ZoneGeometryError as fault:
        faults.append(_fault(fault.code, fault.message, f"{pointer}/geometry{fault.pointer}", fault.place))
    return None
