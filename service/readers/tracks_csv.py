"""Fixes from CSV, in chunks of bounded memory."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from itertools import islice
from typing import BinaryIO

import numpy as np

from service.problems import Problem
from service.readers.faults import Faults
from service.readers.fix_columns import KNOWN_COLUMNS, REQUIRED_COLUMNS, checked_chunk, no_rows_problem, time_zone_of
from service.readers.fix_rows import CHUNK_ROWS, FixChunk, ReadOutcome
from service.readers.plain_csv import LONGEST_LINE, next_plain_columns


def read_tracks_csv(
    stream: BinaryIO, received_at_ms: int, time_zone: str | None, outcome: ReadOutcome
) -> Iterator[FixChunk]:
    """Read fixes from CSV: UTF-8, comma-separated, one header line.

    Parameters
    ----------
    stream : binary file, seekable, at its start
    received_at_ms : int, milliseconds since 1970-01-01 UTC; a later fix is in the future
    time_zone : str or None, IANA name of the zone of times without an offset; None refuses them
    outcome : ReadOutcome, filled while chunks are consumed

    Yields
    ------
    FixChunk

    Raises
    ------
    Problem
        The body as a whole cannot be read: empty, not UTF-8, a column missing or twice there, no rows.
    """
    zone = time_zone_of(time_zone)
    try:
        header = _header(csv.reader(_lines(stream), strict=True))
        outcome.unknown_columns = [name for name in header if name not in KNOWN_COLUMNS]
        for columns, faults in _columns(stream, len(header)):
            count = len(columns[0])
            row_number = np.arange(outcome.rows + 1, outcome.rows + 1 + count, dtype=np.int64)
            named = dict(zip(header, columns, strict=True))
            yield checked_chunk(named, row_number, received_at_ms, zone, outcome, faults)
    except UnicodeDecodeError as fault:
        detail = f"After data row {outcome.rows} a byte cannot be read as UTF-8 ({fault.reason}). Save as UTF-8."
        raise Problem(400, "not-utf-8", "The body is not UTF-8", detail) from fault
    except csv.Error as fault:
        detail = f"After data row {outcome.rows}: {fault}. Check the quotes and line ends there."
        raise Problem(400, "not-csv", "The body is not CSV", detail) from fault
    if outcome.rows == 0:
        raise no_rows_problem()


def _columns(stream: BinaryIO, width: int) -> Iterator[tuple[list[list[str]], Faults]]:
    """Columns of the next rows, and the faults seen so far, until the stream ends."""
    while (columns := next_plain_columns(stream, width)) is not None:
        for first in range(0, len(columns[0]), CHUNK_ROWS):
            yield [column[first : first + CHUNK_ROWS] for column in columns], Faults()
    records = csv.reader(_lines(stream), strict=True)
    while rows := _next_rows(records):
        faults = Faults()
        _make_even(rows, width, faults)
        yield [list(column) for column in zip(*rows, strict=True)], faults


def _lines(stream: BinaryIO) -> Iterator[str]:
    """Lines of the stream, none taken before it is asked for."""
    encoding = "utf-8-sig" if stream.tell() == 0 else "utf-8"
    while line := stream.readline(LONGEST_LINE):
        if len(line) == LONGEST_LINE:
            raise csv.Error(f"a line is longer than {LONGEST_LINE} bytes")
        yield line.decode(encoding)
        encoding = "utf-8"


def _next_rows(records: Iterator[list[str]]) -> list[list[str]]:
    """The next rows that are not blank; empty at the end."""
    while rows := list(islice(records, CHUNK_ROWS)):
        if filled := [row for row in rows if row]:
            return filled
    return []


def _make_even(rows: list[list[str]], width: int, faults: Faults) -> None:
    for place, row in enumerate(rows):
        if len(row) != width:
            message = f"The row has {len(row)} fields, the header {width}. Check commas and quotes."
            faults.add(place, None, "wrong_field_count", message, ",".join(row))
            rows[place] = (row + [""] * width)[:width]


def _header(records: Iterator[list[str]]) -> list[str]:
    header = [name.strip() for name in next((row for row in records if row), [])]
    if not any(header):
        raise Problem(400, "empty-body", "The body is empty", "The body is empty. Send a header line and rows.")
    if missing := [name for name in REQUIRED_COLUMNS if name not in header]:
        raise Problem(
            422,
            "missing-column",
            "A required column is missing",
            f"Missing: {', '.join(missing)}. The header line has: {', '.join(header)[:300]}. "
            f"Needed are {', '.join(REQUIRED_COLUMNS)}, separated by commas.",
            {"missing": missing},
        )
    if twice := sorted({name for name in header if name and header.count(name) > 1}):
        raise Problem(
            422,
            "duplicate-column",
            "A column is there twice",
            f"More than once in the header: {', '.join(twice)[:300]}. Keep one of each.",
            {"duplicate": twice},
        )
    return header
