"""Rows of fixes as columns of text, checked: what the CSV and the JSON reader have in common."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Final
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from estimators import CalendarError, reporting_zone
from service.problems import Problem
from service.readers.coding import coded
from service.readers.error_statements import ERROR_COLUMNS, read_error_statements
from service.readers.faults import Faults
from service.readers.fix_rows import FixChunk, ReadOutcome
from service.readers.identifiers import identifier_fault
from service.readers.times import read_times

FloatArray = NDArray[np.float64]
Coded = tuple[NDArray[np.int64], list[str]]

REQUIRED_COLUMNS: Final = ("animal", "time", "lon", "lat")
KNOWN_COLUMNS: Final = (*REQUIRED_COLUMNS, "tag", *ERROR_COLUMNS)


def time_zone_of(name: str | None) -> ZoneInfo | None:
    """Time zone for times without an offset.

    Raises
    ------
    Problem
        There is no time zone of that name (400).
    """
    try:
        return None if name is None else reporting_zone(name)
    except CalendarError as fault:
        raise Problem(400, "invalid-parameter", "A query parameter is not valid", f"time_zone: {fault}") from fault


def no_rows_problem() -> Problem:
    """The body holds no fix at all."""
    return Problem(422, "no-rows", "The body holds no rows", "The body has no data rows. Send at least one fix.")


def checked_chunk(
    columns: Mapping[str, Sequence[str]],
    row_number: NDArray[np.int64],
    received_at_ms: int,
    time_zone: ZoneInfo | None,
    outcome: ReadOutcome,
    faults: Faults | None = None,
) -> FixChunk:
    """Accepted rows of a chunk; the others go to ``outcome.on_rejected``.

    Parameters
    ----------
    columns : mapping of column name to texts, each of length n; the required ones are there
    row_number : ndarray of int64, shape (n,), 1-based
    received_at_ms : int
    time_zone : ZoneInfo or None, zone of times without an offset
    outcome : ReadOutcome
    faults : Faults, optional, faults known before
    """
    faults = faults or Faults()
    count = len(row_number)
    animal = _coded("animal", columns["animal"], faults, required=True)
    tag = _coded("tag", columns.get("tag", [""] * count), faults, required=False)
    time_ms = read_times(columns["time"], received_at_ms, time_zone, faults)
    lon_deg = _degrees("lon", columns["lon"], 360.0, faults)
    lat_deg = _degrees("lat", columns["lat"], 90.0, faults)
    error_kind, covariance_m2 = read_error_statements(columns, count, faults)
    good = faults.good(count)
    if faults.of_row:
        outcome.on_rejected(faults.rejected_rows(row_number))
        outcome.rejected += len(faults.of_row)
    outcome.rows += count
    _note(outcome, "wrapped_longitude", good & (np.abs(lon_deg) > 180.0))
    _note(outcome, "zero_position", good & (lon_deg == 0.0) & (lat_deg == 0.0))
    return FixChunk(
        row_number[good],
        (animal[0][good], animal[1]),
        (tag[0][good], tag[1]),
        time_ms[good],
        _normalised(lon_deg[good]),
        lat_deg[good],
        error_kind[good],
        covariance_m2[good],
    )


def _note(outcome: ReadOutcome, code: str, rows: NDArray[np.bool_]) -> None:
    if found := int(np.count_nonzero(rows)):
        outcome.notes[code] += found


def _normalised(lon_deg: FloatArray) -> FloatArray:
    """Longitudes in (-180, 180]; those within it stay as they were sent, to the last digit."""
    wrapped = lon_deg - 360.0 * np.sign(lon_deg)
    inside = (lon_deg > -180.0) & (lon_deg <= 180.0)
    return np.where(inside, lon_deg, np.where(wrapped == -180.0, 180.0, wrapped)) + 0.0


def _coded(column: str, texts: Sequence[str], faults: Faults, *, required: bool) -> Coded:
    codes, distinct = coded(texts)
    names = [text.strip() for text in distinct]
    for code, name in enumerate(names):
        if name or required:
            message = identifier_fault(name)
            if message is not None:
                for row in np.nonzero(codes == code)[0].tolist():
                    faults.add(row, column, f"bad_{column}", message, texts[row])
    return codes, names


def _degrees(column: str, texts: Sequence[str], limit_deg: float, faults: Faults) -> FloatArray:
    values = _floats(texts)
    bad = ~(np.abs(values) <= limit_deg)
    for row in np.nonzero(bad)[0].tolist():
        text = texts[row].strip()
        if not text:
            code, message = f"missing_{column}", f"No {column} is given."
        elif np.isfinite(values[row]):
            code, message = f"{column}_out_of_range", f"{column} {text[:40]} is beyond ±{limit_deg:g} degrees."
        else:
            code, message = f"bad_{column}", f"{column} {text[:40]!r} is not a finite number of degrees."
        faults.add(row, column, code, f"{message} Write decimal degrees, such as 174.25.", texts[row])
    return np.where(bad, 0.0, values)


def _floats(texts: Sequence[str]) -> FloatArray:
    """Numbers of texts, NaN for what is not one."""
    try:
        if "_" not in "".join(texts):
            return np.array(list(map(float, texts)), dtype=np.float64)
    except ValueError:
        pass
    return np.array([_float(text) for text in texts], dtype=np.float64)


def _float(text: str) -> float:
    try:
        # Python reads 1_000 as a number; a spreadsheet never wrote it as one.
        return float("nan") if "_" in text else float(text)
    except ValueError:
        return float("nan")
