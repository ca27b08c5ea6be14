"""Publications: the computed rows of one animal, put in place of the earlier ones in one transaction."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Table, bindparam, case, delete, insert, select, update

from estimators import ESTIMATES_VERSION, MonthFacts, ZoneMonth
from service.store import driver, schema
from service.store.database import WriteTransaction

_MONTH_KEY = ("month",)
_MONTH_VALUES = (
    "estimator",
    "tracked_from_ms",
    "fixes",
    "tracked_hours",
    "covered_hours",
    "longest_gap_hours",
    "flags",
)
_USE_KEY = ("month", "zone_version_id")
_USE_VALUES = (
    *("fixes", "in_force_hours", "tracked_hours", "covered_hours", "longest_gap_hours", "probability_mass"),
    *("numerical_error", "time_fraction", "inside_hours", "visits"),
)
_Rows = dict[tuple[Any, ...], tuple[Any, ...]]


@dataclass(frozen=True)
class ComputedAnimal:
    """Rows of one animal, ready to be published.

    Attributes
    ----------
    animal_id : int
    snapshot_commit_no : int, state of the store that they were computed from
    estimator : str
    parameters : dict, the fit
    months : sequence of MonthFacts
    rows : sequence of ZoneMonth
    zone_keys : sequence of int, key of the zone version of each ``zone_index``
    track_digest, digest : str
    """

    animal_id: int
    snapshot_commit_no: int
    estimator: str
    parameters: dict[str, Any]
    months: Sequence[MonthFacts]
    rows: Sequence[ZoneMonth]
    zone_keys: Sequence[int]
    track_digest: str
    digest: str


def publish(tx: WriteTransaction, computed: ComputedAnimal) -> bool:
    """Put rows in place; rows that did not change keep their version.

    Returns
    -------
    bool
        False where rows of a later state of the store are published already: nothing is done then.
    """
    published = tx.connection.execute(
        select(
            schema.animal.c.published_commit_no,
            schema.animal.c.published_estimates_version,
            schema.animal.c.publication_id,
            schema.publication.c.digest,
        )
        .outerjoin(schema.publication, schema.publication.c.id == schema.animal.c.publication_id)
        .where(schema.animal.c.id == computed.animal_id)
    ).one()
    later = computed.snapshot_commit_no > published.published_commit_no
    if not later and published.published_estimates_version == ESTIMATES_VERSION:
        return False
    publication_id = published.publication_id
    same_version = published.published_estimates_version == ESTIMATES_VERSION
    if not (same_version and published.digest == computed.digest):
        publication_id = _insert_publication(tx, computed)
        _replace(tx.connection, schema.animal_month, computed.animal_id, publication_id, _month_rows(computed))
        _replace(tx.connection, schema.zone_use, computed.animal_id, publication_id, _use_rows(computed))
    _mark_published(tx, computed, publication_id)
    return True


def _insert_publication(tx: WriteTransaction, computed: ComputedAnimal) -> int:
    made = tx.connection.execute(
        insert(schema.publication).values(
            animal_id=computed.animal_id,
            snapshot_commit_no=computed.snapshot_commit_no,
            estimates_version=ESTIMATES_VERSION,
            published_at_ms=tx.now_ms,
            estimator=computed.estimator,
            parameters=json.dumps(computed.parameters, sort_keys=True, allow_nan=False),
            track_digest=computed.track_digest,
            digest=computed.digest,
        )
    )
    assert made.inserted_primary_key is not None
    return int(made.inserted_primary_key[0])


def _mark_published(tx: WriteTransaction, computed: ComputedAnimal, publication_id: int) -> None:
    table, snapshot = schema.animal, computed.snapshot_commit_no
    # A result that was overtaken is published all the same; what came after it waits from then on.
    waits_from = case((table.c.revision > snapshot, snapshot + 1), else_=table.c.stale_from)
    tx.connection.execute(
        update(table)
        .where(table.c.id == computed.animal_id)
        .values(
            published_commit_no=snapshot,
            published_estimates_version=ESTIMATES_VERSION,
            publication_id=publication_id,
            stale_from=waits_from,
        )
    )
    failure = schema.computation_failure
    tx.connection.execute(delete(failure).where(failure.c.animal_id == computed.animal_id))


def _month_rows(computed: ComputedAnimal) -> _Rows:
    return {
        (facts.month,): (
            computed.estimator,
            facts.tracked_from_ms,
            facts.fixes,
            facts.tracked_hours,
            facts.covered_hours,
            facts.longest_gap_hours,
            json.dumps(sorted(facts.flags)),
        )
        for facts in computed.months
    }


def _use_rows(computed: ComputedAnimal) -> _Rows:
    return {
        (row.month, computed.zone_keys[row.zone_index]): tuple(getattr(row, name) for name in _USE_VALUES)
        for row in computed.rows
    }


def _replace(connection: Connection, table: Table, animal_id: int, publication_id: int, new: _Rows) -> None:
    """Close the live rows that changed or are gone, and insert what is new."""
    key, values = (_MONTH_KEY, _MONTH_VALUES) if table is schema.animal_month else (_USE_KEY, _USE_VALUES)
    live = (table.c.animal_id == animal_id) & table.c.until_publication.is_(None)
    query = select(*(table.c[name] for name in (*key, *values))).where(live)
    old = {tuple(row[: len(key)]): tuple(row[len(key) :]) for row in connection.execute(query)}
    closed = [
        dict(zip([f"key_{name}" for name in key], place, strict=True)) for place in old if old[place] != new.get(place)
    ]
    if closed:
        matches = [table.c[name] == bindparam(f"key_{name}") for name in key]
        connection.execute(update(table).where(live, *matches).values(until_publication=publication_id), closed)
    driver.insert_rows(
        connection,
        table,
        ("animal_id", "from_publication", *key, *values),
        [(animal_id, publication_id, *place, *row) for place, row in new.items() if old.get(place) != row],
    )
