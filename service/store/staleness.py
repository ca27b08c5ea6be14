"""Which animals are not published as they are stored, and which computations failed."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Any

from sqlalchemy import ColumnElement, Connection, and_, case, delete, func, insert, or_, select

from estimators import ESTIMATES_VERSION
from service.store import schema
from service.store.database import WriteTransaction

FIRST_RETRY_S = 5
LONGEST_RETRY_S = 86_400
FAILURES_SHOWN = 1000


@dataclass(frozen=True)
class StaleAnimal:
    """An animal that is to be computed: its key, its identifier, and its programme's name."""

    animal_id: int
    identifier: str
    programme: str


def is_stale() -> ColumnElement[bool]:
    """Condition on animal and programme: something was stored after the snapshot that is published."""
    animal, programme = schema.animal.c, schema.programme.c
    return or_(
        animal.revision > animal.published_commit_no,
        programme.zones_revision > animal.published_commit_no,
        programme.settings_revision > animal.published_commit_no,
        animal.published_estimates_version != ESTIMATES_VERSION,
    )


def stale_animals(connection: Connection, now_ms: int, limit: int) -> list[StaleAnimal]:
    """Animals to compute now, those that have waited longest first.

    A failed one waits for its next try, unless its input or the version of the estimates changed since.
    """
    animal, programme, failure = schema.animal, schema.programme, schema.computation_failure
    waits = and_(
        failure.c.animal_id.is_not(None),
        failure.c.retry_at_ms > now_ms,
        failure.c.estimates_version == ESTIMATES_VERSION,
        failure.c.snapshot_commit_no >= animal.c.revision,
        failure.c.snapshot_commit_no >= programme.c.zones_revision,
        failure.c.snapshot_commit_no >= programme.c.settings_revision,
    )
    joined = animal.join(programme, programme.c.id == animal.c.programme_id).outerjoin(
        failure, failure.c.animal_id == animal.c.id
    )
    query = (
        select(animal.c.id, animal.c.identifier, programme.c.name)
        .select_from(joined)
        .where(is_stale(), ~waits)
        .order_by(_stale_since(), animal.c.id)
        .limit(limit)
    )
    return [StaleAnimal(*row) for row in connection.execute(query)]


def status(connection: Connection) -> dict[str, Any]:
    """How far the published rows are behind.

    Returns
    -------
    dict
        current (bool), animals, pending (int), oldest_stale_s (float or None), failed (list of dicts with animal,
        programme, code, message, attempts, failed_at_ms, retry_at_ms).
    """
    animal, programme, commit = schema.animal, schema.programme, schema.store_commit
    joined = animal.join(programme, programme.c.id == animal.c.programme_id)
    pending, since = connection.execute(
        select(func.count(), func.min(_stale_since())).select_from(joined).where(is_stale())
    ).one()
    animals = connection.execute(select(func.count()).select_from(animal)).scalar_one()
    oldest_stale_s = None
    if pending:
        at_ms = connection.execute(select(func.min(commit.c.at_ms)).where(commit.c.commit_no >= since)).scalar_one()
        oldest_stale_s = max(0.0, round(time.time() - at_ms / 1000, 3))
    return {
        "current": pending == 0,
        "animals": animals,
        "pending": pending,
        "oldest_stale_s": oldest_stale_s,
        "failed": _failures(connection),
    }


def record_failure(tx: WriteTransaction, animal_id: int, snapshot_commit_no: int, code: str, message: str) -> None:
    """Note that an animal could not be computed; the time to the next try doubles with every failure in a row."""
    table = schema.computation_failure
    known = table.c.animal_id == animal_id
    attempts = (tx.connection.execute(select(table.c.attempts).where(known)).scalar_one_or_none() or 0) + 1
    wait_s = min(FIRST_RETRY_S * 2 ** min(attempts - 1, 30), LONGEST_RETRY_S)
    tx.connection.execute(delete(table).where(known))
    tx.connection.execute(
        insert(table).values(
            animal_id=animal_id,
            snapshot_commit_no=snapshot_commit_no,
            estimates_version=ESTIMATES_VERSION,
            code=code,
            message=message,
            attempts=attempts,
            failed_at_ms=tx.now_ms,
            retry_at_ms=tx.now_ms + 1000 * wait_s,
        )
    )


def _stale_since() -> ColumnElement[int]:
    """Commit that a stale animal has been waiting since."""
    animal, programme = schema.animal.c, schema.programme.c
    published, far = animal.published_commit_no, 2**62
    changes = [
        case((animal.revision > published, animal.stale_from), else_=far),
        case((programme.zones_revision > published, programme.zones_revision), else_=far),
        case((programme.settings_revision > published, programme.settings_revision), else_=far),
        case((animal.published_estimates_version != ESTIMATES_VERSION, published), else_=far),
    ]
    earliest = changes[0]
    for change in changes[1:]:
        earliest = case((change < earliest, change), else_=earliest)
    return earliest


def _failures(connection: Connection) -> list[dict[str, Any]]:
    failure, animal, programme = schema.computation_failure, schema.animal, schema.programme
    columns = (failure.c.code, failure.c.message, failure.c.attempts, failure.c.failed_at_ms, failure.c.retry_at_ms)
    query = (
        select(animal.c.identifier.label("animal"), programme.c.name.label("programme"), *columns)
        .join_from(failure, animal, animal.c.id == failure.c.animal_id)
        .join(programme, programme.c.id == animal.c.programme_id)
        .order_by(animal.c.identifier)
        .limit(FAILURES_SHOWN)
    )
    return [dict(row._mapping) for row in connection.execute(query)]
