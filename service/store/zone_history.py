"""Zone versions as they stood at any commit: what a publication was computed with."""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass, replace
from functools import cache
from typing import Any

from sqlalchemy import Connection, Row, select

from estimators import Season, local_date_ms
from service.store import schema
from service.store.programmes import ProgrammeRecord


@dataclass(frozen=True)
class ZoneTimes:
    """A zone version without its geometry.

    Attributes
    ----------
    key : int, key inside the store
    zone : str, identifier
    version : int
    from_ms, until_ms : int or None
        When it is in force, half-open, milliseconds since 1970-01-01 UTC, None is open.
    season : str or None
    """

    key: int
    zone: str
    version: int
    from_ms: int | None
    until_ms: int | None
    season: str | None

    def in_force_at(self, time_ms: int, time_zone: str) -> bool:
        """Whether the version is in force at an instant."""
        if self.from_ms is not None and time_ms < self.from_ms:
            return False
        if self.until_ms is not None and time_ms >= self.until_ms:
            return False
        return self.season is None or bool(Season.parse(self.season).spans(time_ms, time_ms + 1, time_zone))


class ZoneHistory:
    """All zone versions of a programme, whenever they were live.

    Parameters
    ----------
    connection : Connection
    owner : ProgrammeRecord
    zone : str or None, identifier of the only zone that is wanted
    """

    def __init__(self, connection: Connection, owner: ProgrammeRecord, zone: str | None = None) -> None:
        table = schema.zone_version
        columns = ("id", "version", "in_force_from", "in_force_until", "season", "commit_no", "ended_commit_no")
        query = (
            select(schema.zone.c.identifier, *(table.c[name] for name in columns))
            .join_from(schema.zone, table, table.c.zone_id == schema.zone.c.id)
            .where(schema.zone.c.programme_id == owner.id)
            .order_by(schema.zone.c.identifier, table.c.version)
        )
        if zone is not None:
            query = query.where(schema.zone.c.identifier == zone)
        self._owner = owner
        self._rows = list(connection.execute(query))
        self._changes = sorted({row.commit_no for row in self._rows} | {row.ended_commit_no or 0 for row in self._rows})
        self._at = cache(self._versions_at)
        self._in_force = cache(self._in_force_among)

    def at(self, commit_no: int) -> tuple[ZoneTimes, ...]:
        """Versions that were live after a commit, by zone and version, each ended where the next begins."""
        return self._at(self._change_before(commit_no))

    def in_force(self, commit_no: int, time_ms: int) -> frozenset[int]:
        """Keys of those of them that are in force at an instant."""
        return self._in_force(self._change_before(commit_no), time_ms)

    def _change_before(self, commit_no: int) -> int:
        place = bisect_right(self._changes, commit_no)
        return self._changes[place - 1] if place else 0

    def _versions_at(self, commit_no: int) -> tuple[ZoneTimes, ...]:
        live = [
            row
            for row in self._rows
            if row.commit_no <= commit_no and (row.ended_commit_no is None or row.ended_commit_no > commit_no)
        ]
        versions = [self._times(row) for row in live]
        begins: dict[str, list[int]] = {}
        for version in versions:
            if version.from_ms is not None:
                begins.setdefault(version.zone, []).append(version.from_ms)
        return tuple(_ended(version, begins.get(version.zone, [])) for version in versions)

    def _in_force_among(self, change: int, time_ms: int) -> frozenset[int]:
        versions, time_zone = self._at(change), self._owner.time_zone
        return frozenset(version.key for version in versions if version.in_force_at(time_ms, time_zone))

    def _times(self, row: Row[Any]) -> ZoneTimes:
        from_ms, until_ms = (
            None if text is None else local_date_ms(text, self._owner.time_zone)
            for text in (row.in_force_from, row.in_force_until)
        )
        return ZoneTimes(row.id, row.identifier, row.version, from_ms, until_ms, row.season)


def _ended(version: ZoneTimes, begins: list[int]) -> ZoneTimes:
    """A version ends at its own end or where a later one of its zone begins, whichever comes first."""
    later = [begin for begin in begins if version.from_ms is None or begin > version.from_ms]
    ends = [end for end in (version.until_ms, *later) if end is not None]
    return replace(version, until_ms=min(ends, default=None))
