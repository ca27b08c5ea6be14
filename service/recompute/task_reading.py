"""What a task is sent: everything that one animal's rows depend on, read in one snapshot."""

from __future__ import annotations

import json
from dataclasses import dataclass

from sqlalchemy import Connection, select

from estimators import ESTIMATES_VERSION, ZoneUseOptions
from service.recompute.task import AnimalInput, AnimalResult, Fitted, ZoneInput
from service.store import schema
from service.store.animals import current_attributes
from service.store.database import last_commit_no
from service.store.fixes import read_fixes
from service.store.programmes import ProgrammeRecord, get_programme
from service.store.publications import ComputedAnimal
from service.store.staleness import StaleAnimal
from service.store.zone_history import ZoneHistory


@dataclass(frozen=True)
class Task:
    """One animal to compute.

    Attributes
    ----------
    animal : StaleAnimal
    snapshot_commit_no : int, state of the store that it was read from
    sent : AnimalInput
    zone_keys : tuple of int, key inside the store of each zone version sent
    """

    animal: StaleAnimal
    snapshot_commit_no: int
    sent: AnimalInput
    zone_keys: tuple[int, ...]

    def to_publish(self, result: AnimalResult) -> ComputedAnimal:
        """The result with what ties it to the store."""
        return ComputedAnimal(
            self.animal.animal_id,
            self.snapshot_commit_no,
            result.estimator,
            result.parameters,
            result.months,
            result.rows,
            self.zone_keys,
            result.track_digest,
            result.digest,
        )


@dataclass(frozen=True)
class _ProgrammeZones:
    keys: tuple[int, ...]
    zones: tuple[ZoneInput, ...]


class TaskReader:
    """Reads tasks; keeps the zones of a programme until one of them, or a setting, changes."""

    def __init__(self) -> None:
        self._kept: dict[str, tuple[tuple[int, int], _ProgrammeZones]] = {}

    def read(self, connection: Connection, animal: StaleAnimal) -> Task:
        """Task of an animal as it stands in the snapshot of the connection."""
        owner = get_programme(connection, animal.programme)
        zones = self._zones(connection, owner)
        fixes = read_fixes(connection, animal.animal_id)
        sent = AnimalInput(
            fixes.tag,
            fixes.tag_names,
            fixes.time_ms,
            fixes.lon_deg,
            fixes.lat_deg,
            fixes.covariance_m2,
            current_attributes(connection, animal.animal_id),
            owner.default_error_sd_m,
            ZoneUseOptions(
                time_zone=owner.time_zone,
                longest_bridged_gap_hours=owner.longest_bridged_gap_hours,
                minimum_stay_hours=owner.minimum_stay_hours,
            ),
            zones.zones,
            _told_of_at_ms(connection, animal.animal_id),
            _fitted(connection, animal.animal_id),
        )
        return Task(animal, last_commit_no(connection), sent, zones.keys)

    def _zones(self, connection: Connection, owner: ProgrammeRecord) -> _ProgrammeZones:
        revisions = (owner.zones_revision, owner.settings_revision)
        kept = self._kept.get(owner.name)
        if kept is None or kept[0] != revisions:
            kept = revisions, _read_zones(connection, owner)
            self._kept[owner.name] = kept
        return kept[1]


def _read_zones(connection: Connection, owner: ProgrammeRecord) -> _ProgrammeZones:
    versions = ZoneHistory(connection, owner).at(last_commit_no(connection))
    table = schema.zone_version
    query = select(table.c.id, table.c.geometry_sent, table.c.edges).where(table.c.ended_commit_no.is_(None))
    stored = {row.id: row for row in connection.execute(query)}
    zones = tuple(
        ZoneInput(
            version.zone,
            version.version,
            stored[version.key].geometry_sent,
            stored[version.key].edges,
            version.from_ms,
            version.until_ms,
            version.season,
        )
        for version in versions
    )
    return _ProgrammeZones(tuple(version.key for version in versions), zones)


def _told_of_at_ms(connection: Connection, animal_id: int) -> int:
    animal, commit = schema.animal, schema.store_commit
    query = select(commit.c.at_ms).join_from(animal, commit, commit.c.commit_no == animal.c.revision)
    return int(connection.execute(query.where(animal.c.id == animal_id)).scalar_one())


def _fitted(connection: Connection, animal_id: int) -> Fitted | None:
    animal, publication = schema.animal, schema.publication
    row = connection.execute(
        select(publication.c.track_digest, publication.c.parameters, publication.c.estimates_version)
        .join_from(animal, publication, publication.c.id == animal.c.publication_id)
        .where(animal.c.id == animal_id)
    ).one_or_none()
    if row is None or row.estimates_version != ESTIMATES_VERSION or row.parameters == "{}":
        return None
    return Fitted(row.track_digest, json.loads(row.parameters))
