"""Zones and their versions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.body_spool import SpooledBody, spooled
from service.cursors import pack_cursor, unpack_cursor
from service.etags import check_preconditions, entity_tag, not_modified
from service.media_types import GEOJSON, JSON, negotiated
from service.principal import Caller
from service.problems import Problem
from service.readers.json_body import read_json_object
from service.readers.zones_geojson import ReadZone, read_zone, read_zones
from service.routes.context import Site, WriteTurn, json_response, refuse_identifier
from service.routes.models import ZoneBody, ZonePage, ZoneReceiptBody, ZonesReceiptBody
from service.routes.parameters import PageParameters, Parameters
from service.store.database import WriteTransaction
from service.store.submissions import Counts, Payload, store_submission
from service.store.zones import ZoneOverlap, get_zone, list_zone_versions, put_zone, retire_zone
from service.writers.zone_features import feature_collection, zone_bodies, zone_body, zone_feature

LARGEST_ZONES_BYTES: Final = 50_000_000
"""Largest body of zones; a ring of 50,000 positions takes about 2 MB."""

router = APIRouter(tags=["zones"])

_OFFERED = (JSON, GEOJSON)
_GEOJSON_BODY = {
    "requestBody": {
        "required": True,
        "content": {GEOJSON: {"schema": {"type": "object"}}, JSON: {"schema": {"type": "object"}}},
    }
}
_GEOJSON_ANSWER: dict[int | str, dict[str, Any]] = {200: {"content": {GEOJSON: {"schema": {"type": "object"}}}}}
ZoneBodyIn = Annotated[SpooledBody, Depends(spooled(GEOJSON, JSON, largest_bytes=LARGEST_ZONES_BYTES))]


@router.get("/zones", response_model=ZonePage, responses=_GEOJSON_ANSWER)
def get_zones(request: Request, site: Site, caller: Caller, parameters: Annotated[PageParameters, Query()]) -> Response:
    """Live zone versions by zone: without geometry in JSON, with it in GeoJSON."""
    media_type = negotiated(_OFFERED, parameters.f, request.headers.get("accept"))
    key = unpack_cursor(parameters.cursor, str, int) or ("", 0)
    with site.store.read() as connection:
        after = (str(key[0]), int(key[1]))
        found = list_zone_versions(connection, caller.programme, after, parameters.limit + 1)
    page = found[: parameters.limit]
    more = pack_cursor([page[-1].zone, page[-1].version]) if len(found) > len(page) else None
    if media_type == GEOJSON:
        return json_response(feature_collection([zone_feature(each) for each in page], next=more), media_type=GEOJSON)
    return json_response({"zones": zone_bodies(caller.programme, page), "next": more})


@router.get("/zones/{zone}", response_model=ZoneBody, responses=_GEOJSON_ANSWER)
def get_one_zone(
    request: Request, site: Site, caller: Caller, zone: str, parameters: Annotated[Parameters, Query()]
) -> Response:
    """One zone with the geometry of its live versions."""
    media_type = negotiated(_OFFERED, parameters.f, request.headers.get("accept"))
    with site.store.read() as connection:
        versions = get_zone(connection, caller.programme, zone)
    if not versions:
        raise unknown_zone(zone)
    tag = entity_tag(versions[0].revision, media_type)
    if (known := not_modified(request.headers, tag)) is not None:
        return known
    body = (
        feature_collection([zone_feature(version) for version in versions])
        if media_type == GEOJSON
        else zone_body(caller.programme, versions, with_geometry=True)
    )
    return json_response(body, headers={"ETag": tag}, media_type=media_type)


@router.put(
    "/zones/{zone}",
    response_model=ZoneReceiptBody,
    responses={201: {"model": ZoneReceiptBody, "description": "The zone is new."}},
    openapi_extra=_GEOJSON_BODY,
)
def put_one_zone(
    request: Request,
    site: Site,
    caller: Caller,
    zone: str,
    _: Annotated[Parameters, Query()],
    body: ZoneBodyIn,
    _turn: WriteTurn,
) -> Response:
    """Store a version of a zone. The same in_force_from corrects that version; a later one ends it there."""
    refuse_identifier(zone)
    read = read_zone(read_json_object(body.file.read()), zone, site.settings.time_zone)
    with site.store.write("zone") as tx:
        before = get_zone(tx.connection, caller.programme, zone)
        check_preconditions(request.headers, before[0].revision if before else None)
        changed = _put_all(tx, caller.programme, [read])
        submission = _keep(tx, caller.programme, "zone", body, [read], changed, {"zone": zone})
        versions = get_zone(tx.connection, caller.programme, zone)
    site.notify()
    answer = zone_body(caller.programme, versions, with_geometry=True)
    told = {"submission": submission, "changed": bool(changed), "unknown_properties": read.unknown_properties}
    headers = {"ETag": entity_tag(versions[0].revision, JSON)}
    return json_response(answer | told, 200 if before else 201, headers)


@router.post(
    "/zones",
    response_model=ZonesReceiptBody,
    status_code=201,
    responses={200: {"model": ZonesReceiptBody, "description": "Nothing changed."}},
    openapi_extra=_GEOJSON_BODY,
)
def post_zones(
    site: Site, caller: Caller, _: Annotated[Parameters, Query()], body: ZoneBodyIn, _turn: WriteTurn
) -> Response:
    """Store the zones of a FeatureCollection, all of them or none."""
    read = read_zones(read_json_object(body.file.read()), site.settings.time_zone)
    with site.store.write("zones") as tx:
        changed = _put_all(tx, caller.programme, read)
        submission = _keep(tx, caller.programme, "zones", body, read, changed, {})
        names = dict.fromkeys(zone.identifier for zone in read)
        stored = [get_zone(tx.connection, caller.programme, name) for name in names]
    site.notify()
    answer = {
        "submission": submission,
        "changed": bool(changed),
        "unknown_properties": _unknown_properties(read),
        "zones": [zone_body(caller.programme, versions, with_geometry=False) for versions in stored],
    }
    return json_response(answer, 201 if changed else 200, {"Location": f"/submissions/{submission}"})


@router.delete("/zones/{zone}", status_code=204)
def delete_zone(
    request: Request, site: Site, caller: Caller, zone: str, _: Annotated[Parameters, Query()], _turn: WriteTurn
) -> Response:
    """Retire a zone: all its live versions end; what was stored of it is kept."""
    with site.store.write("zone") as tx:
        before = get_zone(tx.connection, caller.programme, zone)
        if not before:
            raise unknown_zone(zone)
        check_preconditions(request.headers, before[0].revision)
        retire_zone(tx, caller.programme, zone)
    site.notify()
    return Response(status_code=204)


def unknown_zone(zone: str) -> Problem:
    """No live zone has that identifier."""
    detail = f"There is no zone {zone[:100]!r} in force or planned. GET /zones lists them."
    return Problem(404, "unknown-zone", "There is no such zone", detail)


def _put_all(tx: WriteTransaction, programme: str, zones: Sequence[ReadZone]) -> int:
    """Store all zones, the earlier versions first; how many of them changed something."""
    changed, overlaps = 0, []
    for zone in zones:
        try:
            changed += put_zone(tx, programme, zone)[1]
        except ZoneOverlap as fault:
            overlaps.append({"zone": zone.identifier, "code": "overlapping_versions", "detail": str(fault)})
    if overlaps:
        raise Problem(
            409,
            "zone-versions-overlap",
            "Versions of a zone overlap in time",
            overlaps[0]["detail"],
            {"errors": overlaps},
        )
    return changed


def _keep(
    tx: WriteTransaction,
    programme: str,
    kind: str,
    body: SpooledBody,
    zones: Sequence[ReadZone],
    changed: int,
    parameters: dict[str, str],
) -> int:
    payload = Payload(body.file, body.size, body.sha256, body.media_type, parameters)
    counts = Counts(rows=len(zones), accepted=changed, unchanged=len(zones) - changed, corrected=0, rejected=0)
    notes = [f"{zone.identifier}: {note}" for zone in zones for note in zone.shape.notes]
    return store_submission(tx, programme, kind, payload, counts, notes, _unknown_properties(zones))


def _unknown_properties(zones: Sequence[ReadZone]) -> list[str]:
    return sorted({name for zone in zones for name in zone.unknown_properties})
