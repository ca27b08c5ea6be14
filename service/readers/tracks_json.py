"""Fixes from JSON, an array of objects, in chunks of bounded memory."""

from __future__ import annotations

import decimal
from collections.abc import Iterator
from itertools import islice
from typing import Any, BinaryIO, Final
from zoneinfo import ZoneInfo

import ijson
import numpy as np

from service.problems import Problem
from service.readers.faults import Faults
from service.readers.fix_columns import KNOWN_COLUMNS, checked_chunk, no_rows_problem, time_zone_of
from service.readers.fix_rows import CHUNK_ROWS, FixChunk, ReadOutcome

LONGEST_NUMBER: Final = 640
"""Digits in a row that a body may have: Python reads integers of that length under any setting."""

_BOM = b"\xef\xbb\xbf"
_PEEKED_BYTES = 65536
_DIGITS_AS_ZEROS = bytes.maketrans(b"123456789", b"000000000")


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
    items = ijson.items(_ShortNumbers(stream), "item")
    try:
        while rows := list(islice(items, CHUNK_ROWS)):
            yield _chunk(rows, received_at_ms, zone, outcome)
    except ijson.JSONError as fault:
        raise _json_problem(str(fault), outcome.rows) from fault
    except decimal.InvalidOperation as fault:
        raise _json_problem("the exponent of a number is too large", outcome.rows) from fault
    if outcome.rows == 0:
        raise no_rows_problem()


class _ShortNumbers:
    """A stream that refuses numbers too long for Python's integers: the compiled parser would end the process."""

    def __init__(self, stream: BinaryIO) -> None:
        self._stream, self._before = stream, b""

    def read(self, size: int) -> bytes:
        block = self._stream.read(size)
        signs = self._before + block.translate(_DIGITS_AS_ZEROS)
        if b"0" * (LONGEST_NUMBER + 1) in signs:
            raise ijson.JSONError(f"there are more than {LONGEST_NUMBER} digits in a row")
        self._before = signs[-LONGEST_NUMBER:]
        return block


def _find_array(stream: BinaryIO) -> None:
    """Leave the stream at its array, or refuse it."""
    stream.seek(0)
    start = stream.read(_PEEKED_BYTES)
    stream.seek(len(_BOM) if start.startswith(_BOM) else 0)
    first = start.removeprefix(_BOM).lstrip()[:1]
    if not first:
        raise Problem(400, "empty-body", "The body is empty", "The body is empty. Send an array of objects.")
    if first == b"{":
        raise Problem(
            422, "not-an-array", "The body is not an array", 'The body is one object. Send an array: [{"animal": ...}].'
        )
    if first != b"[":
        raise _json_problem("it does not begin with [", 0)


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
    for place, row in enumerate(rows):
        if not isinstance(row, dict):
            message = "The array holds something that is not an object. Write one object per fix."
            faults.add(place, None, "not_an_object", message, _shown(row))
            continue
        for name, value in row.items():
            if name not in columns:
                if name not in outcome.unknown_columns:
                    outcome.unknown_columns.append(name)
            elif isinstance(value, dict | list | bool):
                faults.add(place, None, "not_a_value", f"{name} must be a text or a number.", _shown(value))
            elif value is not None:
                columns[name][place] = str(value)
    row_number = np.arange(outcome.rows + 1, outcome.rows + 1 + len(rows), dtype=np.int64)
    return checked_chunk(columns, row_number, received_at_ms, zone, outcome, faults)


def _shown(value: Any) -> str:
    # Never the text of a nested value: it could be as large as the body.
    return f"({type(value).__name__})" if isinstance(value, dict | list) else str(value)[:100]
