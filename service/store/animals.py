"""Animals: identifiers, attributes with their history, and revisions."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, Final

from sqlalchemy import Connection, Row, Select, case, delete, func, insert, select, update

from service.store import schema
from service.store.database import WriteTransaction
from service.store.programmes import get_programme

NO_ATTRIBUTES: Final[Mapping[str, Any]] = MappingProxyType(
    {
        "species": None,
        "sex": None,
        "life_stage": None,
        "groups": [],
        "deployments": [],
        "longest_bridged_gap_hours": None,
        "post_release_window_hours": None,
        "default_error_sd_m": None,
        "estimator": None,
    }
)
"""Attributes of an animal of which only fixes are known."""

_KEYS_AT_A_TIME = 500


@dataclass(frozen=True)
class AnimalRecord:
    """An animal as stored.

    Attributes
    ----------
    identifier : str
    revision : int, commit number of its last change
    attributes : dict
    fixes : int, current fixes
    first_fix_ms, last_fix_ms : int or None, milliseconds since 1970-01-01 UTC
    """

    identifier: str
    revision: int
    attributes: dict[str, Any]
    fixes: int
    first_fix_ms: int | None
    last_fix_ms: int | None


def get_animal(connection: Connection, programme: str, identifier: str) -> AnimalRecord | None:
    """An animal, or None where there is none of that identifier."""
    query = _animals(connection, programme).where(schema.animal.c.identifier == identifier)
    row = connection.execute(query).one_or_none()
    return None if row is None else _record(row)


def list_animals(connection: Connection, programme: str, after: str, limit: int) -> list[AnimalRecord]:
    """Animals in the order of their identifiers, those after one identifier (``""`` for the first page)."""
    query = _animals(connection, programme).where(schema.animal.c.identifier > after)
    return [_record(row) for row in connection.execute(query.order_by(schema.animal.c.identifier).limit(limit))]


def group_exists(connection: Connection, programme: str, group: str) -> bool:
    """Whether any animal of a programme is in a group of that name."""
    table = schema.animal_group
    query = (
        select(table.c.name)
        .join_from(table, schema.animal, schema.animal.c.id == table.c.animal_id)
        .join(schema.programme, schema.programme.c.id == schema.animal.c.programme_id)
        .where(schema.programme.c.name == programme, table.c.name == group)
    )
    return connection.execute(query.limit(1)).first() is not None


def put_animal(tx: WriteTransaction, programme: str, identifier: str, attributes: Mapping[str, Any]) -> bool:
    """Make an animal or replace its attributes; False where they are what is stored already."""
    stored = get_animal(tx.connection, programme, identifier)
    if stored is not None and stored.attributes == {**NO_ATTRIBUTES, **attributes}:
        return False
    owner = get_programme(tx.connection, programme)
    known = find_animal_keys(tx.connection, owner.id, [identifier])
    animal_id = known[identifier] if known else make_animal(tx, owner.id, identifier)
    tx.connection.execute(
        insert(schema.animal_version).values(
            animal_id=animal_id,
            commit_no=tx.commit_no,
            attributes=json.dumps({**NO_ATTRIBUTES, **attributes}, sort_keys=True, allow_nan=False),
        )
    )
    tx.connection.execute(delete(schema.animal_group).where(schema.animal_group.c.animal_id == animal_id))
    for name in sorted(set(attributes.get("groups") or ())):
        tx.connection.execute(insert(schema.animal_group).values(animal_id=animal_id, name=name))
    raise_revisions(tx, [animal_id])
    return True


def current_attributes(connection: Connection, animal_id: int) -> dict[str, Any]:
    """Attributes in force of an animal by its key."""
    text = connection.execute(
        select(schema.animal_version.c.attributes)
        .where(schema.animal_version.c.animal_id == animal_id)
        .order_by(schema.animal_version.c.commit_no.desc())
        .limit(1)
    ).scalar_one_or_none()
    return {**NO_ATTRIBUTES, **(json.loads(text) if text else {})}


def find_animal_keys(connection: Connection, programme_id: int, identifiers: Sequence[str]) -> dict[str, int]:
    """Keys of the animals that are known."""
    keys: dict[str, int] = {}
    table = schema.animal
    for start in range(0, len(identifiers), _KEYS_AT_A_TIME):
        wanted = identifiers[start : start + _KEYS_AT_A_TIME]
        query = select(table.c.identifier, table.c.id).where(
            table.c.programme_id == programme_id, table.c.identifier.in_(wanted)
        )
        keys |= {row.identifier: row.id for row in connection.execute(query)}
    return keys


def raise_revisions(tx: WriteTransaction, animal_ids: Iterable[int]) -> None:
    """Note that animals changed in this transaction."""
    table, ids = schema.animal, sorted(animal_ids)
    first_change = case((table.c.revision <= table.c.published_commit_no, tx.commit_no), else_=table.c.stale_from)
    for start in range(0, len(ids), _KEYS_AT_A_TIME):
        some = table.c.id.in_(ids[start : start + _KEYS_AT_A_TIME])
        tx.connection.execute(update(table).where(some).values(stale_from=first_change, revision=tx.commit_no))


def make_animal(tx: WriteTransaction, programme_id: int, identifier: str) -> int:
    """Key of a new animal."""
    made = tx.connection.execute(
        insert(schema.animal).values(
            programme_id=programme_id,
            identifier=identifier,
            revision=tx.commit_no,
            stale_from=tx.commit_no,
            published_commit_no=0,
            published_estimates_version=0,
            fixes=0,
        )
    )
    assert made.inserted_primary_key is not None
    return int(made.inserted_primary_key[0])


def _animals(connection: Connection, programme: str) -> Select[Any]:
    table, version = schema.animal, schema.animal_version
    latest = (
        select(func.max(version.c.commit_no))
        .where(version.c.animal_id == table.c.id)
        .correlate(table)
        .scalar_subquery()
    )
    joined = table.outerjoin(version, (version.c.animal_id == table.c.id) & (version.c.commit_no == latest))
    columns = (table.c.identifier, table.c.revision, table.c.fixes, table.c.first_fix_ms, table.c.last_fix_ms)
    programme_id = get_programme(connection, programme).id
    return select(*columns, version.c.attributes).select_from(joined).where(table.c.programme_id == programme_id)


def _record(row: Row[Any]) -> AnimalRecord:
    attributes = {**NO_ATTRIBUTES, **(json.loads(row.attributes) if row.attributes else {})}
    return AnimalRecord(row.identifier, row.revision, attributes, row.fixes, row.first_fix_ms, row.last_fix_ms)
