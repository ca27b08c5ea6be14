"""Reading zone use, and what holds for every path."""

import asyncio
import csv
import io
import json
from dataclasses import replace

import httpx
import pytest

from service.app import create_app
from service.routes.models import HealthBody, StatusBody, SummaryPage, ZoneUsePage
from service.settings import Settings
from service.writers.zone_use_rows import ROW_FIELDS
from tests.service.running import KEY, running_server, wait_until_current

BOX = [[10, 50], [11, 50], [11, 51], [10, 51], [10, 50]]
FAR = [[30, 50], [31, 50], [31, 51], [30, 51], [30, 50]]
ANIMALS = {"inside": 10.5, "outside": 20.0, "=crossing": 10.0}


def feature(name: str, ring: list, **properties: str) -> dict:
    geometry = {"type": "Polygon", "coordinates": [ring]}
    return {"type": "Feature", "id": name, "properties": properties, "geometry": geometry}


def tracks() -> str:
    """Two months each: one animal within the box, one far away, one that walks east through its western edge."""
    lines = ["animal,time,lon,lat,sd_m"]
    for animal, lon in ANIMALS.items():
        for day in range(1, 29):
            for month in (3, 4):
                drift = (day - 14.5) * 0.02 if animal == "=crossing" else 0.0
                lines.append(f"{animal},2026-0{month}-{day:02}T00:00:00Z,{lon + drift:.4f},50.5,10")
    return "\n".join([*lines, "once,2026-03-01T00:00:00Z,10.5,50.5,10"])


@pytest.fixture(scope="module")
def client(tmp_path_factory):
    with running_server(tmp_path_factory.mktemp("reading"), computing=True) as client:
        zones = [feature("box", BOX), feature("far", FAR, in_force_from="2026-04-01"), feature("@far", FAR)]
        client.post("/zones", json={"type": "FeatureCollection", "features": zones}).raise_for_status()
        client.put("/animals/inside", json={"groups": ["kept"]}).raise_for_status()
        client.post("/tracks", content=tracks(), headers={"Content-Type": "text/csv"}).raise_for_status()
        wait_until_current(client)
        yield client


def rows(client: httpx.Client, **parameters) -> list[dict]:
    return client.get("/zone-use", params=parameters).raise_for_status().json()["rows"]


def test_rows_have_the_fields_of_the_contract_in_their_order(client):
    answer = client.get("/zone-use")
    page = answer.json()
    ZoneUsePage.model_validate_json(answer.content)
    assert list(page) == ["as_of", "current", "minimum_stay_hours", "cautions", "rows", "next"]
    assert page["current"] is True
    assert any("legal finding" in caution for caution in page["cautions"])
    assert any("sensitive species" in caution for caution in page["cautions"])
    assert all(list(row) == list(ROW_FIELDS) for row in page["rows"])
    keys = [(row["animal"], row["month"], row["zone"], row["zone_version"]) for row in page["rows"]]
    assert keys == sorted(set(keys))


def test_the_figures_are_those_that_the_tracks_were_made_for(client):
    found = {(row["animal"], row["month"], row["zone"]): row for row in rows(client)}
    inside, outside = found["inside", "2026-03", "box"], found["outside", "2026-03", "box"]
    assert (inside["time_fraction"], outside["time_fraction"]) == (1.0, 0.0)
    assert inside["probability_mass"] == pytest.approx(1.0, abs=1e-6)
    assert found["=crossing", "2026-04", "box"]["time_fraction"] == pytest.approx(0.5, abs=0.02)
    # March ends in a gap of four days; its tracked time goes on to the end of the month.
    assert inside["tracked_hours"] == 31 * 24
    assert inside["covered_hours"] == 27 * 24
    low, high = inside["path_bounds"]
    assert (low, high) == (pytest.approx(27 / 31), 1.0)
    assert inside["bounds"] == inside["path_bounds"]
    assert inside["expected_hours"] == pytest.approx(27 * 24, abs=0.001)
    assert not any(animal == "once" for animal, _, _ in found)
    assert ("inside", "2026-03", "far") not in found
    assert ("inside", "2026-04", "far") in found


def test_pages_put_together_are_the_whole(client):
    whole, found, cursor = rows(client), [], {}
    while cursor is not None:
        page = client.get("/zone-use", params={"limit": 2, **cursor})
        found += page.json()["rows"]
        cursor = page.json()["next"] and {"cursor": page.json()["next"]}
        assert ('rel="next"' in page.headers.get("link", "")) == (cursor is not None)
    assert found == whole


@pytest.mark.parametrize(
    ("parameters", "kept"),
    [
        ({"animal": "inside"}, lambda row: row["animal"] == "inside"),
        ({"zone": "box"}, lambda row: row["zone"] == "box"),
        ({"group": "kept"}, lambda row: row["animal"] == "inside"),
        ({"from": "2026-04"}, lambda row: row["month"] >= "2026-04"),
        ({"to": "2026-03", "zone": "@far"}, lambda row: row["month"] <= "2026-03" and row["zone"] == "@far"),
        ({"nonzero": "true"}, lambda row: row["probability_mass"] or row["time_fraction"]),
        ({"programme": "default"}, lambda row: True),
    ],
)
def test_filters_keep_what_they_say(client, parameters, kept):
    found = rows(client, **parameters)
    assert found == [row for row in rows(client) if kept(row)]
    assert found


def test_csv_has_the_same_rows_and_no_cell_that_runs_as_a_formula(client):
    answer = client.get("/zone-use", headers={"Accept": "text/csv"})
    assert answer.headers["content-type"].startswith("text/csv")
    table = list(csv.DictReader(io.StringIO(answer.text)))
    assert list(table[0]) == [*ROW_FIELDS, "cautions"]
    whole = rows(client)
    assert [line["animal"].removeprefix("'") for line in table] == [row["animal"] for row in whole]
    assert {line["animal"] for line in table} == {"inside", "outside", "'=crossing"}
    assert {line["zone"] for line in table} == {"box", "far", "'@far"}
    assert [float(line["time_fraction"]) for line in table] == [row["time_fraction"] for row in whole]
    assert [json.loads(line["bounds"]) for line in table] == [row["bounds"] for row in whole]
    assert [line["inside_interval"] for line in table] == [""] * len(whole)
    assert "legal finding" in table[0]["cautions"]


def test_geojson_has_one_feature_per_zone_version_with_its_rows(client):
    answer = client.get("/zone-use", params={"f": "geojson"}, headers={"Accept": "text/csv"})
    assert answer.headers["content-type"] == "application/geo+json"
    collection = answer.json()
    assert [feature["id"] for feature in collection["features"]] == ["@far/1", "box/1", "far/1"]
    shown = [row for feature in collection["features"] for row in feature["properties"]["rows"]]
    assert sorted(map(str, shown)) == sorted(map(str, rows(client)))
    assert collection["cautions"]
    assert all(feature["geometry"]["type"] == "MultiPolygon" for feature in collection["features"])


def test_the_summary_gives_every_animal_the_same_weight(client):
    answer = client.get("/zone-use/summary")
    page = SummaryPage.model_validate_json(answer.content)
    assert "above 0" in page.using_rule
    found = {(row.zone, row.month): row for row in page.rows}
    box = found["box", "2026-04"]
    of_box = [row for row in rows(client, zone="box") if row["month"] == "2026-04"]
    assert (box.animals_tracked, box.animals_with_covered_time, box.animals_using) == (3, 3, 2)
    for name in ("probability_mass", "time_fraction"):
        values = [row[name] for row in of_box]
        assert getattr(box, f"mean_{name}") == pytest.approx(sum(values) / 3, abs=1e-9)
        assert getattr(box, f"minimum_{name}") == min(values)
        assert getattr(box, f"maximum_{name}") == max(values)
    assert found["far", "2026-04"].animals_using == 0
    assert ("far", "2026-03") not in found


def test_the_summary_is_paged_and_has_all_forms(client):
    whole = client.get("/zone-use/summary").json()["rows"]
    for limit in (1, 2, 3):
        found, cursor = [], {}
        while cursor is not None:
            page = client.get("/zone-use/summary", params={"limit": limit, **cursor}).json()
            assert len(page["rows"]) <= limit
            found += page["rows"]
            cursor = page["next"] and {"cursor": page["next"]}
        assert found == whole
    collection = client.get("/zone-use/summary?f=geojson").json()
    assert [{k: f["properties"][k] for k in whole[0]} for f in collection["features"]] == whole
    assert len({f["id"] for f in collection["features"]}) == len(whole)
    table = list(csv.DictReader(io.StringIO(client.get("/zone-use/summary?f=csv").text)))
    assert [float(line["mean_time_fraction"]) for line in table] == [row["mean_time_fraction"] for row in whole]


def test_a_reader_may_wait_until_what_was_just_sent_is_computed(client):
    body = "animal,time,lon,lat\n" + "\n".join(f"new,2026-05-01T{hour:02}:00:00Z,10.5,50.5" for hour in range(5))
    client.post("/tracks", content=body, headers={"Content-Type": "text/csv"}).raise_for_status()
    page = client.get("/zone-use", params={"animal": "new"}, headers={"Prefer": "wait=60"}).json()
    assert page["current"] is True
    assert {row["month"] for row in page["rows"]} == {"2026-05"}


def test_head_answers_every_get_without_a_body(client):
    for path in ("/health", "/status", "/zone-use", "/zone-use/summary", "/zones", "/zones/box", "/animals",
                 "/animals/inside", "/submissions", "/submissions/1", "/submissions/1/payload",
                 "/submissions/1/rejected", "/openapi.json"):  # fmt: skip
        head, full = client.head(path), client.get(path)
        assert (head.status_code, head.content) == (200, b""), path
        assert head.headers["content-type"] == full.headers["content-type"]
        assert client.head("/animals/nobody").status_code == 404


def test_health_needs_no_key_and_everything_else_does(client):
    HealthBody.model_validate(httpx.get(f"{client.base_url}/health").json())
    StatusBody.model_validate(client.get("/status").json())
    document = httpx.get(f"{client.base_url}/openapi.json").json()
    for path, calls in document["paths"].items():
        for method in calls:
            if path != "/health":
                address = f"{client.base_url}{path}".replace("{", "").replace("}", "")
                assert httpx.request(method, address).status_code == 401, (method, path)


def test_the_api_document_describes_the_answers_and_the_problems(client):
    document = client.get("/openapi.json").json()
    use = document["paths"]["/zone-use"]["get"]
    assert {p["name"] for p in use["parameters"]} >= {"animal", "zone", "group", "from", "to", "nonzero", "cursor", "f"}
    assert set(use["responses"]["200"]["content"]) == {"application/json", "text/csv", "application/geo+json"}
    assert list(document["components"]["schemas"]["ZoneUseRow"]["properties"]) == list(ROW_FIELDS)
    for calls in document["paths"].values():
        for call in calls.values():
            assert "application/problem+json" in call["responses"]["4XX"]["content"]
    for method, path in (
        ("put", "/zones/{zone}"),
        ("post", "/zones"),
        ("put", "/animals/{animal}"),
        ("post", "/tracks"),
    ):
        assert {"200", "201"} <= document["paths"][path][method]["responses"].keys(), path
    payload = document["paths"]["/submissions/{submission}/payload"]["get"]["responses"]["200"]
    assert payload["content"].keys() == {"text/csv", "application/json", "application/geo+json"}


def test_a_failure_of_the_server_is_a_problem_that_gives_nothing_away(tmp_path):
    class Broken:
        def read(self):
            raise RuntimeError("secret path /srv/data")

    settings = replace(Settings(), data=tmp_path, admin_key=KEY)
    transport = httpx.ASGITransport(create_app(Broken(), settings, None), raise_app_exceptions=False)

    async def ask() -> httpx.Response:
        async with httpx.AsyncClient(transport=transport, base_url="http://t") as client:
            return await client.get("/animals", headers={"Authorization": f"Bearer {KEY}"})

    answer = asyncio.run(ask())
    assert (answer.status_code, answer.headers["content-type"]) == (500, "application/problem+json")
    assert answer.json()["type"] == "/problems/internal-error"
    assert "secret" not in answer.text
