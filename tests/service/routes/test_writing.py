"""Posting tracks, animals and zones, and reading back what was sent."""

import json
import sqlite3
import threading
import time
from contextlib import closing

import pytest

from service.routes.models import AnimalPage, RejectedPage, SubmissionPage, TrackReceiptBody, ZonePage, ZoneReceiptBody
from tests.service.running import running_server, stored

HEADER = "animal,time,lon,lat"
CSV = {"Content-Type": "text/csv"}
RING = [[10, 50], [11, 50], [11, 51], [10, 51], [10, 50]]


@pytest.fixture
def client(tmp_path):
    with running_server(tmp_path) as client:
        yield client


def rows(*hours: int, lon: float = 10.0, animal: str = "a") -> bytes:
    return "\n".join([HEADER, *(f"{animal},2026-03-01T{hour:02}:00:00Z,{lon},50" for hour in hours)]).encode()


def zone(**properties: str) -> dict:
    geometry = {"type": "Polygon", "coordinates": [RING]}
    return {"type": "Feature", "id": "z", "properties": properties, "geometry": geometry}


def test_new_unchanged_and_corrected_fixes_are_counted(client):
    first = client.post("/tracks", content=rows(1, 2), headers=CSV)
    second = client.post("/tracks", content=rows(2, 3), headers=CSV)
    third = client.post("/tracks", content=rows(3, lon=11.0), headers=CSV)
    counts = [[r.json()[k] for k in ("accepted", "unchanged", "corrected", "rejected")] for r in (first, second, third)]
    assert counts == [[2, 0, 0, 0], [1, 1, 0, 0], [1, 0, 1, 0]]
    assert [answer.status_code for answer in (first, second, third)] == [201] * 3
    assert [TrackReceiptBody.model_validate(answer.json()).changed for answer in (first, second, third)] == [True] * 3
    assert client.get("/animals/a").json()["fixes"] == 3
    assert first.headers["location"] == "/submissions/1"


def test_the_same_bytes_again_change_nothing_and_name_the_submission_they_repeat(client, tmp_path):
    body = rows(1, 2)
    client.post("/tracks", content=body, headers=CSV)
    client.post("/tracks", content=rows(1, lon=12.0), headers=CSV)
    before = stored(tmp_path)
    again = client.post("/tracks", content=body, headers=CSV)
    assert (again.status_code, again.json()["repeat_of"], again.json()["changed"]) == (200, 1, False)
    assert (again.json()["accepted"], again.json()["unchanged"]) == (0, 2)
    assert stored(tmp_path) == before
    forced = client.post("/tracks?again=true", content=body, headers=CSV)
    assert (forced.status_code, forced.json()["corrected"], forced.json()["repeat_of"]) == (201, 1, 1)


def test_a_submission_that_says_nothing_new_is_kept_and_answered_200(client):
    client.post("/tracks", content=rows(1, 2), headers=CSV)
    answer = client.post("/tracks", content=rows(2), headers=CSV)
    assert (answer.status_code, answer.json()["unchanged"], answer.json()["submission"]) == (200, 1, 2)


def test_the_first_thousand_bad_rows_are_in_the_answer_and_the_rest_are_paged(client):
    bad = [f"a,2026-03-01T00:00:00Z,1,{100 + k}" for k in range(2_500)]
    body = "\n".join([HEADER, *bad, "a,2026-03-01T00:00:00Z,1,1"])
    receipt = client.post("/tracks", content=body, headers=CSV).json()
    assert (receipt["rejected"], len(receipt["rejected_rows"])) == (2_500, 1_000)
    found, address = receipt["rejected_rows"], receipt["next_rejected"]
    while address:
        page = RejectedPage.model_validate(client.get(address).json()).model_dump()
        found += page["rejected_rows"]
        address = page["next"] and f"/submissions/1/rejected?cursor={page['next']}"
    assert [row["row"] for row in found] == list(range(1, 2_501))
    assert {row["code"] for row in found} == {"lat_out_of_range"}


def test_json_is_taken_as_csv_is(client):
    body = [{"animal": "a", "time": "2026-03-01T01:00:00Z", "lon": 10, "lat": 50, "argos_class": "B", "note": "x"}]
    receipt = client.post("/tracks", json=body).json()
    assert (receipt["accepted"], receipt["media_type"]) == (1, "application/json")
    assert receipt["unknown_columns"] == ["note"]
    assert json.loads(client.get("/submissions/1/payload").content) == body


def test_submissions_are_paged_and_their_payload_comes_back_as_sent(client):
    bodies = [rows(hour) for hour in range(5)]
    for body in bodies:
        client.post("/tracks", content=body, headers=CSV)
    found, cursor = [], {}
    while cursor is not None:
        page = SubmissionPage.model_validate(client.get("/submissions", params={"limit": 2, **cursor}).json())
        found += page.submissions
        cursor = page.next and {"cursor": page.next}
    assert [receipt.submission for receipt in found] == [1, 2, 3, 4, 5]
    for receipt, body in zip(found, bodies, strict=True):
        payload = client.get(f"/submissions/{receipt.submission}/payload")
        assert payload.content == body
        assert payload.headers["content-type"].startswith("text/csv")


def test_an_animal_is_made_changed_and_protected_by_its_etag(client):
    attributes = {
        "species": "Panthera onca",
        "groups": ["north", "collared"],
        "deployments": [{"start": "2026-01-01", "end": None, "tag": "T1"}],
        "longest_bridged_gap_hours": 12,
        "estimator": "brownian_bridge",
    }
    made = client.put("/animals/a", json=attributes)
    assert made.status_code == 201
    assert made.json()["groups"] == ["collared", "north"]
    assert made.json()["sex"] is None
    read = client.get("/animals/a")
    assert read.headers["etag"] == made.headers["etag"]
    assert client.get("/animals/a", headers={"If-None-Match": read.headers["etag"]}).status_code == 304
    changed = client.put("/animals/a", json={"species": "x"}, headers={"If-Match": read.headers["etag"]})
    assert (changed.status_code, changed.json()["groups"]) == (200, [])
    late = client.put("/animals/a", json={}, headers={"If-Match": read.headers["etag"]})
    assert (late.status_code, late.json()["type"]) == (412, "/problems/precondition-failed")
    assert client.put("/animals/a", json={}, headers={"If-None-Match": "*"}).status_code == 412
    assert client.get("/animals/a").json()["species"] == "x"


def test_animals_are_paged_by_identifier(client):
    for name in ("b", "a", "ä", "c d"):
        client.post("/tracks", content=rows(1, animal=name), headers=CSV)
    first = AnimalPage.model_validate(client.get("/animals?limit=3").json())
    second = AnimalPage.model_validate(client.get("/animals", params={"limit": 3, "cursor": first.next}).json())
    assert [animal.animal for animal in first.animals + second.animals] == ["a", "b", "c d", "ä"]
    assert second.next is None
    assert len(client.get("/animals?limit=0").json()["animals"]) == 1
    assert len(client.get("/animals?limit=99999999").json()["animals"]) == 4


def test_the_same_start_corrects_a_version_and_a_later_one_ends_it(client):
    made = client.put("/zones/z", json=zone(name="Z", in_force_from="2026-01-01"))
    assert made.status_code == 201
    ZoneReceiptBody.model_validate(made.json())
    same = client.put("/zones/z", json=zone(name="Z", in_force_from="2026-01-01"))
    assert (same.status_code, same.json()["changed"]) == (200, False)
    assert same.headers["etag"] == made.headers["etag"]
    client.put("/zones/z", json=zone(name="Zed", in_force_from="2026-01-01")).raise_for_status()
    versions = client.put("/zones/z", json=zone(name="New", in_force_from="2026-06-01")).json()["versions"]
    assert [(v["name"], v["effective_from"], v["effective_until"]) for v in versions] == [
        ("Zed", "2026-01-01T00:00:00Z", "2026-06-01T00:00:00Z"),
        ("New", "2026-06-01T00:00:00Z", None),
    ]


def test_a_version_that_overlaps_a_later_one_is_refused(client, tmp_path):
    client.put("/zones/z", json=zone(in_force_from="2026-06-01"))
    before = stored(tmp_path)
    refused = client.put("/zones/z", json=zone(in_force_from="2026-01-01"))
    assert (refused.status_code, refused.json()["type"]) == (409, "/problems/zone-versions-overlap")
    assert "in_force_until" in refused.json()["detail"]
    assert stored(tmp_path) == before
    assert client.put("/zones/z", json=zone(in_force_from="2026-01-01", in_force_until="2026-06-01")).status_code == 200


def test_a_collection_is_taken_whole_or_not_at_all_with_every_fault(client, tmp_path):
    before = stored(tmp_path)
    features = [zone(), zone(edges="bent"), {**zone(season="99"), "id": None}]
    refused = client.post("/zones", json={"type": "FeatureCollection", "features": features}).json()
    assert [(e["code"], e["pointer"]) for e in refused["errors"]] == [
        ("unknown_edges", "/features/1/properties/edges"),
        ("duplicate_zone", "/features/1/id"),
        ("missing_id", "/features/2"),
        ("bad_season", "/features/2/properties/season"),
    ]
    assert stored(tmp_path) == before
    # In any order: the version that begins earlier is stored first.
    good = [zone(in_force_from="2026-06-01", name="later"), zone(in_force_from="2026-01-01", name="earlier")]
    taken = client.post("/zones", json={"type": "FeatureCollection", "features": good})
    assert taken.status_code == 201, taken.text
    assert [version["name"] for version in taken.json()["zones"][0]["versions"]] == ["earlier", "later"]
    assert client.post("/zones", json={"type": "FeatureCollection", "features": good}).status_code == 200


def test_zones_are_listed_in_both_forms_and_paged(client):
    for name in ("b", "a"):
        client.put(f"/zones/{name}", json={**zone(), "id": name}).raise_for_status()
    listed = ZonePage.model_validate(client.get("/zones").json())
    assert [each.zone for each in listed.zones] == ["a", "b"]
    assert listed.zones[0].versions[0].bbox == [10, 50, 11, 51]
    first = client.get("/zones?limit=1", headers={"Accept": "application/geo+json"})
    assert first.headers["content-type"] == "application/geo+json"
    second = client.get("/zones", params={"limit": 1, "cursor": first.json()["next"], "f": "geojson"}).json()
    features = first.json()["features"] + second["features"]
    assert [feature["id"] for feature in features] == ["a/1", "b/1"]
    assert {feature["properties"]["id"] for feature in features} == {"a/1", "b/1"}
    assert {feature["geometry"]["type"] for feature in features} == {"MultiPolygon"}


def test_a_retired_zone_is_gone_and_may_come_back(client):
    etag = client.put("/zones/z", json=zone()).headers["etag"]
    assert client.delete("/zones/z", headers={"If-Match": '"999-json"'}).status_code == 412
    assert client.delete("/zones/z", headers={"If-Match": etag}).status_code == 204
    assert client.get("/zones/z").status_code == 404
    assert client.delete("/zones/z").status_code == 404
    back = client.put("/zones/z", json=zone())
    assert [version["version"] for version in back.json()["versions"]] == [2]


def test_readers_are_answered_while_many_writers_wait(client, tmp_path):
    """Writers that wait for each other do not take all threads of the server."""
    answers = []

    def send(k):
        answers.append(client.post("/tracks", content=rows(1, animal=f"a{k}"), headers=CSV).status_code)

    senders = [threading.Thread(target=send, args=(k,)) for k in range(60)]
    with closing(sqlite3.connect(tmp_path / "sojourn.db", isolation_level=None)) as another_writer:
        another_writer.execute("BEGIN IMMEDIATE")
        for sender in senders:
            sender.start()
        time.sleep(1)
        assert client.get("/animals", timeout=5).json()["animals"] == []
        another_writer.execute("ROLLBACK")
    for sender in senders:
        sender.join()
    assert answers == [201] * 60
