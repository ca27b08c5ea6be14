"""Zone use: row by row, and summed up over animals."""

from __future__ import annotations

import time
from typing import Annotated, Any
from urllib.parse import urlencode

from fastapi import APIRouter, Depends, Query, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.cursors import pack_cursor, unpack_cursor
from service.media_types import CSV, GEOJSON, JSON, negotiated
from service.principal import Caller
from service.problems import Problem
from service.routes.animals import unknown_animal
from service.routes.context import Site, json_response
from service.routes.models import SummaryPage, ZoneUsePage
from service.routes.parameters import MonthRangeParameters, ZoneUseParameters
from service.routes.waiting import wait_if_preferred
from service.routes.zones import unknown_zone
from service.store.animals import get_animal, group_exists
from service.store.zone_use_reading import ZoneUseFilter, touched_current, zone_use_page
from service.store.zones import get_zone
from service.writers.instants import utc_text
from service.writers.summary import USING_RULE, summary_csv
from service.writers.summary_pages import summary_page
from service.writers.zone_features import feature_collection
from service.writers.zone_use_csv import zone_use_csv
from service.writers.zone_use_features import features_with_rows, flat_features
from service.writers.zone_use_rows import CAUTIONS, zone_use_row

router = APIRouter(tags=["zone use"], dependencies=[Depends(wait_if_preferred)])

_OFFERED = (JSON, CSV, GEOJSON)
_OTHER_FORMS: dict[int | str, dict[str, Any]] = {
    200: {"content": {CSV: {"schema": {"type": "string"}}, GEOJSON: {"schema": {"type": "object"}}}}
}


@router.get("/zone-use", response_model=ZoneUsePage, responses=_OTHER_FORMS)
def get_zone_use(
    request: Request, site: Site, caller: Caller, parameters: Annotated[ZoneUseParameters, Query()]
) -> Response:
    """Rows by animal, month, zone and version."""
    media_type = negotiated(_OFFERED, parameters.f, request.headers.get("accept"))
    key = unpack_cursor(parameters.cursor, str, str, str, int)
    after = None if key is None else (str(key[0]), str(key[1]), str(key[2]), int(key[3]))
    with site.store.read() as connection:
        wanted = _filter(connection, caller.programme, parameters, nonzero=parameters.nonzero)
        found = zone_use_page(connection, caller.programme, wanted, after, parameters.limit + 1)
        page = found[: parameters.limit]
        rows = [zone_use_row(stored, caller.programme) for stored in page]
        members = _members(connection, caller.programme, wanted, minimum_stay_hours=site.settings.minimum_stay_hours)
        features = features_with_rows(connection, caller.programme, rows) if media_type == GEOJSON else []
    more = pack_cursor(list(page[-1].place)) if len(found) > len(page) else None
    headers = _link(request, more)
    if media_type == CSV:
        return Response(zone_use_csv(rows), media_type=CSV, headers=headers)
    if media_type == GEOJSON:
        return json_response(feature_collection(features, **members, next=more), headers=headers, media_type=GEOJSON)
    return json_response({**members, "rows": rows, "next": more}, headers=headers)


@router.get("/zone-use/summary", response_model=SummaryPage, responses=_OTHER_FORMS)
def get_summary(
    request: Request, site: Site, caller: Caller, parameters: Annotated[MonthRangeParameters, Query()]
) -> Response:
    """Per zone version and month: how many animals were tracked and used it, and means over animals."""
    media_type = negotiated(_OFFERED, parameters.f, request.headers.get("accept"))
    key = unpack_cursor(parameters.cursor, str, str, int)
    after = None if key is None else (str(key[0]), str(key[1]), int(key[2]))
    with site.store.read() as connection:
        wanted = _filter(connection, caller.programme, parameters)
        rows, more_key = summary_page(connection, caller.programme, wanted, after, parameters.limit)
        members = _members(connection, caller.programme, wanted, using_rule=USING_RULE)
        features = flat_features(connection, caller.programme, rows) if media_type == GEOJSON else []
    more = None if more_key is None else pack_cursor(more_key)
    headers = _link(request, more)
    if media_type == CSV:
        return Response(summary_csv(rows), media_type=CSV, headers=headers)
    if media_type == GEOJSON:
        return json_response(feature_collection(features, **members, next=more), headers=headers, media_type=GEOJSON)
    return json_response({**members, "rows": rows, "next": more}, headers=headers)


def _filter(
    connection: Connection, programme: str, parameters: MonthRangeParameters, *, nonzero: bool = False
) -> ZoneUseFilter:
    """What is asked for; unknown names are refused, so that nothing found never hides a misspelling."""
    if parameters.programme not in (None, programme):
        detail = f"There is no programme {str(parameters.programme)[:100]!r} here. Yours is {programme!r}."
        raise Problem(404, "unknown-programme", "There is no such programme", detail)
    if parameters.animal is not None and get_animal(connection, programme, parameters.animal) is None:
        raise unknown_animal(parameters.animal)
    if parameters.zone is not None and not get_zone(connection, programme, parameters.zone):
        raise unknown_zone(parameters.zone)
    if parameters.group is not None and not group_exists(connection, programme, parameters.group):
        detail = f"No animal is in a group {parameters.group[:100]!r}. Groups are stated by PUT /animals/{{animal}}."
        raise Problem(404, "unknown-group", "There is no such group", detail)
    return ZoneUseFilter(
        parameters.animal, parameters.zone, parameters.group, parameters.month_from, parameters.month_to, nonzero
    )


def _members(connection: Connection, programme: str, wanted: ZoneUseFilter, **own: float | str) -> dict[str, Any]:
    """What every answer about zone use says besides its rows."""
    return {
        "as_of": utc_text(time.time_ns() // 1_000_000),
        "current": touched_current(connection, programme, wanted),
        **own,
        "cautions": list(CAUTIONS),
    }


def _link(request: Request, cursor: str | None) -> dict[str, str]:
    """Link header to the next page: a CSV has no other place for it."""
    if cursor is None:
        return {}
    query = urlencode([*((k, v) for k, v in request.query_params.multi_items() if k != "cursor"), ("cursor", cursor)])
    return {"Link": f'<{request.url.path}?{query}>; rel="next"'}
