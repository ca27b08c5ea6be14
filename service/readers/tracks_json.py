"""Fixes from JSON, an array of objects, in chunks of bounded memory."""

from __future__ import annotations

from collections.abc import Iterator
from decimal import InvalidOperation
from typing import Any, BinaryIO, Final
from zoneinfo import ZoneInfo

import ijson
import numpy as np

from service.problems import Problem
from service.readers.bounded_json import BoundedJson
from service.readers.faults import Faults
from service.readers.fix_columns import KNOWN_COLUMNS, checked_chunk, no_rows_problem, time_zone_of
from service.readers.fix_rows import CHUNK_ROWS, FixChunk, ReadOutcome

CHUNK_BYTES: Final = 8_000_000
"""A chunk ends here although it has few rows: rows may be large."""
UNKNOWN_COLUMNS_TOLD: Final = 1000

_BOM = b"\xef\xbb\xbf"
_PEEKED_BYTES = 65536


def read_tracks_json(
    stream: BinaryIO, received_at_ms: int, time_zone: str | None, outcome: ReadOutcome
) -> Iterator[FixChunk]:
    """Read fixes from a JSON array of objects whose members are named as the columns of the CSV.

    Parameters
    ----------
    stream : binary file, seekable, read from its start
    received_at_ms, time_zone, outcome : as in `service.readers.tracks_csv.read_tracks_csv`

    Yields
    ------
    FixChunk

    Raises
    ------
    Problem
        The body as a whole cannot be read: empty, not UTF-8, not JSON, not an array, no rows.
    """
    zone = time_zone_of(time_zone)
    _find_array(stream)
    bounded = BoundedJson(stream)
    entries = ijson.items(bounded, "item")
    try:
        while rows := _next_rows(entries, bounded):
            yield _chunk(rows, received_at_ms, zone, outcome)
    except ijson.JSONError as fault:
        raise _json_problem(str(fault), outcome.rows) from fault
    except InvalidOperation as fault:
        raise _json_problem("the exponent of a number is too large", outcome.rows) from fault
    if outcome.rows == 0:
        raise no_rows_problem()


def _find_array(stream: BinaryIO) -> None:
    """Leave the stream at its array, or refuse it."""
    stream.seek(0)
    stream.seek(len(_BOM) if stream.read(len(_BOM)) == _BOM else 0)
    first = b""
    while not first and (peeked := stream.read(_PEEKED_BYTES)):
        first = peeked.lstrip()[:1]
    stream.seek(-len(peeked.lstrip()), 1)
    if not first:
        raise Problem(400, "empty-body", "The body is empty", "The body is empty. Send an array of objects.")
    if first == b"{":
        raise Problem(
            422, "not-an-array", "The body is not an array", 'The body is one object. Send an array: [{"animal": ...}].'
        )
    if first != b"[":
        raise _json_problem("it does not begin with [", 0)


def _next_rows(entries: Iterator[Any], bounded: BoundedJson) -> list[Any]:
    """The next entries of the array, bounded in number and in size."""
    rows: list[Any] = []
    most_bytes = bounded.taken + CHUNK_BYTES
    for entry in entries:
        rows.append(entry)
        if len(rows) == CHUNK_ROWS or bounded.taken > most_bytes:
            break
    return rows


def _json_problem(message: str, rows: int) -> Problem:
    said = " ".join(message.split())[:200]
    if "UTF8" in message or "utf-8" in message:
        return Problem(400, "not-utf-8", "The body is not UTF-8", f"A byte cannot be read as UTF-8 ({said}).")
    return Problem(
        400, "not-json", "The body is not JSON", f"Among the objects after number {rows}: {said}. NaN is not JSON."
    )


def _chunk(rows: list[Any], received_at_ms: int, zone: ZoneInfo | None, outcome: ReadOutcome) -> FixChunk:
    faults = Faults()
    columns: dict[str, list[str]] = {name: [""] * len(rows) for name in KNOWN_COLUMNS}
    unknown = dict.fromkeys(outcome.unknown_columns)
    for place, row in enumerate(rows):
        if not isinstance(row, dict):
            message = "The array holds something that is not an object. Write one object per fix."
            faults.add(place, None, "not_an_object", message, _shown(row))
            continue
        for name, value in row.items():
            if name not in columns:
                unknown[name] = None
            elif isinstance(value, dict | list | bool):
                faults.add(place, None, "not_a_value", f"{name} must be a text or a number.", _shown(value))
            elif value is not None:
                columns[name][place] = str(value)
    outcome.unknown_columns = list(unknown)[:UNKNOWN_COLUMNS_TOLD]
    row_number = np.arange(outcome.rows + 1, outcome.rows + 1 + len(rows), dtype=np.int64)
    return checked_chunk(columns, row_number, received_at_ms, zone, outcome, faults)


def _shown(value: Any) -> str:
    # Never the text of a nested value: it could be as large as the body.
    return f"({type(value).__name__})" if isinstance(value, dict | list) else str(value)[:100]
