"""Reading zone use: stored rows, and the zeros that were left out of the store."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import ColumnElement, Connection, Row, exists, select

from estimators import MonthFacts, ZoneMonth
from service.store import schema
from service.store.programmes import ProgrammeRecord, get_programme
from service.store.staleness import is_stale
from service.store.zone_history import ZoneHistory, ZoneTimes

Place = tuple[str, str, str, int]
"""Place of a row in the order of animal, month, zone, version."""

_FEWEST_MONTHS = 20
_MOST_MONTHS = 500
_FIGURES = (
    *("fixes", "in_force_hours", "tracked_hours", "covered_hours", "longest_gap_hours", "probability_mass"),
    *("numerical_error", "time_fraction", "inside_hours", "visits"),
)


@dataclass(frozen=True)
class ZoneUseFilter:
    """Which rows are wanted; None is all.

    Attributes
    ----------
    animal, zone, group : str or None, identifiers
    month_from, month_to : str or None, ``"2026-03"``, both included
    nonzero : bool, only rows with any use, or without covered time
    """

    animal: str | None = None
    zone: str | None = None
    group: str | None = None
    month_from: str | None = None
    month_to: str | None = None
    nonzero: bool = False


@dataclass(frozen=True)
class StoredRow:
    """Use of one zone version by one animal in one month.

    Attributes
    ----------
    animal, zone : str, identifiers
    zone_version : int
    month : str
    estimator : str
    facts : MonthFacts
    figures : ZoneMonth
    flags : tuple of str, sorted
    """

    animal: str
    zone: str
    zone_version: int
    month: str
    estimator: str
    facts: MonthFacts
    figures: ZoneMonth
    flags: tuple[str, ...]

    @property
    def place(self) -> Place:
        """Where it stands in the order of rows."""
        return self.animal, self.month, self.zone, self.zone_version


def zone_use_page(
    connection: Connection, programme: str, wanted: ZoneUseFilter, after: Place | None, limit: int
) -> list[StoredRow]:
    """Rows in the order of animal, month, zone, version; those after such a place (None for the first page).

    Every animal's rows are those of its latest publication, with the zone versions that it was computed with.
    """
    owner = get_programme(connection, programme)
    history = ZoneHistory(connection, owner, wanted.zone)
    page: list[StoredRow] = []
    at_a_time = limit // max(1, len(history.at(owner.zones_revision))) + 1
    for months in _animal_months(connection, owner, wanted, after, at_a_time):
        stored = _stored_figures(connection, months, wanted)
        for month in months:
            for row in _rows_of_month(month, history, stored, wanted):
                if after is None or row.place > after:
                    page.append(row)
                    if len(page) == limit:
                        return page
    return page


def touched_current(connection: Connection, programme: str, wanted: ZoneUseFilter) -> bool:
    """Whether everything stored that touches the wanted rows is published."""
    owner = get_programme(connection, programme)
    touched = select(schema.animal.c.id).where(
        schema.programme.c.id == owner.id, is_stale(), *_animal_conditions(owner, wanted)
    )
    return connection.execute(touched.limit(1)).first() is None


def _animal_conditions(owner: ProgrammeRecord, wanted: ZoneUseFilter) -> list[ColumnElement[bool]]:
    animal, group = schema.animal, schema.animal_group
    conditions = [animal.c.programme_id == owner.id]
    if wanted.animal is not None:
        conditions.append(animal.c.identifier == wanted.animal)
    if wanted.group is not None:
        conditions.append(exists().where(group.c.animal_id == animal.c.id, group.c.name == wanted.group))
    return conditions


def _animal_months(
    connection: Connection, owner: ProgrammeRecord, wanted: ZoneUseFilter, after: Place | None, at_a_time: int
) -> Iterator[Sequence[Row[Any]]]:
    """Published animal-months in order, some at a time, beginning with that of the place."""
    animal, month = schema.animal, schema.animal_month
    conditions = [*_animal_conditions(owner, wanted), month.c.until_publication.is_(None)]
    if wanted.month_from is not None:
        conditions.append(month.c.month >= wanted.month_from)
    if wanted.month_to is not None:
        conditions.append(month.c.month <= wanted.month_to)
    columns = (animal.c.identifier, animal.c.published_commit_no, month)
    query = select(*columns).join_from(animal, month, month.c.animal_id == animal.c.id).where(*conditions)
    ordered = query.order_by(animal.c.identifier, month.c.month).limit(
        min(max(at_a_time, _FEWEST_MONTHS), _MOST_MONTHS)
    )
    reached = ordered if after is None else ordered.where(_not_before(*after[:2]))
    while rows := connection.execute(reached).all():
        yield rows
        last = rows[-1]
        reached = ordered.where(
            _not_before(last.identifier, last.month),
            (animal.c.identifier > last.identifier) | (month.c.month > last.month),
        )


def _not_before(identifier: str, month: str) -> ColumnElement[bool]:
    animal = schema.animal.c.identifier
    # The plain comparison is what an index can use.
    return (animal >= identifier) & ((animal > identifier) | (schema.animal_month.c.month >= month))


def _stored_figures(
    connection: Connection, months: Sequence[Row[Any]], wanted: ZoneUseFilter
) -> dict[tuple[int, str, int], ZoneMonth]:
    """Stored rows of animal-months by animal key, month and zone-version key."""
    use = schema.zone_use
    query = select(use.c.animal_id, use.c.month, use.c.zone_version_id, *(use.c[name] for name in _FIGURES)).where(
        use.c.animal_id.in_({row.animal_id for row in months}),
        use.c.month >= min(row.month for row in months),
        use.c.month <= max(row.month for row in months),
        use.c.until_publication.is_(None),
    )
    if wanted.zone is not None:
        version, zone = schema.zone_version, schema.zone
        of_zone = select(version.c.id).join_from(version, zone, zone.c.id == version.c.zone_id)
        query = query.where(use.c.zone_version_id.in_(of_zone.where(zone.c.identifier == wanted.zone)))
    return {tuple(row[:3]): ZoneMonth(0, row[1], *row[3:]) for row in connection.execute(query)}


def _rows_of_month(
    month: Row[Any],
    history: ZoneHistory,
    stored: dict[tuple[int, str, int], ZoneMonth],
    wanted: ZoneUseFilter,
) -> Iterator[StoredRow]:
    facts = MonthFacts(
        month.month,
        month.tracked_from_ms,
        month.fixes,
        month.tracked_hours,
        month.covered_hours,
        month.longest_gap_hours,
        tuple(json.loads(month.flags)),
    )
    in_force = history.in_force(month.published_commit_no, month.tracked_from_ms)
    outside = facts.outside_row(0)
    for version in history.at(month.published_commit_no):
        figures = stored.get((month.animal_id, month.month, version.key))
        if figures is None and version.key in in_force:
            figures = outside
        if figures is not None and not (wanted.nonzero and _is_zero(figures)):
            yield _row(month, version, facts, figures)


def _row(month: Row[Any], version: ZoneTimes, facts: MonthFacts, figures: ZoneMonth) -> StoredRow:
    return StoredRow(
        month.identifier, version.zone, version.version, month.month, month.estimator, facts, figures, facts.flags
    )


def _is_zero(figures: ZoneMonth) -> bool:
    # Without covered time both are None: nobody knows, and that is no zero.
    return figures.probability_mass == 0.0 and figures.time_fraction == 0.0
