"""Fixes: recorded chunk by chunk, read animal by animal."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import repeat
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray
from sqlalchemy import Connection

from estimators import ERROR_KINDS
from service.readers.fix_rows import FixChunk, RejectedRow
from service.store import driver, schema
from service.store.animals import raise_revisions
from service.store.contradictions import CheckedRows, FixKey, FixValue
from service.store.database import WriteTransaction
from service.store.series import Series, SeriesBook

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

COLUMNS: Final = (
    *("animal_id", "tag_id", "time_ms", "commit_no", "row_no"),
    *("lon_deg", "lat_deg", "error_kind", "xx", "xy", "yy"),
)
_KIND_NAMES: Final = (*ERROR_KINDS, None)


@dataclass(frozen=True)
class FixColumns:
    """Current fixes of one animal by tag and time.

    Attributes
    ----------
    tag : ndarray of int64, shape (n,), index into ``tag_names``
    tag_names : tuple of str, ``""`` is a fix without a tag
    time_ms : ndarray of int64, shape (n,), milliseconds since 1970-01-01 UTC
    lon_deg, lat_deg : ndarray, shape (n,), degrees
    covariance_m2 : ndarray, shape (n, 3), [east variance, covariance, north variance]; NaN where none was stated
    """

    tag: IntArray
    tag_names: tuple[str, ...]
    time_ms: IntArray
    lon_deg: FloatArray
    lat_deg: FloatArray
    covariance_m2: FloatArray


def read_fixes(connection: Connection, animal_id: int) -> FixColumns:
    """Current fixes of an animal by its key."""
    rows = driver.fetch_rows(
        connection,
        "SELECT tag_id, time_ms, lon_deg, lat_deg, xx, xy, yy FROM fix WHERE animal_id = ? "
        "ORDER BY tag_id, time_ms, commit_no",
        (animal_id,),
    )
    names = dict(driver.fetch_rows(connection, "SELECT id, name FROM tag WHERE animal_id = ?", (animal_id,)))
    columns = list(zip(*rows, strict=True)) if rows else [()] * 7
    tag_id, time_ms = (np.array(column, dtype=np.int64) for column in columns[:2])
    # Of several values of one fix the last one stands: it has the highest commit number.
    current = np.ones(len(tag_id), dtype=bool)
    current[:-1] = (tag_id[1:] != tag_id[:-1]) | (time_ms[1:] != time_ms[:-1])
    lon_deg, lat_deg, *covariance = (np.array(column, dtype=np.float64)[current] for column in columns[2:])
    known, tag = np.unique(tag_id[current], return_inverse=True)
    return FixColumns(
        tag.astype(np.int64),
        tuple(str(names[int(key)]) for key in known),
        time_ms[current],
        lon_deg,
        lat_deg,
        np.stack(covariance, axis=-1),
    )


class FixRecorder:
    """Records the fixes of one submission.

    Rows of a tag that reach beyond all times known of it are inserted as they are; only the others are compared
    with what is stored.

    Parameters
    ----------
    tx : WriteTransaction
    programme_id : int

    Attributes
    ----------
    new, corrected, unchanged, contradicting : int, rows so far
    """

    def __init__(self, tx: WriteTransaction, programme_id: int) -> None:
        self.new = self.corrected = self.unchanged = self.contradicting = 0
        self._tx = tx
        self._book = SeriesBook(tx, programme_id)
        self._checked: CheckedRows | None = None
        self._changed: set[int] = set()
        self._added: Counter[int] = Counter()

    def add(self, chunk: FixChunk) -> list[RejectedRow]:
        """Record a chunk.

        Returns
        -------
        list of RejectedRow
            Rows of this and of earlier chunks that contradict each other; none of them is stored.
        """
        if not len(chunk):
            return []
        order, groups = self._grouped(chunk)
        animal_id, tag_id = np.empty(len(order), np.int64), np.empty(len(order), np.int64)
        plain = np.zeros(len(order), dtype=bool)
        for first, last, series in groups:
            animal_id[first:last], tag_id[first:last] = series.animal_id, series.tag_id
            plain[first:last] = series.reaches_beyond(chunk.time_ms[order[first:last]])
            if plain[first]:
                self._added[series.animal_id] += last - first
                self._changed.add(series.animal_id)
        self._insert_plain(chunk, order[plain], animal_id[plain], tag_id[plain])
        if plain.all():
            return []
        return self._add_checked(chunk, order[~plain], animal_id[~plain], tag_id[~plain])

    def finish(self) -> None:
        """Raise the revisions of the animals that changed, and bring their counts up to date."""
        self._book.drop_animals_without_fixes(self._added)
        raise_revisions(self._tx, self._changed & self._book.animal_ids())
        self._book.count_fixes(self._changed, self._added)

    def _grouped(self, chunk: FixChunk) -> tuple[IntArray, list[tuple[int, int, Series]]]:
        """Rows by series and time: their order, and the places [first, last) of each series in it."""
        animal, tag = chunk.animal[0], chunk.tag[0]
        pair = animal * len(chunk.tag[1]) + tag
        order = np.lexsort((chunk.row, chunk.time_ms, pair))
        first = np.nonzero(np.diff(pair[order], prepend=-1))[0]
        names = [(chunk.animal[1][animal[row]], chunk.tag[1][tag[row]]) for row in order[first]]
        series = self._book.series(names)
        last = np.append(first[1:], len(order))
        return order, [(int(a), int(b), series[name]) for a, b, name in zip(first, last, names, strict=True)]

    def _insert_plain(self, chunk: FixChunk, rows: IntArray, animal_id: IntArray, tag_id: IntArray) -> None:
        columns = (animal_id.tolist(), tag_id.tolist(), chunk.time_ms[rows].tolist(), repeat(self._tx.commit_no))
        values = zip(*columns, chunk.row[rows].tolist(), *_value_columns(chunk, rows), strict=False)
        driver.insert_rows(self._tx.connection, schema.fix, COLUMNS, values)
        self.new += len(rows)

    def _add_checked(self, chunk: FixChunk, rows: IntArray, animal_id: IntArray, tag_id: IntArray) -> list[RejectedRow]:
        keys: Iterator[FixKey] = zip(animal_id.tolist(), tag_id.tolist(), chunk.time_ms[rows].tolist(), strict=True)
        values: Iterator[FixValue] = zip(*_value_columns(chunk, rows), strict=False)
        names = [(chunk.animal[1][chunk.animal[0][row]], chunk.tag[1][chunk.tag[0][row]]) for row in rows]
        # Most submissions only go on from what is stored and never need its tables.
        self._checked = self._checked or CheckedRows(self._tx)
        outcome = self._checked.add(list(keys), chunk.row[rows].tolist(), list(values), names)
        self.new += outcome.new
        self.corrected += outcome.corrected
        self.unchanged += outcome.unchanged
        self.contradicting += len(outcome.rejected)
        self._added.update(outcome.added)
        self._changed.update(outcome.changed)
        return outcome.rejected


def _value_columns(chunk: FixChunk, rows: IntArray) -> list[Any]:
    """Columns lon_deg, lat_deg, error_kind, xx, xy, yy of rows, None where no error was stated."""
    kinds = chunk.error_kind[rows]
    columns: list[Any] = [chunk.lon_deg[rows].tolist(), chunk.lat_deg[rows].tolist()]
    if np.all(kinds < 0):
        return [*columns, *(repeat(None) for _ in range(4))]
    columns.append(list(map(_KIND_NAMES.__getitem__, kinds.tolist())))
    covariance = chunk.covariance_m2[rows]
    if np.any(kinds < 0):
        covariance = covariance.astype(object)
        covariance[kinds < 0] = None
    return [*columns, *(column.tolist() for column in covariance.T)]
