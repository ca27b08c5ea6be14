"""Series: the fixes of one tag of one animal, and the times known of them during a submission."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from sqlalchemy import delete, insert, select

from service.store import driver, schema
from service.store.animals import find_animal_keys, make_animal
from service.store.database import WriteTransaction

SeriesName = tuple[str, str]
"""Identifier of an animal and name of a tag, ``""`` for none."""


@dataclass
class Series:
    """Fixes of one tag of one animal.

    Attributes
    ----------
    animal_id, tag_id : int
    first_ms, last_ms : int or None, earliest and latest time stored or sent so far, None without any
    """

    animal_id: int
    tag_id: int
    first_ms: int | None
    last_ms: int | None

    def reaches_beyond(self, time_ms: NDArray[np.int64]) -> bool:
        """Whether sorted times are all new and different, wholly before or after those known; they are known then."""
        first, last = int(time_ms[0]), int(time_ms[-1])
        beyond = self.first_ms is None or self.last_ms is None or last < self.first_ms or first > self.last_ms
        self.first_ms = first if self.first_ms is None else min(self.first_ms, first)
        self.last_ms = last if self.last_ms is None else max(self.last_ms, last)
        return beyond and bool(np.all(np.diff(time_ms) > 0))


class SeriesBook:
    """Series met in one submission; animals and tags that are not known yet are made."""

    def __init__(self, tx: WriteTransaction, programme_id: int) -> None:
        self._tx, self._programme_id = tx, programme_id
        self._series: dict[SeriesName, Series] = {}
        self._animals: dict[str, int] = {}
        self._made: set[int] = set()

    def series(self, names: list[SeriesName]) -> dict[SeriesName, Series]:
        """Series by name."""
        missing = [name for name in names if name not in self._series]
        self._find_animals(sorted({animal for animal, _ in missing} - self._animals.keys()))
        for animal, tag in missing:
            self._series[animal, tag] = self._open(self._animals[animal], tag)
        return self._series

    def animal_ids(self) -> set[int]:
        """Keys of the animals met."""
        return set(self._animals.values())

    def drop_animals_without_fixes(self, added: Counter[int]) -> None:
        """Take back animals that were made for rows which then turned out to contradict each other."""
        for name, animal_id in list(self._animals.items()):
            if animal_id in self._made and added[animal_id] == 0:
                self._tx.connection.execute(delete(schema.tag).where(schema.tag.c.animal_id == animal_id))
                self._tx.connection.execute(delete(schema.animal).where(schema.animal.c.id == animal_id))
                del self._animals[name]

    def count_fixes(self, changed: set[int], added: Counter[int]) -> None:
        """Bring number, first and last time of the fixes of animals up to date."""
        last = "(SELECT max(fix.time_ms) FROM fix WHERE fix.animal_id = tag.animal_id AND fix.tag_id = tag.id)"
        first = last.replace("max(", "min(")
        for animal_id in sorted(changed & self.animal_ids()):
            self._tx.connection.exec_driver_sql(
                "UPDATE animal SET fixes = fixes + ?, "
                f"first_fix_ms = (SELECT min({first}) FROM tag WHERE tag.animal_id = animal.id), "
                f"last_fix_ms = (SELECT max({last}) FROM tag WHERE tag.animal_id = animal.id) WHERE id = ?",
                (added[animal_id], animal_id),
            )

    def _find_animals(self, identifiers: list[str]) -> None:
        known = find_animal_keys(self._tx.connection, self._programme_id, identifiers)
        for identifier in identifiers:
            if identifier not in known:
                known[identifier] = make_animal(self._tx, self._programme_id, identifier)
                self._made.add(known[identifier])
        self._animals |= known

    def _open(self, animal_id: int, tag: str) -> Series:
        connection, table = self._tx.connection, schema.tag
        known = select(table.c.id).where(table.c.animal_id == animal_id, table.c.name == tag)
        tag_id = connection.execute(known).scalar_one_or_none()
        if tag_id is None:
            made = connection.execute(insert(table).values(animal_id=animal_id, name=tag)).inserted_primary_key
            assert made is not None
            return Series(animal_id, int(made[0]), None, None)
        of_series = "FROM fix WHERE animal_id = ? AND tag_id = ?"
        [(first_ms, last_ms)] = driver.fetch_rows(
            connection,
            f"SELECT (SELECT min(time_ms) {of_series}), (SELECT max(time_ms) {of_series})",
            (animal_id, tag_id, animal_id, tag_id),
        )
        return Series(animal_id, tag_id, first_ms, last_ms)
