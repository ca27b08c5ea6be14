"""What was sent: receipts, payloads and rejected rows."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from typing import Annotated, Any

from fastapi import APIRouter, Query
from sqlalchemy import Connection
from starlette.responses import Response, StreamingResponse

from service.cursors import pack_cursor, unpack_cursor
from service.media_types import CSV, GEOJSON, JSON
from service.principal import Caller
from service.problems import Problem
from service.routes.context import Site, json_response
from service.routes.models import ReceiptBody, RejectedPage, SubmissionPage
from service.routes.parameters import PageParameters, Parameters
from service.store.submissions import Receipt, get_submission, list_submissions, payload_parts, rejected_rows
from service.writers.receipts import receipt_body, rejected_bodies

router = APIRouter(tags=["submissions"])

_READ_BYTES = 262_144
_PAYLOAD: dict[int | str, dict[str, Any]] = {
    200: {"content": {name: {"schema": {"type": "string", "format": "binary"}} for name in (CSV, JSON, GEOJSON)}}
}


@router.get("/submissions", response_model=SubmissionPage)
def get_submissions(site: Site, caller: Caller, parameters: Annotated[PageParameters, Query()]) -> Response:
    """Receipts, the oldest first."""
    after = unpack_cursor(parameters.cursor, int) or (0,)
    with site.store.read() as connection:
        found = list_submissions(connection, caller.programme, int(after[0]), parameters.limit + 1)
    page = found[: parameters.limit]
    more = pack_cursor([page[-1].submission]) if len(found) > len(page) else None
    return json_response({"submissions": [receipt_body(receipt) for receipt in page], "next": more})


@router.get("/submissions/{submission}", response_model=ReceiptBody)
def get_one_submission(site: Site, caller: Caller, submission: str, _: Annotated[Parameters, Query()]) -> Response:
    """One receipt."""
    with site.store.read() as connection:
        return json_response(receipt_body(_known(connection, caller.programme, submission)))


@router.get("/submissions/{submission}/rejected", response_model=RejectedPage)
def get_rejected(
    site: Site, caller: Caller, submission: str, parameters: Annotated[PageParameters, Query()]
) -> Response:
    """Rejected rows of a submission, in the order sent."""
    after = unpack_cursor(parameters.cursor, int) or (0,)
    with site.store.read() as connection:
        receipt = _known(connection, caller.programme, submission)
        found = rejected_rows(connection, receipt.submission, int(after[0]), parameters.limit + 1)
    page = found[: parameters.limit]
    body: dict[str, Any] = {
        "submission": receipt.submission,
        "rejected": receipt.rejected,
        "rejected_rows": rejected_bodies(page),
        "next": pack_cursor([page[-1].row]) if len(found) > len(page) else None,
    }
    return json_response(body)


@router.get("/submissions/{submission}/payload", response_class=Response, responses=_PAYLOAD)
def get_payload(site: Site, caller: Caller, submission: str, _: Annotated[Parameters, Query()]) -> Response:
    """The bytes as they were sent."""
    with site.store.read() as connection:
        receipt = _known(connection, caller.programme, submission)
        # Copied out first: a slow reader must not hold the store's snapshot.
        file = tempfile.TemporaryFile(dir=site.settings.data, prefix="payload-")  # noqa: SIM115 - closed when sent
        for part in payload_parts(connection, receipt.submission):
            file.write(part)
    size = file.tell()
    file.seek(0)

    def parts() -> Iterator[bytes]:
        with file:
            while part := file.read(_READ_BYTES):
                yield part

    headers = {
        "Content-Length": str(size),
        "Content-Disposition": f'attachment; filename="submission-{receipt.submission}"',
        "X-Content-Type-Options": "nosniff",
    }
    return StreamingResponse(parts(), media_type=receipt.media_type, headers=headers)


def _known(connection: Connection, programme: str, submission: str) -> Receipt:
    number = int(submission) if submission.isascii() and submission.isdecimal() and len(submission) < 19 else 0
    receipt = get_submission(connection, programme, number)
    if receipt is None:
        detail = f"There is no submission {submission[:40]!r}. GET /submissions lists them."
        raise Problem(404, "unknown-submission", "There is no such submission", detail)
    return receipt
