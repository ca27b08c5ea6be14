"""The demo's files: made by their script to the last byte, and holding what the demo is there to show."""

import csv
import json
import math
from datetime import datetime
from itertools import pairwise
from pathlib import Path
from random import Random

import pytest
from shapely.geometry import shape

import demo_data
from demo_data.make_demo_data import made_files
from demo_data.simulated_movement import Gait, Journey, moved
from estimators import ZoneShape

DIRECTORY = Path(demo_data.__file__).parent
TRACKS = sorted(path for path in DIRECTORY.glob("*.csv"))


def rows_of(path: Path) -> list[dict[str, str]]:
    with path.open(newline="") as lines:
        return list(csv.DictReader(lines))


@pytest.fixture(scope="module")
def rows() -> dict[str, list[dict[str, str]]]:
    return {path.name: rows_of(path) for path in TRACKS}


@pytest.fixture(scope="module")
def features() -> list[dict]:
    found = []
    for path in sorted(DIRECTORY.glob("*.geojson")):
        found += json.loads(path.read_text())["features"]
    return found


def test_script_makes_exactly_the_committed_files():
    made = dict(made_files())
    kept = {
        path.name: path.read_bytes() for path in DIRECTORY.iterdir() if path.suffix in {".csv", ".json", ".geojson"}
    }
    assert made == kept


def test_files_are_small():
    assert sum(len(content) for _, content in made_files()) < 2_000_000


def test_twelve_animals_of_two_species_over_fourteen_months(rows):
    attributes = json.loads((DIRECTORY / "2023-09-animals.json").read_text())
    sent = {row["animal"] for of_file in rows.values() for row in of_file}
    assert len(attributes) == 12
    assert sent == set(attributes)
    assert len({each["species"] for each in attributes.values()}) == 2
    assert len({row["time"][:7] for of_file in rows.values() for row in of_file}) == 14


def test_errors_are_stated_in_every_way_the_tags_have(rows):
    every = [row for of_file in rows.values() for row in of_file]
    assert {row["argos_class"] for row in every} == {"", "3", "2", "1", "0", "A", "B", "Z"}
    for column in ("satellites", "radius95_m", "semi_major_m"):
        assert any(row[column] for row in every)
    stated = [sum(bool(row[c]) for c in ("satellites", "radius95_m", "argos_class", "semi_major_m")) for row in every]
    assert set(stated) == {0, 1}


def test_five_zones_one_seasonal_one_across_the_antimeridian_two_overlapping(features):
    shapes = {each["id"]: ZoneShape.from_geojson(each["geometry"]) for each in features}
    assert len(shapes) == 5
    assert [each["id"] for each in features if "season" in each["properties"]] == ["winter-pasture"]
    assert [name for name, each in shapes.items() if each.bbox[0] > each.bbox[2]] == ["dateline-moor"]
    flat = {each["id"]: shape(each["geometry"]) for each in features}
    overlapping = {
        (first, second) for first in flat for second in flat if first < second and flat[first].intersects(flat[second])
    }
    assert overlapping == {("crane-marsh", "east-shore")}


def test_one_boundary_changed_half_way(features):
    versions = [each for each in features if each["id"] == "north-fell"]
    assert [each["properties"]["in_force_from"] for each in versions] == ["2020-01-01", "2024-05-01"]
    assert versions[0]["geometry"] != versions[1]["geometry"]


def test_late_fixes_come_after_their_months(rows):
    late = rows["2024-04-tracks-late.csv"]
    assert {row["time"][:7] for row in late} == {"2024-01", "2024-02"}
    sent_on_time = {(row["animal"], row["time"]) for row in rows["2024-01-tracks.csv"] + rows["2024-02-tracks.csv"]}
    assert not sent_on_time & {(row["animal"], row["time"]) for row in late}


def test_corrected_fixes_have_the_key_of_an_earlier_one_and_another_position(rows):
    before = {(row["animal"], row["tag"], row["time"]): (row["lon"], row["lat"]) for row in rows["2024-05-tracks.csv"]}
    corrected = rows["2024-07-tracks-corrected.csv"]
    assert corrected
    for row in corrected:
        assert before[row["animal"], row["tag"], row["time"]] != (row["lon"], row["lat"])


def test_gaps_tag_failures_and_steps_across_the_antimeridian(rows):
    times: dict[str, list[tuple[datetime, float]]] = {}
    for of_file in rows.values():
        for row in of_file:
            times.setdefault(row["animal"], []).append((datetime.fromisoformat(row["time"]), float(row["lon"])))
    steps = {animal: list(pairwise(sorted(of_animal))) for animal, of_animal in times.items()}
    gaps = {animal: max((b[0] - a[0]).total_seconds() / 3600 for a, b in pairs) for animal, pairs in steps.items()}
    assert min(gaps.values()) > 24
    assert gaps["pony-05"] > 24 * 90
    assert max(times["crane-03"])[0] < datetime.fromisoformat("2024-10-10T00:00:00Z")
    assert any(abs(b[1] - a[1]) > 350 for a, b in steps["pony-01"])


def test_moved_goes_the_asked_distance_and_across_the_antimeridian():
    quarter_m = math.pi / 2 * 6_371_008.8
    assert moved((179.5, 0.0), quarter_m, 0.0) == pytest.approx((-90.5, 0.0))
    assert moved((10.0, 0.0), 0.0, quarter_m)[1] == pytest.approx(90.0)


def test_an_animal_without_wander_arrives_where_it_heads():
    journey = Journey(
        [(0, (179.9, 41.0)), (1800, (-179.9, 41.1))], 30 * 86_400, Gait(2.0, 7200.0, 0.0, 3600.0), Random(1)
    )
    assert journey.at(30 * 86_400) == pytest.approx((-179.9, 41.1), abs=1e-6)
