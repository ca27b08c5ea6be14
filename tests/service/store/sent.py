"""Submissions and zones made by hand, for tests of the store."""

import hashlib
import io
from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np

from estimators import ERROR_KINDS, ZoneShape
from service.readers.fix_rows import FixChunk, ReadOutcome, RejectedRow
from service.readers.zones_geojson import ReadZone
from service.store.animals import put_animal
from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.submissions import Payload, Receipt, record_tracks
from service.store.zones import put_zone

START_MS = 1_700_000_000_000
HOUR_MS = 3_600_000
SD_M = tuple(ERROR_KINDS).index("sd_m")

Row = tuple[str, str, int, float, float, float | None]
"""animal, tag, time_ms, lon_deg, lat_deg, sd_m."""


def payload(content: bytes = b"as sent", media_type: str = "text/csv") -> Payload:
    return Payload(io.BytesIO(content), len(content), hashlib.sha256(content).hexdigest(), media_type, {})


def chunk(rows: Sequence[Row], first_row: int = 1) -> FixChunk:
    animals, tags = sorted({row[0] for row in rows}), sorted({row[1] for row in rows})
    sd_m = np.array([np.nan if row[5] is None else row[5] for row in rows], dtype=float)
    return FixChunk(
        np.arange(first_row, first_row + len(rows)),
        (np.array([animals.index(row[0]) for row in rows], np.int64), animals),
        (np.array([tags.index(row[1]) for row in rows], np.int64), tags),
        np.array([row[2] for row in rows], np.int64),
        np.array([row[3] for row in rows], float),
        np.array([row[4] for row in rows], float),
        np.where(np.isnan(sd_m), -1, SD_M).astype(np.int8),
        np.stack([sd_m**2, 0.0 * sd_m, sd_m**2], axis=-1),
    )


def chunks(rows: Sequence[Row], rows_at_a_time: int) -> list[FixChunk]:
    return [chunk(rows[k : k + rows_at_a_time], k + 1) for k in range(0, len(rows), rows_at_a_time)]


def send(
    store: Store,
    rows: Sequence[Row],
    rows_at_a_time: int = 20_000,
    content: bytes = b"as sent",
    refused: Iterable[RejectedRow] = (),
) -> Receipt:
    """Record rows as one submission; ``refused`` are those that a reader would not have taken."""
    outcome = ReadOutcome(lambda _rows: None)

    def read():
        bad = list(refused)
        outcome.rejected, outcome.rows = len(bad), len(rows) + len(bad)
        outcome.on_rejected(bad)
        yield from chunks(rows, rows_at_a_time)

    return record_tracks(store, DEFAULT_PROGRAMME, payload(content), read(), outcome)


def walk(animal: str, fixes: int, seed: int = 1, first: int = 0, tag: str = "", sd_m: float | None = 30.0) -> list[Row]:
    """An hourly random walk that begins near 0, 0; the same seed begins the same way."""
    generator = np.random.default_rng(seed)
    step = generator.normal(0.0, 0.004, (first + fixes, 2)).cumsum(axis=0)
    return [
        (animal, tag, START_MS + k * HOUR_MS, float(step[k, 0]), float(step[k, 1]), sd_m)
        for k in range(first, first + fixes)
    ]


def square(west: float, south: float, size: float = 0.1) -> dict:
    east, north = west + size, south + size
    ring = [[west, south], [east, south], [east, north], [west, north], [west, south]]
    return {"type": "Polygon", "coordinates": [ring]}


def zone(
    geometry: dict,
    in_force_from: str | None = None,
    in_force_until: str | None = None,
    season: str | None = None,
    name: str | None = None,
) -> ReadZone:
    shape = ZoneShape.from_geojson(geometry)
    return ReadZone("", name, in_force_from, in_force_until, season, "straight", geometry, shape, [])


def put(store: Store, identifier: str, version: ReadZone) -> bool:
    with store.write("zone") as tx:
        return put_zone(tx, DEFAULT_PROGRAMME, replace(version, identifier=identifier))[1]


def describe(store: Store, identifier: str, **attributes: object) -> bool:
    with store.write("animal") as tx:
        return put_animal(tx, DEFAULT_PROGRAMME, identifier, attributes)
