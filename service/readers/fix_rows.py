"""Rows of fixes as every track reader hands them on: accepted ones in chunks, bad ones with their fault."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

CHUNK_ROWS: Final = 20_000
"""Rows that are read, checked and stored at a time; bounds the memory of an upload."""

NOTES: Final = {
    "wrapped_longitude": "Longitudes beyond ±180 were read as running on around the globe.",
    "zero_position": "Longitude 0, latitude 0 was taken as sent; receivers without a position often write it.",
}
"""What is worth telling about accepted rows, by code."""


@dataclass(frozen=True)
class RejectedRow:
    """A row that was not taken, with the first of its faults; the message tells all of them.

    Attributes
    ----------
    row : int, 1-based number of the data row, the header not counted
    column : str or None, None where the row as a whole is at fault
    code : str, stable name of the fault in ``snake_case``
    message : str, what is wrong, what was got, what to do
    value : str or None, what was sent, cut to 100 characters
    """

    row: int
    column: str | None
    code: str
    message: str
    value: str | None


@dataclass(frozen=True)
class FixChunk:
    """Accepted rows of one chunk, in the order sent.

    Attributes
    ----------
    row : ndarray of int64, shape (n,), 1-based number of the data row
    animal, tag : (codes, names)
        Codes: ndarray of int64, shape (n,), indices into the list of names. The tag ``""`` means none.
    time_ms : ndarray of int64, shape (n,), milliseconds since 1970-01-01 UTC
    lon_deg, lat_deg : ndarray of float64, shape (n,), degrees; longitude in (-180, 180]
    error_kind : ndarray of int8, shape (n,), index into ``tuple(estimators.ERROR_KINDS)``, -1 where none was stated
    covariance_m2 : ndarray of float64, shape (n, 3)
        [east variance, covariance, north variance]; NaN where no error was stated.
    """

    row: NDArray[np.int64]
    animal: tuple[NDArray[np.int64], list[str]]
    tag: tuple[NDArray[np.int64], list[str]]
    time_ms: NDArray[np.int64]
    lon_deg: NDArray[np.float64]
    lat_deg: NDArray[np.float64]
    error_kind: NDArray[np.int8]
    covariance_m2: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.row)


@dataclass
class ReadOutcome:
    """What a reader found besides accepted rows; filled while its chunks are consumed.

    Attributes
    ----------
    on_rejected : callable
        Called with the faults of each chunk, in row order, before that chunk is yielded.
    rows : int, data rows read so far
    rejected : int, rows (not faults) refused so far
    notes : Counter, code of something worth telling -> number of rows
    unknown_columns : list of str, columns that were not used
    """

    on_rejected: Callable[[list[RejectedRow]], None]
    rows: int = 0
    rejected: int = 0
    notes: Counter[str] = field(default_factory=Counter)
    unknown_columns: list[str] = field(default_factory=list)

    def note_texts(self) -> list[str]:
        """Notes as sentences, for the receipt."""
        return [f"{NOTES[code]} Rows: {count}." for code, count in sorted(self.notes.items())]
