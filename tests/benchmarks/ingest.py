"""`POST /tracks` against the rate at which the database alone takes the same rows, and what it costs in memory."""

import statistics
import tempfile
import time
from pathlib import Path

import sqlalchemy

from service.store import schema
from tests.benchmarks.scenario import SD_M, csv_of, home_track
from tests.benchmarks.timing import Row
from tests.running_server import CSV, RunningServer

ANIMALS, FIXES_EACH = 100, 5_000
REPEATS = 5


def rows() -> list[Row]:
    """All figures of this file."""
    tracks = {f"animal-{k:03d}": home_track(FIXES_EACH, seed=k) for k in range(ANIMALS)}
    body = csv_of(tracks).encode()
    count = ANIMALS * FIXES_EACH
    values = [
        (k + 1, 1, int(t), 1, n, float(lon), float(lat), "sd_m", SD_M**2, 0.0, SD_M**2)
        for k, track in enumerate(tracks.values())
        for n, (t, lon, lat) in enumerate(zip(track.time_ms, track.lon_deg, track.lat_deg, strict=True))
    ]
    pairs, memory = [], (0.0, 0.0)
    for _ in range(REPEATS):
        alone_s = _database_alone_s(values)
        posted_s, memory = _posted_s(body)
        pairs.append((alone_s, posted_s))
    alone_s, posted_s = (statistics.median(column) for column in zip(*pairs, strict=True))
    return [
        Row(f"database alone, {count:,} fixes", f"{count / alone_s:,.0f} fixes/s", ""),
        Row(f"POST /tracks, CSV of {count:,} fixes ({len(body) / 1e6:.0f} MB)", f"{count / posted_s:,.0f} fixes/s", ""),
        Row("POST /tracks / database alone", f"{alone_s / posted_s:.2f}", "0.5"),
        Row(
            "peak memory of the server process: after a tenth of the body; after all",
            "{:.0f}; {:.0f} MB".format(*memory),
            "no growth",
        ),
    ]


def _database_alone_s(values: list[tuple[object, ...]]) -> float:
    """Seconds to insert the rows into the same table, in one transaction, with the same durability."""
    with tempfile.TemporaryDirectory() as directory:
        engine = sqlalchemy.create_engine(f"sqlite:///{directory}/alone.sqlite")
        with engine.connect() as connection:
            connection.exec_driver_sql("PRAGMA journal_mode=WAL")
            connection.exec_driver_sql("PRAGMA synchronous=FULL")
            schema.metadata.create_all(connection, tables=[schema.fix])
            connection.commit()
            statement = f"INSERT INTO fix VALUES ({', '.join('?' * len(schema.fix.columns))})"
            start = time.perf_counter()
            for first in range(0, len(values), 20_000):
                connection.exec_driver_sql(statement, values[first : first + 20_000])
            connection.commit()
            seconds = time.perf_counter() - start
        engine.dispose()
        return seconds


def _posted_s(body: bytes) -> tuple[float, tuple[float, float]]:
    """Seconds of one request on a fresh server, and its peak memory after a tenth of the body and after all."""
    tenth = body[: body.rindex(b"\n", 0, len(body) // 10) + 1].replace(b"animal-", b"before-")
    with tempfile.TemporaryDirectory() as directory, RunningServer(Path(directory) / "data") as server:
        server.http.post("/tracks", content=tenth, headers=CSV).raise_for_status()
        server.wait_until_current()
        small = _own_peak_mb(server)
        start = time.perf_counter()
        server.http.post("/tracks", content=body, headers=CSV).raise_for_status()
        return time.perf_counter() - start, (small, _own_peak_mb(server))


def _own_peak_mb(server: RunningServer) -> float:
    lines = Path(f"/proc/{server.process.pid}/status").read_text().splitlines()
    return next(int(line.split()[1]) for line in lines if line.startswith("VmHWM")) / 1024.0
