"""`sojourn estimate`: the server's rows without a server, plain refusals, and an exit status that a script can use."""

import csv
import io
import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from functools import partial
from pathlib import Path

import httpx
import pytest

import demo_data
from service.cli import main
from tests.service.running import running_server, wait_until_current

DEMO = Path(demo_data.__file__).parent
ZONES = DEMO / "2023-09-zones.geojson"
HEADER = "animal,time,lon,lat,sd_m\n"
GOOD_ROWS = (
    "seal,2024-03-30T00:00:00Z,179.9,41.0,30\n"
    "seal,2024-03-30T12:00:00Z,-179.9,41.1,30\n"
    "seal,2024-04-02T00:00:00Z,-179.6,41.0,30\n"
)


@pytest.fixture(scope="module")
def june(tmp_path_factory) -> Path:
    """Answer of `sojourn estimate` for one month of the demo and its network of zones."""
    out = tmp_path_factory.mktemp("estimate") / "made" / "answer"
    assert main(["estimate", str(DEMO / "2024-06-tracks.csv"), str(ZONES), "--out", str(out)]) == 0
    return out


@pytest.fixture(scope="module")
def server(tmp_path_factory) -> Iterator[httpx.Client]:
    with running_server(tmp_path_factory.mktemp("server"), computing=True) as client:
        yield client


def post(server: httpx.Client, path: str, file: Path, media_type: str) -> None:
    server.post(path, content=file.read_bytes(), headers={"Content-Type": media_type}).raise_for_status()


def estimate(tmp_path: Path, tracks: str, zones: str | None = None, name: str = "tracks.csv") -> int:
    (tmp_path / name).write_text(tracks)
    zones_file = ZONES
    if zones is not None:
        zones_file = tmp_path / "zones.geojson"
        zones_file.write_text(zones)
    return main(["estimate", str(tmp_path / name), str(zones_file), "--out", str(tmp_path / "out")])


def test_rows_are_the_servers_rows(june, server):
    post(server, "/zones", ZONES, "application/geo+json")
    post(server, "/tracks", DEMO / "2024-06-tracks.csv", "text/csv")
    wait_until_current(server)
    answer = server.get("/zone-use?limit=10000").json()
    assert answer["current"]
    written = json.loads((june / "zone_use.json").read_bytes())
    assert len(written["rows"]) == 11 * 4
    assert written["rows"] == answer["rows"]
    assert written.keys() == answer.keys()
    assert {k: v for k, v in written.items() if k != "as_of"} == {k: v for k, v in answer.items() if k != "as_of"}
    assert (june / "zone_use.csv").read_bytes() == server.get("/zone-use?limit=10000&f=csv").content
    features = server.get("/zone-use?limit=10000&f=geojson").json()["features"]
    strip = [{**each, "properties": each["properties"] | {"commit": None}} for each in features]
    mine = json.loads((june / "zone_use.geojson").read_bytes())["features"]
    assert [{**each, "properties": each["properties"] | {"commit": None}} for each in mine] == strip


def test_nothing_rejected_leaves_a_header_alone(june):
    assert (june / "rejected.csv").read_text().splitlines() == ["row,column,code,message,value"]


def test_one_feature_and_json_tracks_do_too(tmp_path):
    fixes = list(csv.DictReader(io.StringIO(HEADER + GOOD_ROWS)))
    feature = json.loads(ZONES.read_text())["features"][0]
    assert estimate(tmp_path, json.dumps(fixes), json.dumps(feature), "tracks.json") == 0
    rows = json.loads((tmp_path / "out" / "zone_use.json").read_bytes())["rows"]
    assert [(row["month"], row["zone"]) for row in rows] == [("2024-03", "dateline-moor"), ("2024-04", "dateline-moor")]
    # The second step lasts longer than the longest bridged gap: not known, neither inside nor outside.
    assert rows[0]["coverage"] == pytest.approx(0.25)
    assert rows[1]["probability_mass"] is None
    assert rows[1]["bounds"] == [0.0, 1.0]


def test_some_bad_rows_are_told_and_written_and_the_others_computed(tmp_path, capsys):
    bad = "seal,2024-03-30T13:00:00Z,10,95,30\n"
    assert estimate(tmp_path, HEADER + GOOD_ROWS + bad) == 3
    assert "Row 4: " in capsys.readouterr().err
    (row,) = csv.DictReader(io.StringIO((tmp_path / "out" / "rejected.csv").read_text()))
    assert (row["row"], row["column"], row["value"]) == ("4", "lat", "95")
    assert json.loads((tmp_path / "out" / "zone_use.json").read_bytes())["rows"]


def test_contradicting_rows_are_rejected_as_the_server_does(tmp_path):
    other = "seal,2024-03-30T00:00:00Z,170.0,41.0,30\n"
    assert estimate(tmp_path, HEADER + GOOD_ROWS + other) == 3
    rejected = list(csv.DictReader(io.StringIO((tmp_path / "out" / "rejected.csv").read_text())))
    assert {(row["row"], row["code"]) for row in rejected} == {("1", "contradicting_rows"), ("4", "contradicting_rows")}


def test_only_bad_rows_are_refused_and_still_written(tmp_path, capsys):
    assert estimate(tmp_path, HEADER + "seal,2024-03-30T13:00:00Z,10,95,30\n" * 12) == 2
    said = capsys.readouterr().err
    assert "All 12 rows" in said
    assert "2 more rejected rows" in said
    assert len((tmp_path / "out" / "rejected.csv").read_text().splitlines()) == 13
    assert not (tmp_path / "out" / "zone_use.json").exists()


@pytest.mark.parametrize(
    ("tracks", "zones", "said"),
    [
        ("", None, "tracks.csv: The body is empty"),
        ("animal,time,lon\n", None, "tracks.csv: A required column is missing: Missing: lat"),
        (HEADER + GOOD_ROWS, "{", "zones.geojson: The body is not JSON"),
        (HEADER + GOOD_ROWS, '{"type": "FeatureCollection", "features": []}', "zones.geojson: The body holds no rows"),
        (HEADER + GOOD_ROWS, '{"type": "Feature", "properties": {}, "geometry": null}', "The feature has no id"),
    ],
)
def test_a_file_that_cannot_be_used_is_refused_in_plain_words(tmp_path, capsys, tracks, zones, said):
    assert estimate(tmp_path, tracks, zones) == 2
    told = capsys.readouterr().err
    assert said in told
    assert "Traceback" not in told


def test_versions_of_a_zone_may_come_in_any_order(tmp_path):
    first, *_ = json.loads(ZONES.read_text())["features"]
    later = {**first, "properties": {"in_force_from": "2024-04-01"}}
    body = json.dumps({"type": "FeatureCollection", "features": [later, first]})
    assert estimate(tmp_path, HEADER + GOOD_ROWS, body) == 0
    rows = json.loads((tmp_path / "out" / "zone_use.json").read_bytes())["rows"]
    assert [(row["month"], row["zone_version"]) for row in rows] == [("2024-03", 1), ("2024-04", 2)]


def test_a_missing_file_is_named(tmp_path, capsys):
    missing = tmp_path / "nowhere.csv"
    assert main(["estimate", str(missing), str(ZONES), "--out", str(tmp_path)]) == 2
    assert "nowhere.csv" in capsys.readouterr().err


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_interrupted_it_stops_in_one_word_and_leaves_no_temporary_store(tmp_path, number):
    """The temporary store holds positions."""
    (tmp_path / "tracks.csv").write_text(HEADER + GOOD_ROWS)
    temporary = tmp_path / "temporary"
    temporary.mkdir()
    files = [str(tmp_path / "tracks.csv"), str(ZONES), "--out", str(tmp_path / "out")]
    command = [sys.executable, "-m", "service", "estimate", *files]
    # Kernels are compiled anew here, so that there is time to interrupt.
    environment = {**os.environ, "TMPDIR": str(temporary), "NUMBA_CACHE_DIR": str(tmp_path / "kernels")}
    run = partial(subprocess.Popen, env=environment, stderr=subprocess.PIPE, text=True, start_new_session=True)
    with run(command) as process:
        while not (tmp_path / "out" / "rejected.csv").exists():
            assert process.poll() is None, process.stderr.read()
            time.sleep(0.02)
        # To all its processes, as a terminal does.
        os.killpg(process.pid, number)
        said = process.stderr.read()
        assert process.wait(timeout=60) == 130
    assert said.splitlines()[-1] == "Stopped."
    assert "Traceback" not in said
    assert not list(temporary.glob("sojourn-estimate-*"))


def test_a_bad_setting_is_refused_by_name(tmp_path, capsys, monkeypatch):
    monkeypatch.setenv("SOJOURN_TIME_ZONE", "Moon/Tycho")
    assert estimate(tmp_path, HEADER + GOOD_ROWS) == 2
    assert "SOJOURN_TIME_ZONE" in capsys.readouterr().err


def test_the_reporting_time_zone_cuts_the_months(tmp_path, monkeypatch):
    monkeypatch.setenv("SOJOURN_TIME_ZONE", "Pacific/Kiritimati")
    assert estimate(tmp_path, HEADER + "seal,2024-03-31T09:00:00Z,0.1,41,9\nseal,2024-03-31T11:00:00Z,0.2,41,9\n") == 0
    rows = json.loads((tmp_path / "out" / "zone_use.json").read_bytes())["rows"]
    assert {row["month"]: row["tracked_hours"] for row in rows} == {"2024-03": 1.0, "2024-04": 1.0}
