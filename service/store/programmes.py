"""Programmes: the owners of animals and zones, with the settings that their answers depend on."""

from __future__ import annotations

from dataclasses import dataclass

from sqlalchemy import Connection, insert, select, update

from service.settings import Settings
from service.store import schema


@dataclass(frozen=True)
class ProgrammeRecord:
    """A programme as stored.

    Attributes
    ----------
    id : int, key inside the store
    name : str
    time_zone : str, IANA name of the reporting time zone
    longest_bridged_gap_hours, minimum_stay_hours, default_error_sd_m : float, where an animal states none
    zones_revision, settings_revision : int, commit numbers of the last changes
    """

    id: int
    name: str
    time_zone: str
    longest_bridged_gap_hours: float
    minimum_stay_hours: float
    default_error_sd_m: float
    zones_revision: int
    settings_revision: int


def get_programme(connection: Connection, name: str) -> ProgrammeRecord:
    """Programme of that name.

    Raises
    ------
    LookupError
        There is none.
    """
    row = connection.execute(select(schema.programme).where(schema.programme.c.name == name)).one_or_none()
    if row is None:
        raise LookupError(f"There is no programme {name!r}.")
    return ProgrammeRecord(**row._mapping)


def keep_programme(connection: Connection, name: str, settings: Settings, commit_no: int) -> None:
    """Make the programme, or take over settings that changed since the last start."""
    values = {
        "time_zone": settings.time_zone,
        "longest_bridged_gap_hours": settings.longest_bridged_gap_hours,
        "minimum_stay_hours": settings.minimum_stay_hours,
        "default_error_sd_m": settings.default_error_sd_m,
    }
    try:
        stored = get_programme(connection, name)
    except LookupError:
        connection.execute(
            insert(schema.programme).values(name=name, zones_revision=0, settings_revision=commit_no, **values)
        )
        return
    if any(getattr(stored, field) != value for field, value in values.items()):
        connection.execute(
            update(schema.programme)
            .where(schema.programme.c.id == stored.id)
            .values(settings_revision=commit_no, **values)
        )
