"""Submissions: what was sent, whole, with what became of each row."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Row, Select, insert, select, update

from service.readers.fix_rows import FixChunk, ReadOutcome, RejectedRow
from service.store import driver, schema
from service.store.database import Store, WriteTransaction
from service.store.fixes import FixRecorder
from service.store.payloads import Payload, PayloadKeeper, payload_parts
from service.store.programmes import get_programme

__all__ = [
    "Counts",
    "Payload",
    "Receipt",
    "find_by_sha256",
    "get_submission",
    "keep_rejected",
    "list_submissions",
    "payload_parts",
    "record_tracks",
    "rejected_rows",
    "store_submission",
]


@dataclass(frozen=True)
class Counts:
    """Rows of a submission; accepted ones are new or corrected, ``rows = accepted + unchanged + rejected``."""

    rows: int = 0
    accepted: int = 0
    unchanged: int = 0
    corrected: int = 0
    rejected: int = 0


@dataclass(frozen=True)
class Receipt:
    """What became of a submission.

    Attributes
    ----------
    submission : int, its number
    programme, kind : str; kind is one of "tracks", "zones", "animal", "zone"
    sha256, media_type : str, of the payload
    received_at_ms, commit_no : int
    rows, accepted, unchanged, corrected, rejected : int, see :class:`Counts`
    notes, unknown_columns : list of str
    changed : bool, whether the store says anything else than before
    repeat_of : int or None, the first submission of the same payload
    parameters : dict
    """

    submission: int
    programme: str
    kind: str
    sha256: str
    received_at_ms: int
    commit_no: int
    media_type: str
    rows: int
    accepted: int
    unchanged: int
    corrected: int
    rejected: int
    notes: list[str]
    unknown_columns: list[str]
    changed: bool
    repeat_of: int | None
    parameters: dict[str, str]


def find_by_sha256(
    connection: Connection, programme: str, kind: str, sha256: str, parameters: Mapping[str, str]
) -> Receipt | None:
    """The first submission of this payload, read the same way, or None."""
    table = schema.submission
    query = _submissions(programme).where(
        table.c.kind == kind, table.c.sha256 == sha256, table.c.parameters == _json(dict(parameters))
    )
    row = connection.execute(query.order_by(table.c.id).limit(1)).one_or_none()
    return None if row is None else _receipt(row)


def get_submission(connection: Connection, programme: str, submission: int) -> Receipt | None:
    """Receipt of a submission, or None where there is none of that number."""
    row = connection.execute(_submissions(programme).where(schema.submission.c.id == submission)).one_or_none()
    return None if row is None else _receipt(row)


def list_submissions(connection: Connection, programme: str, after: int, limit: int) -> list[Receipt]:
    """Receipts in order, those after a number (0 for the first page)."""
    query = _submissions(programme).where(schema.submission.c.id > after).order_by(schema.submission.c.id)
    return [_receipt(row) for row in connection.execute(query.limit(limit))]


def rejected_rows(connection: Connection, submission: int, after_row: int, limit: int) -> list[RejectedRow]:
    """Rejected rows of a submission in row order, those after a row number (0 for the first page)."""
    table = schema.rejected_row
    query = (
        select(table.c.row_no, table.c.column_name, table.c.code, table.c.message, table.c.value)
        .where(table.c.submission_id == submission, table.c.row_no > after_row)
        .order_by(table.c.row_no)
        .limit(limit)
    )
    return [RejectedRow(*row) for row in connection.execute(query)]


def store_submission(
    tx: WriteTransaction,
    programme: str,
    kind: str,
    payload: Payload,
    counts: Counts,
    notes: list[str],
    unknown_columns: list[str],
    rejected: Iterable[RejectedRow] = (),
) -> int:
    """Keep a submission whole.

    Returns
    -------
    int, its number
    """
    submission = _begin(tx, programme, kind, payload)
    with PayloadKeeper(tx.connection, submission, payload.file) as keeper:
        keeper.finish()
    keep_rejected(tx, submission, rejected)
    _finish(tx, submission, counts, notes, unknown_columns)
    return submission


def keep_rejected(tx: WriteTransaction, submission: int, rejected: Iterable[RejectedRow]) -> None:
    """Keep rows that were not taken."""
    columns = ("submission_id", "row_no", "column_name", "code", "message", "value")
    rows = [(submission, bad.row, bad.column, bad.code, bad.message, bad.value) for bad in rejected]
    driver.insert_rows(tx.connection, schema.rejected_row, columns, rows)


def record_tracks(
    store: Store, programme: str, payload: Payload, chunks: Iterable[FixChunk], outcome: ReadOutcome
) -> Receipt:
    """Keep a submission of fixes in one transaction, and what it changes.

    A fix that says what is stored is unchanged, one that says something else corrects it; rows of the submission
    that contradict each other are all rejected. An error in ``chunks`` leaves the store as it was.

    Parameters
    ----------
    store : Store
    programme : str
    payload : Payload
    chunks : iterable of FixChunk, consumed inside the transaction
    outcome : ReadOutcome, of the same reader; its ``on_rejected`` is set here

    Returns
    -------
    Receipt
    """
    with store.write("tracks") as tx:
        submission = _begin(tx, programme, "tracks", payload)
        outcome.on_rejected = lambda rejected: keep_rejected(tx, submission, rejected)
        recorder = FixRecorder(tx, get_programme(tx.connection, programme).id)
        with PayloadKeeper(tx.connection, submission, payload.file) as keeper:
            for chunk in chunks:
                keep_rejected(tx, submission, recorder.add(chunk))
                keeper.step()
            keeper.finish()
        recorder.finish()
        counts = Counts(
            outcome.rows,
            recorder.new + recorder.corrected,
            recorder.unchanged,
            recorder.corrected,
            outcome.rejected + recorder.contradicting,
        )
        _finish(tx, submission, counts, outcome.note_texts(), outcome.unknown_columns)
        receipt = get_submission(tx.connection, programme, submission)
    assert receipt is not None
    return receipt


def _begin(tx: WriteTransaction, programme: str, kind: str, payload: Payload) -> int:
    connection, parameters = tx.connection, dict(payload.parameters)
    earlier = find_by_sha256(connection, programme, kind, payload.sha256, parameters)
    made = connection.execute(
        insert(schema.submission).values(
            programme_id=get_programme(connection, programme).id,
            kind=kind,
            sha256=payload.sha256,
            media_type=payload.media_type,
            parameters=_json(parameters),
            size_bytes=payload.size,
            received_at_ms=tx.now_ms if payload.received_at_ms is None else payload.received_at_ms,
            commit_no=tx.commit_no,
            rows=0,
            accepted=0,
            unchanged=0,
            corrected=0,
            rejected=0,
            notes="[]",
            unknown_columns="[]",
            changed=False,
            repeat_of=None if earlier is None else earlier.submission,
        )
    )
    assert made.inserted_primary_key is not None
    return int(made.inserted_primary_key[0])


def _finish(
    tx: WriteTransaction, submission: int, counts: Counts, notes: list[str], unknown_columns: list[str]
) -> None:
    table = schema.submission
    tx.connection.execute(
        update(table)
        .where(table.c.id == submission)
        .values(
            rows=counts.rows,
            accepted=counts.accepted,
            unchanged=counts.unchanged,
            corrected=counts.corrected,
            rejected=counts.rejected,
            notes=_json(notes),
            unknown_columns=_json(unknown_columns),
            changed=counts.accepted > 0,
        )
    )


def _submissions(programme: str) -> Select[Any]:
    owner = schema.programme
    joined = schema.submission.join(owner, owner.c.id == schema.submission.c.programme_id)
    return (
        select(schema.submission, owner.c.name.label("programme")).select_from(joined).where(owner.c.name == programme)
    )


def _receipt(row: Row[Any]) -> Receipt:
    return Receipt(
        submission=row.id,
        programme=row.programme,
        kind=row.kind,
        sha256=row.sha256,
        received_at_ms=row.received_at_ms,
        commit_no=row.commit_no,
        media_type=row.media_type,
        rows=row.rows,
        accepted=row.accepted,
        unchanged=row.unchanged,
        corrected=row.corrected,
        rejected=row.rejected,
        notes=json.loads(row.notes),
        unknown_columns=json.loads(row.unknown_columns),
        changed=bool(row.changed),
        repeat_of=row.repeat_of,
        parameters=json.loads(row.parameters),
    )


def _json(value: Any) -> str:
    return json.dumps(value, sort_keys=True, ensure_ascii=False)
