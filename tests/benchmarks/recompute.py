"""From stored tracks to rows, from one new fix to its current row, and reading while it computes."""

import json
import statistics
import tempfile
import threading
import time
from collections.abc import Iterator
from pathlib import Path

from estimators import Zone, ZoneUseOptions, estimate_zone_use
from tests.benchmarks.scenario import csv_of, home_track, star_zone, whole_span, zone_features
from tests.benchmarks.timing import Row, median_s
from tests.running_server import CSV, GEOJSON, RunningServer

ANIMALS, FIXES_EACH, ZONES = 100, 8_760, 20


def rows() -> Iterator[Row]:
    """All figures of this file."""
    yield from _one_new_fix()
    yield from _stored_tracks_to_rows()
    yield from _where_the_time_goes()


def _zones() -> dict[str, Zone]:
    """Twenty zones around the animals' homes: each animal comes near a few."""
    return {f"zone-{k:02d}": star_zone(300, 4_800.0, seed=k, lon_deg=10.0 + 0.08 * k) for k in range(ZONES)}


def _stored_tracks_to_rows() -> list[Row]:
    with tempfile.TemporaryDirectory() as directory, RunningServer(Path(directory) / "data") as server:
        for k in range(ANIMALS):
            track = home_track(FIXES_EACH, seed=k, lon_deg=10.0 + 0.016 * k)
            server.http.post("/tracks", content=csv_of({f"animal-{k:03d}": track}), headers=CSV).raise_for_status()
        server.wait_until_current()
        start = time.perf_counter()
        body = json.dumps(zone_features(_zones()))
        server.http.post("/zones", content=body, headers=GEOJSON).raise_for_status()
        server.wait_until_current()
        seconds = time.perf_counter() - start
        memory = server.peak_memory_mb()
        idle = _p99_s(server, seconds=10.0)
        busy = _p99_while_computing(server)
    fixes = ANIMALS * FIXES_EACH
    return [
        Row(f"stored tracks to rows, {ANIMALS} × {FIXES_EACH:,} fixes × {ZONES} zones", f"{seconds:.1f} s", ""),
        Row("the same, fixes per second, both cores", f"{fixes / seconds:,.0f}", ""),
        Row("the same, peak memory of all processes", f"{memory:.0f} MB", "2048 MB"),
        Row("GET /zone-use, page of 1,000: p99 idle", f"{idle * 1000:.0f} ms", ""),
        Row("the same while it computes / idle", f"{busy / idle:.2f}", "2"),
    ]


def _where_the_time_goes() -> list[Row]:
    """One animal in this process: without zones, with one zone near, with one far away; the rest is the service's."""
    track = home_track(FIXES_EACH)
    span = whole_span(track)

    def seconds(zones: list[Zone]) -> float:
        return median_s(lambda: estimate_zone_use(track, span, zones, ZoneUseOptions()))

    alone, near, far = seconds([]), seconds([star_zone(300, 4_800.0)]), seconds([star_zone(300, 4_800.0, lon_deg=60.0)])
    figures = f"{alone * 1000:.0f} ms; {(near - alone) * 1000:.0f} ms; {max(far - alone, 0.0) * 1000:.1f} ms"
    return [Row(f"one animal of {FIXES_EACH:,} fixes: fit and smooth; each zone near; each zone far", figures, "")]


def _p99_s(server: RunningServer, seconds: float, until: threading.Event | None = None) -> float:
    times: list[float] = []
    end = time.monotonic() + seconds
    while time.monotonic() < end and not (until and until.is_set()):
        start = time.perf_counter()
        server.http.get("/zone-use", params={"limit": 1000}).raise_for_status()
        times.append(time.perf_counter() - start)
    return statistics.quantiles(times, n=100)[98]


def _p99_while_computing(server: RunningServer) -> float:
    """The same requests while every animal is computed again because a boundary changed."""
    changed = zone_features({"zone-00": star_zone(300, 5_000.0, seed=99)})
    server.http.post("/zones", content=json.dumps(changed), headers=GEOJSON).raise_for_status()
    done = threading.Event()

    def watch() -> None:
        with RunningServer.client(server.port) as client:
            while not client.get("/status").json()["current"]:
                time.sleep(0.1)
        done.set()

    watcher = threading.Thread(target=watch)
    watcher.start()
    found = _p99_s(server, seconds=600.0, until=done)
    watcher.join()
    return found


def _one_new_fix() -> list[Row]:
    track = home_track(10_006)
    lines = csv_of({"animal": track}).splitlines()
    with tempfile.TemporaryDirectory() as directory, RunningServer(Path(directory) / "data") as server:
        server.http.post("/zones", content=json.dumps(zone_features(_zones())), headers=GEOJSON).raise_for_status()
        server.http.post("/tracks", content="\n".join(lines[:10_001]), headers=CSV).raise_for_status()
        server.wait_until_current()
        times = []
        for line in lines[10_001:]:
            start = time.perf_counter()
            server.http.post("/tracks", content=f"{lines[0]}\n{line}\n", headers=CSV).raise_for_status()
            server.wait_until_current()
            times.append(time.perf_counter() - start)
    return [Row("one new fix to its current row, 10,000 fixes, 20 zones", f"{statistics.median(times):.2f} s", "1 s")]
