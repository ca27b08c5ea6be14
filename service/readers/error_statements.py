"""Stated location errors of a chunk of rows, turned into covariances."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Final

import numpy as np
from numpy.typing import NDArray

from estimators import (
    ERROR_KINDS,
    LocationErrorStatementError,
    covariance_from_argos_class,
    covariance_from_ellipse,
    covariance_from_radius,
    covariance_from_satellites,
    usable_covariance,
)
from service.readers.coding import coded
from service.readers.faults import Faults

FloatArray = NDArray[np.float64]
Statement = tuple[str, ...]

LARGEST_ERROR_SD_M: Final = 1e6
"""A fix with a larger error says nothing about where the animal was, and no plane frame holds it."""

ERROR_COLUMNS: Final = tuple(column for columns in ERROR_KINDS.values() for column in columns)
"""Every column that states an error, or a part of one."""


def read_error_statements(
    columns: Mapping[str, Sequence[str]], count: int, faults: Faults
) -> tuple[NDArray[np.int8], FloatArray]:
    """Covariance of each row from whichever way it states its error.

    Parameters
    ----------
    columns : mapping of column name to texts, each of length ``count``
    count : int, rows
    faults : Faults, gains one fault per bad statement

    Returns
    -------
    error_kind : ndarray of int8, shape (count,), index into ``tuple(ERROR_KINDS)``, -1 where none is stated
    covariance_m2 : ndarray, shape (count, 3), square metres; NaN where none is stated
    """
    kind_of_row = np.full(count, -1, dtype=np.int8)
    covariance_m2 = np.full((count, 3), np.nan)
    times_stated = np.zeros(count, dtype=np.int64)
    for number, (kind, names) in enumerate(ERROR_KINDS.items()):
        if not any(name in columns for name in names):
            continue
        blank = [""] * count
        texts = [columns.get(name, blank) for name in names]
        statements: list[Statement]
        if len(names) == 1:
            # Hashing a text again is cheaper than making a tuple of it for every row.
            codes, distinct = coded(texts[0])
            statements = [(text,) for text in distinct]
        else:
            codes, statements = coded(list(zip(*texts, strict=True)))
        stated = np.array([any(map(str.strip, statement)) for statement in statements])[codes]
        times_stated += stated
        kind_of_row[stated] = number
        covariance_m2[stated] = _covariances(kind, statements, codes, stated, faults)
    for row in np.nonzero(times_stated > 1)[0].tolist():
        given = [name for name in ERROR_COLUMNS if name in columns and columns[name][row].strip()]
        message = f"The error is stated in more than one way: {', '.join(given)}. State it in one way per row."
        faults.add(row, given[0], "two_error_statements", message, columns[given[0]][row])
    return kind_of_row, covariance_m2


def _covariances(
    kind: str, statements: list[Statement], codes: NDArray[np.int64], stated: NDArray[np.bool_], faults: Faults
) -> FloatArray:
    """Covariances of the rows that state an error; equal statements are understood only once."""
    used = np.unique(codes[stated])
    answers, refusals = _understood(kind, [statements[code] for code in used.tolist()])
    place = np.zeros(len(statements), dtype=np.int64)
    place[used] = np.arange(len(used))
    for number, refusal in refusals.items():
        for row in np.nonzero(codes == used[number])[0].tolist():
            faults.add(row, ERROR_KINDS[kind][0], refusal.code, refusal.message, ",".join(statements[codes[row]]))
    return answers[place[codes[stated]]]


def _understood(kind: str, statements: list[Statement]) -> tuple[FloatArray, dict[int, LocationErrorStatementError]]:
    """Covariance of each statement, and what is wrong with those refused: found by halving, since few are."""
    try:
        return _covariance(kind, statements), {}
    except LocationErrorStatementError as fault:
        if len(statements) == 1:
            return np.full((1, 3), np.nan), {0: fault}
    half = len(statements) // 2
    first, refused = _understood(kind, statements[:half])
    second, refused_later = _understood(kind, statements[half:])
    moved = {half + code: fault for code, fault in refused_later.items()}
    return np.concatenate([first, second]), refused | moved


def _covariance(kind: str, statements: list[Statement]) -> FloatArray:
    if not statements:
        return np.empty((0, 3))
    if kind == "argos_class":
        return covariance_from_argos_class([statement[0].strip().upper() for statement in statements])
    values = np.array([_numbers(kind, statement) for statement in statements])
    if kind == "ellipse":
        covariance_m2 = covariance_from_ellipse(values[:, 0], values[:, 1], values[:, 2])
    elif kind == "satellites":
        covariance_m2 = covariance_from_satellites(_whole_numbers(values[:, 0]))
    else:
        covariance_m2 = covariance_from_radius(kind, values[:, 0])
    _check_usable(kind, statements, covariance_m2)
    return covariance_m2


def _numbers(kind: str, statement: Statement) -> list[float]:
    names = ERROR_KINDS[kind]
    if not all(map(str.strip, statement)):
        missing = [name for name, text in zip(names, statement, strict=True) if not text.strip()]
        raise LocationErrorStatementError(
            "incomplete_error_statement", f"An ellipse needs {', '.join(names)}; {', '.join(missing)} is empty."
        )
    try:
        if "_" in "".join(statement):
            raise ValueError
        values = [float(text) for text in statement]
    except ValueError:
        raise LocationErrorStatementError(
            "error_not_a_number",
            f"{', '.join(names)} must be numbers, got {', '.join(statement)[:60]!r}. Leave it empty if unknown.",
        ) from None
    if any(math.isfinite(value) and abs(value) > LARGEST_ERROR_SD_M * 10.0 for value in values):
        raise _out_of_range(kind, statement)
    return values


def _out_of_range(kind: str, statement: Statement) -> LocationErrorStatementError:
    return LocationErrorStatementError(
        "error_out_of_range",
        f"{', '.join(ERROR_KINDS[kind])} {', '.join(statement)[:60]} is too large, too small or too narrow to be "
        "computed with. State it in metres.",
    )


def _whole_numbers(values: FloatArray) -> NDArray[np.int64]:
    whole = np.isfinite(values) & (values == np.floor(values)) & (np.abs(values) < 1e6)
    if not np.all(whole):
        worst = values[~whole][0]
        raise LocationErrorStatementError(
            "satellites_not_a_count", f"satellites {worst:g} is not a whole number. Leave it empty if unknown."
        )
    return values.astype(np.int64)


def _check_usable(kind: str, statements: list[Statement], covariance_m2: FloatArray) -> None:
    """Refuse errors that leave no usable covariance: as large as the Earth, or lost in rounding."""
    largest = np.maximum(covariance_m2[:, 0], covariance_m2[:, 2]) <= LARGEST_ERROR_SD_M**2
    usable = largest & usable_covariance(covariance_m2)
    if not np.all(usable):
        raise _out_of_range(kind, statements[int(np.argmin(usable))])
