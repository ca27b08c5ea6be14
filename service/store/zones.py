"""Zones and their versions: when each is in force, and what superseded what."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Row, Select, func, insert, select, update

from estimators import local_date_ms
from service.readers.zones_geojson import ReadZone
from service.store import schema
from service.store.database import WriteTransaction, last_commit_no
from service.store.programmes import ProgrammeRecord, get_programme
from service.store.zone_history import ZoneHistory, ZoneTimes

_ALWAYS_MS = -(2**62)


@dataclass(frozen=True)
class ZoneVersionRecord:
    """A zone version as stored.

    Attributes
    ----------
    zone : str, identifier
    version : int, counted from 1 per zone
    name, in_force_from, in_force_until, season : str or None, as sent
    from_ms, until_ms : int or None
        When it is in force, half-open, milliseconds since 1970-01-01 UTC, None is open. A later version ends it.
    edges : {"straight", "geodesic"}
    geometry : dict, GeoJSON as understood
    notes : list of str
    commit_no : int, transaction that stored it
    revision : int, commit number of the last change of the zone
    key : int, key inside the store
    """

    zone: str
    version: int
    name: str | None
    in_force_from: str | None
    in_force_until: str | None
    from_ms: int | None
    until_ms: int | None
    season: str | None
    edges: str
    geometry: dict[str, Any]
    notes: list[str]
    commit_no: int
    revision: int
    key: int


class ZoneOverlap(Exception):  # noqa: N818 - it is no fault of the program
    """A version would be in force at the same time as one that begins later; the message names it."""


def get_zone(connection: Connection, programme: str, identifier: str) -> list[ZoneVersionRecord]:
    """Live versions of a zone in the order of their time in force; empty where there is no such zone."""
    owner = get_programme(connection, programme)
    query = _live(owner).where(schema.zone.c.identifier == identifier)
    records = _records(connection, query, ZoneHistory(connection, owner, identifier))
    return sorted(records, key=lambda record: _ALWAYS_MS if record.from_ms is None else record.from_ms)


def list_zone_versions(
    connection: Connection, programme: str, after: tuple[str, int], limit: int
) -> list[ZoneVersionRecord]:
    """Live versions of all zones by identifier and version, those after ``("", 0)`` or the last of a page."""
    owner = get_programme(connection, programme)
    zone, version = schema.zone.c.identifier, schema.zone_version.c.version
    later = (zone > after[0]) | ((zone == after[0]) & (version > after[1]))
    query = _live(owner).where(later).order_by(zone, version).limit(limit)
    return _records(connection, query, ZoneHistory(connection, owner))


def put_zone(tx: WriteTransaction, programme: str, new: ReadZone) -> tuple[ZoneVersionRecord, bool]:
    """Store a zone version; with the ``in_force_from`` of a live one it supersedes that.

    It is kept as sent, to be computed with, and as understood, to be shown.

    Returns
    -------
    (ZoneVersionRecord, bool)
        The live version of that ``in_force_from``, and whether anything changed.

    Raises
    ------
    ZoneOverlap
        It would overlap a version that begins later.
    """
    owner = get_programme(tx.connection, programme)
    live = get_zone(tx.connection, programme, new.identifier)
    begins_ms = _instant(new.in_force_from, owner)
    same = next((record for record in live if record.from_ms == begins_ms), None)
    if same is None:
        _check_ends_before_later(live, new, owner)
    elif _says_the_same(tx.connection, same, new):
        return same, False
    else:
        _end(tx, [same.key])
    _insert(tx, owner, new)
    _raise_zones_revision(tx, owner)
    stored = get_zone(tx.connection, programme, new.identifier)
    return next(record for record in stored if record.from_ms == begins_ms), True


def retire_zone(tx: WriteTransaction, programme: str, identifier: str) -> bool:
    """End all live versions of a zone; False where it has none."""
    live = get_zone(tx.connection, programme, identifier)
    if not live:
        return False
    owner = get_programme(tx.connection, programme)
    _end(tx, [record.key for record in live])
    tx.connection.execute(
        update(schema.zone)
        .where(schema.zone.c.programme_id == owner.id, schema.zone.c.identifier == identifier)
        .values(revision=tx.commit_no)
    )
    _raise_zones_revision(tx, owner)
    return True


def _live(owner: ProgrammeRecord) -> Select[Any]:
    table = schema.zone_version
    return (
        select(schema.zone.c.identifier, schema.zone.c.revision, table)
        .join_from(schema.zone, table, table.c.zone_id == schema.zone.c.id)
        .where(schema.zone.c.programme_id == owner.id, table.c.ended_commit_no.is_(None))
    )


def _records(connection: Connection, query: Select[Any], history: ZoneHistory) -> list[ZoneVersionRecord]:
    times = {version.key: version for version in history.at(last_commit_no(connection))}
    return [_record(row, times[row.id]) for row in connection.execute(query)]


def _record(row: Row[Any], times: ZoneTimes) -> ZoneVersionRecord:
    return ZoneVersionRecord(
        row.identifier,
        row.version,
        row.name,
        row.in_force_from,
        row.in_force_until,
        times.from_ms,
        times.until_ms,
        row.season,
        row.edges,
        json.loads(row.geometry),
        json.loads(row.notes),
        row.commit_no,
        row.revision,
        row.id,
    )


def _instant(text: str | None, owner: ProgrammeRecord) -> int | None:
    return None if text is None else local_date_ms(text, owner.time_zone)


def _check_ends_before_later(live: list[ZoneVersionRecord], new: ReadZone, owner: ProgrammeRecord) -> None:
    begins_ms, until_ms = _instant(new.in_force_from, owner), _instant(new.in_force_until, owner)
    for record in live:
        later = record.from_ms is not None and (begins_ms is None or record.from_ms > begins_ms)
        if later and (until_ms is None or until_ms > (record.from_ms or 0)):
            raise ZoneOverlap(
                f"Zone {new.identifier!r}: the version from {new.in_force_from or 'ever'} until "
                f"{new.in_force_until or 'open'} overlaps version {record.version}, in force from "
                f"{record.in_force_from}. End it there with in_force_until, or send it with the same in_force_from "
                "to correct that version."
            )


def _says_the_same(connection: Connection, stored: ZoneVersionRecord, new: ReadZone) -> bool:
    sent = connection.execute(
        select(schema.zone_version.c.geometry_sent).where(schema.zone_version.c.id == stored.key)
    ).scalar_one()
    fields = ("name", "in_force_from", "in_force_until", "season", "edges")
    return json.loads(sent) == new.geometry_sent and all(
        getattr(stored, field) == getattr(new, field) for field in fields
    )


def _end(tx: WriteTransaction, keys: list[int]) -> None:
    table = schema.zone_version
    tx.connection.execute(update(table).where(table.c.id.in_(keys)).values(ended_commit_no=tx.commit_no))


def _insert(tx: WriteTransaction, owner: ProgrammeRecord, new: ReadZone) -> None:
    zone, table, connection = schema.zone, schema.zone_version, tx.connection
    known = (zone.c.programme_id == owner.id) & (zone.c.identifier == new.identifier)
    changed = connection.execute(update(zone).where(known).values(revision=tx.commit_no))
    if changed.rowcount == 0:
        values = {"programme_id": owner.id, "identifier": new.identifier, "revision": tx.commit_no}
        connection.execute(insert(zone).values(values))
    zone_id = connection.execute(select(zone.c.id).where(known)).scalar_one()
    last = connection.execute(select(func.max(table.c.version)).where(table.c.zone_id == zone_id)).scalar_one()
    connection.execute(
        insert(table).values(
            zone_id=zone_id,
            version=(last or 0) + 1,
            name=new.name,
            in_force_from=new.in_force_from,
            in_force_until=new.in_force_until,
            season=new.season,
            edges=new.edges,
            geometry_sent=json.dumps(new.geometry_sent, allow_nan=False),
            geometry=json.dumps(new.shape.to_geojson(), allow_nan=False),
            notes=json.dumps(list(new.shape.notes)),
            commit_no=tx.commit_no,
        )
    )


def _raise_zones_revision(tx: WriteTransaction, owner: ProgrammeRecord) -> None:
    table = schema.programme
    tx.connection.execute(update(table).where(table.c.id == owner.id).values(zones_revision=tx.commit_no))
