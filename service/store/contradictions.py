"""Rows that may repeat, correct or contradict others: compared with the store and with their own submission."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any

from service.readers.fix_rows import RejectedRow
from service.store import driver, schema
from service.store.database import WriteTransaction
from service.store.series import SeriesName

FixKey = tuple[int, int, int]
"""animal_id, tag_id, time_ms."""
FixValue = tuple[Any, ...]
"""lon_deg, lat_deg, error_kind, xx, xy, yy."""

_KEY_COLUMNS = ("animal_id", "tag_id", "time_ms")
_VALUE_COLUMNS = ("lon_deg", "lat_deg", "error_kind", "xx", "xy", "yy")
_SAME_FIX = "{0}.animal_id = {1}.animal_id AND {0}.tag_id = {1}.tag_id AND {0}.time_ms = {1}.time_ms"


@dataclass
class _Held:
    """What is known of one fix: the value before this submission, and what this submission says."""

    before: FixValue | None = None
    sent: FixValue | None = None
    inserted_row: int | None = None
    repeats: list[int] = field(default_factory=list)
    contradicted: bool = False


@dataclass
class CheckedOutcome:
    """What became of checked rows; negative numbers take back what earlier chunks had counted.

    Attributes
    ----------
    new, corrected, unchanged : int
    rejected : list of RejectedRow
    added : Counter, animal key -> fixes more than before
    changed : set of int, keys of animals with another value than before
    """

    new: int = 0
    corrected: int = 0
    unchanged: int = 0
    rejected: list[RejectedRow] = field(default_factory=list)
    added: Counter[int] = field(default_factory=Counter)
    changed: set[int] = field(default_factory=set)


class CheckedRows:
    """Compares rows with the store and with all earlier rows of the submission, in memory of one chunk.

    Rows that were not inserted are remembered in temporary tables, so that a later contradiction finds them.
    """

    def __init__(self, tx: WriteTransaction) -> None:
        self._tx = tx
        keys = "animal_id BIGINT, tag_id BIGINT, time_ms BIGINT"
        primary = "PRIMARY KEY (animal_id, tag_id, time_ms"
        driver.make_temporary_table(tx.connection, "asked_fix", f"{keys}, {primary})")
        driver.make_temporary_table(tx.connection, "repeated_row", f"{keys}, row_no BIGINT, {primary}, row_no)")
        driver.make_temporary_table(tx.connection, "contradicted_fix", f"{keys}, {primary})")

    def add(
        self, keys: list[FixKey], row_numbers: list[int], values: list[FixValue], names: list[SeriesName]
    ) -> CheckedOutcome:
        """Compare rows, and store those that say something new.

        Parameters
        ----------
        keys, row_numbers, values, names : list, one entry per row
        """
        held = self._look_up(keys)
        earlier = {key: fix.inserted_row for key, fix in held.items()}
        outcome = CheckedOutcome()
        repeated: list[tuple[int, ...]] = []
        newly_contradicted: list[FixKey] = []
        for key, row, value, name in zip(keys, row_numbers, values, names, strict=True):
            fix = held[key]
            if fix.contradicted:
                outcome.rejected.append(_rejected(row, name, key[2]))
            elif fix.sent is not None and value != fix.sent:
                _contradict(key, fix, name, [row], outcome)
                newly_contradicted.append(key)
            elif fix.sent is not None or value == fix.before:
                fix.sent = value
                fix.repeats.append(row)
                repeated.append((*key, row))
                outcome.unchanged += 1
            else:
                _accept(key, fix, row, value, outcome)
        self._write(held, earlier, repeated, newly_contradicted)
        return outcome

    def _look_up(self, keys: list[FixKey]) -> dict[FixKey, _Held]:
        connection = self._tx.connection
        connection.exec_driver_sql("DELETE FROM asked_fix")
        held = {key: _Held() for key in keys}
        driver.insert_rows(connection, "asked_fix", _KEY_COLUMNS, list(held))
        for row in self._joined("fix", ("commit_no", "row_no", *_VALUE_COLUMNS), "fix.commit_no"):
            fix = held[row[:3]]
            if row[3] == self._tx.commit_no:
                fix.sent, fix.inserted_row = row[5:], row[4]
            else:
                fix.before = row[5:]
        for row in self._joined("repeated_row", ("row_no",), "repeated_row.row_no"):
            fix = held[row[:3]]
            fix.repeats.append(row[3])
            fix.sent = fix.before if fix.sent is None else fix.sent
        for row in self._joined("contradicted_fix", (), "contradicted_fix.time_ms"):
            held[row[:3]].contradicted = True
        return held

    def _joined(self, table: str, columns: tuple[str, ...], order: str) -> list[tuple[Any, ...]]:
        wanted = ", ".join(f"{table}.{column}" for column in (*_KEY_COLUMNS, *columns))
        statement = f"SELECT {wanted} FROM asked_fix JOIN {table} ON {_SAME_FIX.format('asked_fix', table)}"
        return driver.fetch_rows(self._tx.connection, f"{statement} ORDER BY {order}", ())

    def _write(
        self,
        held: dict[FixKey, _Held],
        earlier: dict[FixKey, int | None],
        repeated: list[tuple[int, ...]],
        newly_contradicted: list[FixKey],
    ) -> None:
        connection, commit_no = self._tx.connection, self._tx.commit_no
        inserted = [
            (*key, commit_no, fix.inserted_row, *fix.sent)
            for key, fix in held.items()
            if fix.inserted_row is not None and earlier[key] is None and fix.sent is not None
        ]
        columns = (*_KEY_COLUMNS, "commit_no", "row_no", *_VALUE_COLUMNS)
        driver.insert_rows(connection, schema.fix, columns, inserted)
        driver.insert_rows(connection, "repeated_row", (*_KEY_COLUMNS, "row_no"), repeated)
        driver.insert_rows(connection, "contradicted_fix", _KEY_COLUMNS, newly_contradicted)
        for key in newly_contradicted:
            if earlier[key] is not None:
                connection.exec_driver_sql(
                    "DELETE FROM fix WHERE animal_id = ? AND tag_id = ? AND time_ms = ? AND commit_no = ?",
                    (*key, commit_no),
                )


def _accept(key: FixKey, fix: _Held, row: int, value: FixValue, outcome: CheckedOutcome) -> None:
    fix.sent, fix.inserted_row = value, row
    outcome.changed.add(key[0])
    if fix.before is None:
        outcome.new += 1
        outcome.added[key[0]] += 1
    else:
        outcome.corrected += 1


def _contradict(key: FixKey, fix: _Held, name: SeriesName, rows: list[int], outcome: CheckedOutcome) -> None:
    """Reject every row that this submission has sent for the fix, and take back how they were counted."""
    if fix.inserted_row is not None:
        if fix.before is None:
            outcome.new -= 1
            outcome.added[key[0]] -= 1
        else:
            outcome.corrected -= 1
        rows = [fix.inserted_row, *rows]
    outcome.unchanged -= len(fix.repeats)
    outcome.rejected += [_rejected(row, name, key[2]) for row in sorted(rows + fix.repeats)]
    fix.contradicted, fix.inserted_row = True, None


def _rejected(row: int, name: SeriesName, time_ms: int) -> RejectedRow:
    animal, tag = name
    who = f"animal {animal!r}, tag {tag!r}," if tag else f"animal {animal!r}"
    when = datetime.fromtimestamp(time_ms / 1000, UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")
    message = (
        f"Rows of this submission say different things of {who} at {when}. "
        "None of them was taken. Send only the right one."
    )
    return RejectedRow(row, None, "contradicting_rows", message, None)
