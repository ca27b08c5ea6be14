"""POST /tracks: fixes of any number of animals."""

from __future__ import annotations

import time
from dataclasses import replace
from typing import Annotated, Final

from fastapi import APIRouter, Depends, Query
from starlette.responses import Response

from service.body_spool import SpooledBody, spooled
from service.cursors import pack_cursor
from service.media_types import CSV, JSON
from service.principal import Caller
from service.problems import Problem, problem_response
from service.readers.fix_rows import ReadOutcome, RejectedRow
from service.readers.tracks_csv import read_tracks_csv
from service.readers.tracks_json import read_tracks_json
from service.routes.context import Context, Site, WriteTurn, json_response
from service.routes.models import TrackReceiptBody
from service.routes.parameters import TrackParameters
from service.store.submissions import Payload, Receipt, find_by_sha256, record_tracks, rejected_rows
from service.writers.receipts import receipt_body, rejected_bodies

SHOWN_REJECTED: Final = 1000
"""Rejected rows that an answer lists; the others are paged."""

router = APIRouter(tags=["tracks"])

_READERS = {CSV: read_tracks_csv, JSON: read_tracks_json}
_BODY = {
    "requestBody": {
        "required": True,
        "content": {
            CSV: {"schema": {"type": "string"}},
            JSON: {"schema": {"type": "array", "items": {"type": "object"}}},
        },
    }
}


@router.post(
    "/tracks",
    response_model=TrackReceiptBody,
    status_code=201,
    responses={200: {"model": TrackReceiptBody, "description": "Nothing changed."}},
    openapi_extra=_BODY,
)
def post_tracks(
    site: Site,
    caller: Caller,
    parameters: Annotated[TrackParameters, Query()],
    body: Annotated[SpooledBody, Depends(spooled(CSV, JSON))],
    _turn: WriteTurn,
) -> Response:
    """Take fixes: columns animal, time, lon, lat, optional tag, and at most one way of stating error per row."""
    sent = {} if parameters.time_zone is None else {"time_zone": parameters.time_zone}
    receipt = None if parameters.again else _earlier(site, caller.programme, body, sent)
    if receipt is None:
        receipt = _recorded(site, caller.programme, body, sent, parameters.time_zone)
        site.notify()
    return _answer(site, receipt)


def _earlier(site: Context, programme: str, body: SpooledBody, sent: dict[str, str]) -> Receipt | None:
    """Receipt for bytes that were sent before: nothing of them is new."""
    with site.store.read() as connection:
        earlier = find_by_sha256(connection, programme, "tracks", body.sha256, sent)
    if earlier is None:
        return None
    unchanged = earlier.rows - earlier.rejected
    return replace(earlier, accepted=0, corrected=0, unchanged=unchanged, changed=False, repeat_of=earlier.submission)


def _recorded(site: Context, programme: str, body: SpooledBody, sent: dict[str, str], time_zone: str | None) -> Receipt:
    received_at_ms = time.time_ns() // 1_000_000
    outcome = ReadOutcome(on_rejected=_kept_by_the_store)
    chunks = _READERS[body.media_type](body.file, received_at_ms, time_zone, outcome)
    payload = Payload(body.file, body.size, body.sha256, body.media_type, sent, received_at_ms)
    return record_tracks(site.store, programme, payload, chunks, outcome)


def _kept_by_the_store(_rows: list[RejectedRow]) -> None:
    raise RuntimeError("The store takes the rejected rows; it must say so before it reads.")


def _answer(site: Context, receipt: Receipt) -> Response:
    with site.store.read() as connection:
        rows = rejected_rows(connection, receipt.submission, 0, SHOWN_REJECTED)
    shown = {"rejected_rows": rejected_bodies(rows), "next_rejected": _next_rejected(receipt, rows)}
    body = receipt_body(receipt) | shown
    if receipt.rows and receipt.rejected == receipt.rows:
        first = body["rejected_rows"][0]
        detail = (
            f"All {receipt.rows} rows were rejected; no fix was stored. They are kept as submission "
            f"{receipt.submission}. Row {first['row']}: {first['message']}"
        )
        return problem_response(Problem(422, "all-rows-rejected", "Every row is bad", detail, body))
    return json_response(body, 201 if receipt.changed else 200, {"Location": f"/submissions/{receipt.submission}"})


def _next_rejected(receipt: Receipt, shown: list[RejectedRow]) -> str | None:
    if receipt.rejected <= len(shown):
        return None
    return f"/submissions/{receipt.submission}/rejected?cursor={pack_cursor([shown[-1].row])}"
