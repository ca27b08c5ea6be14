"""`sojourn estimate`: zone use of one file of tracks and one of zones, without a server.

The files go the way that a server's submissions go (the same readers, store, reconciler and writers), in a store that
is thrown away at the end; so the rows are the server's rows.
"""

from __future__ import annotations

import hashlib
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict, fields, replace
from io import BufferedReader
from pathlib import Path
from typing import Any, Final

import orjson
from sqlalchemy import Connection
from tqdm import tqdm

from service.media_types import CSV, JSON
from service.problems import Problem
from service.readers.fix_rows import ReadOutcome, RejectedRow
from service.readers.json_body import read_json_object
from service.readers.tracks_csv import read_tracks_csv
from service.readers.tracks_json import read_tracks_json
from service.readers.zones_geojson import read_zones
from service.recompute.reconciler import Reconciler
from service.settings import Settings
from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.staleness import status
from service.store.submissions import Payload, Receipt, record_tracks, rejected_rows
from service.store.zone_use_reading import ZoneUseFilter, zone_use_page
from service.store.zones import put_zone
from service.writers.csv_cells import csv_bytes
from service.writers.instants import utc_text
from service.writers.zone_features import feature_collection
from service.writers.zone_use_csv import zone_use_csv
from service.writers.zone_use_features import features_with_rows
from service.writers.zone_use_rows import CAUTIONS, zone_use_row

ALL_ACCEPTED: Final = 0
REFUSED: Final = 2
PARTLY_REJECTED: Final = 3

PAGE_ROWS: Final = 10_000
POLL_SECONDS: Final = 0.05
_TOLD_ROWS: Final = 10

Row = dict[str, Any]


def estimate_files(tracks: Path, zones: Path, out: Path, settings: Settings) -> int:
    """Compute zone use of two files and write it.

    Parameters
    ----------
    tracks : Path, fixes as POST /tracks takes them: JSON if its name ends in ``.json``, otherwise CSV
    zones : Path, zones as POST /zones takes them, or a single Feature with an id
    out : Path, directory for zone_use.json, zone_use.csv, zone_use.geojson and rejected.csv
    settings : Settings; the data directory is not used

    Returns
    -------
    int
        Exit status: 0 all rows accepted, 3 some rejected, 2 nothing could be used.

    Raises
    ------
    Problem
        A file cannot be used at all.
    """
    try:
        with tempfile.TemporaryDirectory(prefix="sojourn-estimate-") as directory:
            store = Store.open(replace(settings, data=Path(directory)))
            try:
                return _estimate(store, settings, tracks, zones, out)
            finally:
                store.close()
    except OSError as fault:
        print(f"{fault.filename}: {fault.strerror}.", file=sys.stderr)
        return REFUSED


def _estimate(store: Store, settings: Settings, tracks: Path, zones: Path, out: Path) -> int:
    _record_zones(store, zones, settings.time_zone)
    receipt = _record_tracks(store, tracks)
    out.mkdir(parents=True, exist_ok=True)
    with store.read() as connection:
        rejected = rejected_rows(connection, receipt.submission, 0, max(1, receipt.rejected))
    _write_rejected(out, rejected)
    if receipt.rejected == receipt.rows:
        print(f"All {receipt.rows} rows of {tracks} were rejected; nothing was computed.", file=sys.stderr)
        return REFUSED
    if not _compute(store, settings):
        return REFUSED
    with store.read() as connection:
        _write_rows(out, connection, settings)
    print(f"{receipt.rows - receipt.rejected} of {receipt.rows} rows taken. The answer is in {out}.", file=sys.stderr)
    return PARTLY_REJECTED if receipt.rejected else ALL_ACCEPTED


def _record_zones(store: Store, path: Path, time_zone: str) -> None:
    with _told_as_fault_of(path):
        body = read_json_object(path.read_bytes())
        if body.get("type") == "Feature":
            body = {"type": "FeatureCollection", "features": [body]}
        zones = read_zones(body, time_zone)
    with store.write("zones") as tx:
        for zone in zones:
            put_zone(tx, DEFAULT_PROGRAMME, zone)


@contextmanager
def _told_as_fault_of(path: Path) -> Iterator[None]:
    """A problem of what the file holds begins with the file's name: there are two files."""
    try:
        yield
    except Problem as fault:
        fault.title = f"{path}: {fault.title}"
        raise


def _record_tracks(store: Store, path: Path) -> Receipt:
    with path.open("rb") as file, _told_as_fault_of(path):
        return record_tracks(store, DEFAULT_PROGRAMME, *_read(file, path))


def _read(file: BufferedReader, path: Path) -> tuple[Payload, Iterator[Any], ReadOutcome]:
    sha256 = hashlib.file_digest(file, "sha256").hexdigest()
    file.seek(0)
    media_type, reader = (JSON, read_tracks_json) if path.suffix.lower() == ".json" else (CSV, read_tracks_csv)
    received_at_ms = time.time_ns() // 1_000_000
    outcome = ReadOutcome(on_rejected=lambda _: None)
    payload = Payload(file, path.stat().st_size, sha256, media_type, {}, received_at_ms)
    return payload, reader(file, received_at_ms, None, outcome), outcome


def _compute(store: Store, settings: Settings) -> bool:
    """Compute everything, with a progress bar; False, and the reasons told, if an animal failed."""
    reconciler = Reconciler(store, settings)
    try:
        reconciler.start()
        with store.read() as connection:
            total = int(status(connection)["pending"])
        with tqdm(total=total, desc="Computing zone use", unit="animal") as bar:
            while True:
                with store.read() as connection:
                    now = status(connection)
                bar.n = max(bar.n, total - now["pending"])
                bar.refresh()
                if now["failed"]:
                    print(f"A computation failed: {now['failed']}", file=sys.stderr)
                    return False
                if now["current"]:
                    return True
                time.sleep(POLL_SECONDS)
    finally:
        reconciler.stop()


def _all_rows(connection: Connection) -> list[Row]:
    rows: list[Row] = []
    after = None
    while page := zone_use_page(connection, DEFAULT_PROGRAMME, ZoneUseFilter(), after, PAGE_ROWS):
        rows += [zone_use_row(stored, DEFAULT_PROGRAMME) for stored in page]
        after = page[-1].place
    return rows


def _write_rows(out: Path, connection: Connection, settings: Settings) -> None:
    rows = _all_rows(connection)
    members = {
        "as_of": utc_text(time.time_ns() // 1_000_000),
        "current": True,
        "minimum_stay_hours": settings.minimum_stay_hours,
        "cautions": list(CAUTIONS),
    }
    features = features_with_rows(connection, DEFAULT_PROGRAMME, rows)
    (out / "zone_use.json").write_bytes(orjson.dumps({**members, "rows": rows, "next": None}))
    (out / "zone_use.csv").write_bytes(zone_use_csv(rows))
    (out / "zone_use.geojson").write_bytes(orjson.dumps(feature_collection(features, **members, next=None)))


def _write_rejected(out: Path, rejected: list[RejectedRow]) -> None:
    """Write rejected.csv, with its header alone if nothing was rejected, and tell the first few."""
    columns = [field.name for field in fields(RejectedRow)]
    (out / "rejected.csv").write_bytes(csv_bytes(columns, map(asdict, rejected)))
    for row in rejected[:_TOLD_ROWS]:
        print(f"Row {row.row}: {row.message}", file=sys.stderr)
    if len(rejected) > _TOLD_ROWS:
        print(f"{len(rejected) - _TOLD_ROWS} more rejected rows are in {out / 'rejected.csv'}.", file=sys.stderr)
