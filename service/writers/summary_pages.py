"""Pages of the summary: zone after zone, each read whole, so that every mean is over all its animals."""

from __future__ import annotations

from dataclasses import replace
from typing import Any, Final

from sqlalchemy import Connection

from service.store.zone_use_reading import ZoneUseFilter, zone_use_page
from service.store.zones import list_zone_versions
from service.writers.summary import ZoneSummary

READ_ROWS: Final = 10_000
"""Rows read at a time while summing up."""

MOST_ROWS_PER_PAGE: Final = 50_000
"""Once this many rows were summed up for a page, the page ends with its zone; bounds the time of an answer."""

PageKey = tuple[str, str, int]
Row = dict[str, Any]


def summary_page(
    connection: Connection, programme: str, wanted: ZoneUseFilter, after: PageKey | None, limit: int
) -> tuple[list[Row], PageKey | None]:
    """Summary rows in the order of zone, month and version.

    Parameters
    ----------
    connection : Connection, one snapshot
    programme : str
    wanted : ZoneUseFilter
    after : (zone, month, version) or None, the last row of the page before
    limit : int, rows

    Returns
    -------
    rows : list of dict
    next : (zone, month, version) or None
        The place after which the next page begins, before all months of a zone if need be; None where nothing is left.
    """
    rows: list[Row] = []
    read = 0
    zone = _next_zone(connection, programme, wanted, after[0] if after else "", included=after is not None)
    while zone is not None:
        of_zone, count = _zone_rows(connection, programme, replace(wanted, zone=zone))
        rows += [row for row in of_zone if after is None or _key(row) > after]
        read += count
        if len(rows) > limit:
            return rows[:limit], _key(rows[limit - 1])
        zone = _next_zone(connection, programme, wanted, zone, included=False)
        if zone is not None and rows and (len(rows) == limit or read >= MOST_ROWS_PER_PAGE):
            return rows, (zone, "", 0)
    return rows, None


def _key(row: Row) -> PageKey:
    return row["zone"], row["month"], row["zone_version"]


def _next_zone(
    connection: Connection, programme: str, wanted: ZoneUseFilter, last: str, *, included: bool
) -> str | None:
    """Identifier of the next zone, that one itself if it is to be read again."""
    if wanted.zone is not None:
        return wanted.zone if included or not last else None
    # Versions are counted from 1, so this place lies before or behind all of the zone's.
    found = list_zone_versions(connection, programme, (last, 0 if included else 2**31), 1)
    return found[0].zone if found else None


def _zone_rows(connection: Connection, programme: str, wanted: ZoneUseFilter) -> tuple[list[Row], int]:
    """Summary rows of one zone, and how many rows they were made of."""
    summary, count, after = ZoneSummary(), 0, None
    while True:
        page = zone_use_page(connection, programme, wanted, after, READ_ROWS)
        summary.add(page)
        count += len(page)
        if len(page) < READ_ROWS:
            return summary.rows(programme, wanted.zone or ""), count
        after = page[-1].place
