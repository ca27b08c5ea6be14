"""What bad input gets: one table of requests, each with its status, problem type and message."""

import json
import math
from dataclasses import dataclass, field, replace
from typing import Any

import pytest

from service.settings import Settings
from tests.service.running import KEY, running_server, stored

TRACKS = "POST /tracks"
ZONE = "PUT /zones/z"
GEOJSON = "application/geo+json"
JSON = "application/json"
HEADER = "animal,time,lon,lat"
GOOD = "a,2026-03-01T06:00:00Z,174.25,-36.5"
SQUARE = [[10, 50], [11, 50], [11, 51], [10, 51], [10, 50]]
HOLE_OUTSIDE = [[20, 50], [20.5, 50], [20.5, 50.5], [20, 50]]
BODY_LIMIT_MB = 5
TOO_LARGE = b" " * (BODY_LIMIT_MB * 10**6 + 1)


def csv(*rows: str, header: str = HEADER) -> bytes:
    return "\n".join((header, *rows)).encode()


def feature(*rings: list[list[float]], **members: Any) -> bytes:
    geometry = {"type": "Polygon", "coordinates": list(rings)}
    return json.dumps({"type": "Feature", "properties": {}, "geometry": geometry, **members}).encode()


def ring_of(*positions: tuple[float, float]) -> list[list[float]]:
    return [list(position) for position in (*positions, positions[0])]


@dataclass(frozen=True)
class Refused:
    """A request, and what it gets: status, type of problem, a part of the message, and members of the answer."""

    name: str
    call: str
    body: bytes
    status: int
    slug: str
    message: str
    media_type: str = "text/csv"
    headers: dict[str, str] = field(default_factory=dict)
    members: dict[str, Any] = field(default_factory=dict)

    def __str__(self) -> str:
        return self.name


def bad_row(name: str, row: str, code: str, message: str, *, header: str = HEADER, call: str = TRACKS) -> Refused:
    """A submission of that row only: refused whole, and kept."""
    return Refused(
        name, call, csv(row, header=header), 422, "all-rows-rejected", message, members={"code of row": code}
    )


def bad_zone(
    name: str, body: bytes, code: str, message: str, pointer: str, place: list[float] | None = None
) -> Refused:
    members = {"code": code, "pointer": pointer, "place": place}
    return Refused(name, ZONE, body, 422, "invalid-zone", message, GEOJSON, members=members)


def get(name: str, path: str, status: int, slug: str, message: str, **headers: str) -> Refused:
    return Refused(name, f"GET {path}", b"", status, slug, message, headers=headers)


SD = f"{HEADER},sd_m"
ARGOS = f"{HEADER},argos_class"

WHOLE_BODY = [
    Refused("not UTF-8", TRACKS, csv("\xe9,x,1,1").decode().encode("latin-1"), 400, "not-utf-8", "Save as UTF-8"),
    Refused("empty body", TRACKS, b"", 400, "empty-body", "Send a header line and rows"),
    Refused("header only", TRACKS, csv(), 422, "no-rows", "no data rows"),
    Refused("missing column", TRACKS, csv("a,1,1", header="animal,lon,lat"), 422, "missing-column", "Missing: time"),
    Refused("column twice", TRACKS, csv(header="animal,time,lon,lat,lon"), 422, "duplicate-column", "lon. Keep one"),
    Refused("broken quote", TRACKS, csv('"a,1'), 400, "not-csv", "Check the quotes"),
    Refused("not JSON", TRACKS, b'[{"animal": "a", "lon": NaN}]', 400, "not-json", "NaN", "application/json"),
    Refused("JSON cut off", TRACKS, b'[{"animal": "a"}', 400, "not-json", "after number", "application/json"),
    Refused("number too long", TRACKS, b'[{"x":' + b"9" * 5000 + b"}]", 400, "not-json", "640 digits", JSON),
    Refused("number too large", TRACKS, b'[{"x":1e' + b"9" * 20 + b"}]", 400, "not-json", "exponent", JSON),
    Refused("nested too deeply", TRACKS, b"[" * 500 + b"]" * 500, 400, "not-json", "inside each other", JSON),
    Refused("JSON object", TRACKS, b"{}", 422, "not-an-array", "Send an array", "application/json"),
    Refused("JSON not UTF-8", TRACKS, b'[{"animal":"\xff"}]', 400, "not-utf-8", "UTF-8", "application/json"),
    Refused("body too large", TRACKS, TOO_LARGE, 413, "body-too-large", "SOJOURN_BODY_LIMIT_MB"),
    Refused("wrong content type", TRACKS, csv(GOOD), 415, "unsupported-media-type", "text/csv or", "text/plain"),
    Refused("no content type", TRACKS, csv(GOOD), 415, "unsupported-media-type", "no Content-Type", ""),
    Refused("other charset", TRACKS, csv(GOOD), 415, "unsupported-media-type", "UTF-8", "text/csv; charset=utf-16"),
    Refused(
        "compressed", TRACKS, csv(GOOD), 415, "unsupported-media-type", "uncompressed",
        headers={"Content-Encoding": "gzip"},
    ),
    Refused("wrong key", TRACKS, csv(GOOD), 401, "key-refused", "not valid", headers={"Authorization": "Bearer no"}),
    Refused("no key", TRACKS, csv(GOOD), 401, "key-refused", "No key", headers={"Authorization": ""}),
    Refused("unknown time zone", f"{TRACKS}?time_zone=Mars/One", csv(GOOD), 400, "invalid-parameter", "Mars/One"),
    Refused("unknown parameter", f"{TRACKS}?timezone=UTC", csv(GOOD), 400, "invalid-parameter", "timezone"),
]  # fmt: skip

ROWS = [
    bad_row("NaN", "a,2026-03-01T06:00:00Z,NaN,1", "bad_lon", "'NaN' is not a finite number"),
    bad_row("infinity", "a,2026-03-01T06:00:00Z,1,-Infinity", "bad_lat", "not a finite number"),
    bad_row("latitude beyond a pole", "a,2026-03-01T06:00:00Z,1,90.5", "lat_out_of_range", "beyond ±90"),
    bad_row("longitude beyond 360", "a,2026-03-01T06:00:00Z,361,1", "lon_out_of_range", "beyond ±360"),
    bad_row("no offset", "a,2026-03-01T06:00:00,1,1", "time_without_offset", "?time_zone="),
    bad_row("no time", "a,,1,1", "missing_time", "No time is given"),
    bad_row("not a time", "a,1 March,1,1", "bad_time", "'1 March' is not a time"),
    bad_row("future", "a,2226-03-01T06:00:00Z,1,1", "time_in_future", "lies in the future"),
    bad_row("before 1957", "a,1956-12-31T23:00:00Z,1,1", "time_before_1957", "before 1957"),
    bad_row(
        "never came", "a,2026-03-29T02:30:00,1,1", "time_skipped", "never came", call=f"{TRACKS}?time_zone=Europe/Oslo"
    ),
    bad_row(
        "end of the calendar", "a,9999-12-31T23:59:59,1,1", "bad_time", "not a time",
        call=f"{TRACKS}?time_zone=America/New_York",
    ),
    bad_row("null byte", "a,2026-03-01T06:00:00Z\0,1,1", "bad_time", "not a time"),
    bad_row("negative error", f"{GOOD},-5", "error_not_positive", "sd_m -5 is not a positive", header=SD),
    bad_row("zero error", f"{GOOD},0", "error_not_positive", "sd_m 0 is not a positive", header=SD),
    bad_row("error NaN", f"{GOOD},NaN", "error_not_positive", "not a positive number", header=SD),
    bad_row("error as large as the Earth", f"{GOOD},1e12", "error_out_of_range", "too large", header=SD),
    bad_row("unknown Argos class", f"{GOOD},X", "unknown_argos_class", "Use one of G, 3, 2, 1, 0, A, B", header=ARGOS),
    bad_row("two errors", f"{GOOD},5,3", "two_error_statements", "one way per row", header=f"{SD},argos_class"),
    bad_row("no animal", ",2026-03-01T06:00:00Z,1,1", "bad_animal", "identifier is missing"),
    bad_row("slash in an identifier", "a/b,2026-03-01T06:00:00Z,1,1", "bad_animal", "Leave out slashes"),
    bad_row("too few fields", "a,2026-03-01T06:00:00Z,1", "wrong_field_count", "3 fields, the header 4"),
    Refused(
        "two positions at one time", TRACKS, csv(GOOD, "a,2026-03-01T06:00:00Z,174.3,-36.5"), 422,
        "all-rows-rejected", "All 2 rows", members={"code of row": "contradicting_rows", "rejected": 2},
    ),
]  # fmt: skip

ZONES = [
    bad_zone(
        "unclosed ring", feature([*SQUARE[:4], [10, 50.5]]), "unclosed_ring", "Repeat the first position",
        "/geometry/coordinates/0", [10, 50.5],
    ),
    bad_zone(
        "self-crossing ring", feature(ring_of((10, 50), (11, 51), (11, 50), (10, 51))), "self_crossing_ring",
        "at longitude 10.5, latitude 50.5", "/geometry/coordinates", [10.5, 50.5],
    ),
    bad_zone(
        "zero area", feature(ring_of((10, 50), (11, 51), (12, 52))), "zero_area", "encloses no area",
        "/geometry/coordinates",
    ),
    bad_zone("too few positions", feature(SQUARE[:3]), "too_few_positions", "at least 4", "/geometry/coordinates/0"),
    bad_zone(
        "hole outside", feature(SQUARE, HOLE_OUTSIDE), "hole_outside", "outside", "/geometry/coordinates", [20, 50]
    ),
    bad_zone(
        "over 180° wide, way unclear", feature(ring_of((-100, 10), (100, 10), (100, 20), (-100, 20))),
        "ambiguous_width", "no edge is wider than 180", "/geometry/coordinates/0/0", [-100, 10],
    ),
    bad_zone(
        "foreign crs", feature(SQUARE, crs={"type": "name", "properties": {"name": "EPSG:3857"}}), "foreign_crs",
        "EPSG:3857", "/crs",
    ),
    bad_zone("latitude 95", feature(ring_of((10, 95), (11, 50), (11, 51))), "bad_position", "no place on Earth",
             "/geometry/coordinates/0/0", [10, 95]),
    bad_zone("a point", feature(geometry={"type": "Point", "coordinates": [1, 2]}), "not_a_polygon", "'Point'",
             "/geometry"),
    bad_zone("no geometry", feature(geometry=None), "not_a_polygon", "no geometry", "/geometry"),
    bad_zone("bad season", feature(SQUARE, properties={"season": "13-01/02-01"}), "bad_season", "MM-DD",
             "/properties/season"),
    bad_zone("bad date", feature(SQUARE, properties={"in_force_from": "spring"}), "bad_date", "'spring'",
             "/properties/in_force_from"),
    bad_zone(
        "ends before it begins",
        feature(SQUARE, properties={"in_force_from": "2026-02-01", "in_force_until": "2026-01-01"}),
        "empty_time_in_force", "never be in force", "/properties/in_force_until",
    ),
    bad_zone("unknown edges", feature(SQUARE, properties={"edges": "curved"}), "unknown_edges", "geodesic",
             "/properties/edges"),
    bad_zone("other id", feature(SQUARE, id="y"), "id_mismatch", "'z'", "/id"),
    Refused("zone not JSON", ZONE, b'{"type": ', 400, "not-json", "Line 1", GEOJSON),
    Refused("zone not UTF-8", ZONE, b'{"a": "\xff"}', 400, "not-utf-8", "UTF-8", GEOJSON),
    Refused("zone empty body", ZONE, b"", 400, "empty-body", "empty", GEOJSON),
    Refused("zone with NaN", ZONE, feature([[float("nan"), 1]]), 400, "not-json", "NaN", GEOJSON),
    Refused("zone as text", ZONE, feature(SQUARE), 415, "unsupported-media-type", GEOJSON, "text/plain"),
    Refused("not a Feature", ZONE, b'{"type": "Polygon"}', 422, "not-geojson", "Feature", GEOJSON),
    Refused("not a collection", "POST /zones", feature(SQUARE), 422, "not-geojson", "FeatureCollection", GEOJSON),
    Refused(
        "collection with a feature without id", "POST /zones",
        b'{"type":"FeatureCollection","features":[' + feature(SQUARE) + b"]}", 422, "invalid-zone", "no id", GEOJSON,
        members={"code": "missing_id", "pointer": "/features/0"},
    ),
    Refused("zone too large", ZONE, TOO_LARGE, 413, "body-too-large", "in parts", GEOJSON),
    bad_zone(
        "beyond the calendar", feature(SQUARE, properties={"in_force_until": "9999-12-31T23:59:59.9999-23:59"}),
        "date_out_of_range", "too far away", "/properties/in_force_until",
    ),
    Refused("zone identifier", "PUT /zones/a%5Cb", feature(SQUARE), 422, "invalid-identifier", "backslash", GEOJSON),
    Refused(
        "zone never seen", ZONE, feature(SQUARE), 412, "precondition-failed", "nothing is stored", GEOJSON,
        headers={"If-Match": '"1-json"'},
    ),
]  # fmt: skip

ANIMAL = "PUT /animals/a"
ANIMALS = [
    Refused("animal not JSON", ANIMAL, b"species: x", 400, "not-json", "Line 1", JSON),
    Refused("animal too large", ANIMAL, b" " * 1_000_001, 413, "body-too-large", "larger than 1000000 bytes", JSON),
    Refused("animal as array", ANIMAL, b"[]", 422, "not-an-object", "Send a JSON object", JSON),
    Refused("unknown attribute", ANIMAL, b'{"specie": "x"}', 422, "invalid-animal", "'specie' is unknown", JSON),
    Refused("gap of zero", ANIMAL, b'{"longest_bridged_gap_hours": 0}', 422, "invalid-animal", "above 0", JSON),
    Refused("unknown estimator", ANIMAL, b'{"estimator": "guess"}', 422, "invalid-animal", "random_walk", JSON),
    Refused(
        "deployment without start", ANIMAL, b'{"deployments": [{"end": "2026-01-01"}]}', 422, "invalid-animal",
        "needs a start", JSON,
    ),
    Refused(
        "deployment backwards", ANIMAL, b'{"deployments": [{"start": "2026-02-01", "end": "2026-01-01"}]}', 422,
        "invalid-animal", "ends before it starts", JSON,
    ),
    Refused("animal of another path", ANIMAL, b'{"animal": "b"}', 422, "invalid-animal", "the path of 'a'", JSON),
    Refused(
        "deployment for ever", ANIMAL, b'{"deployments": [{"start": "2026-01-01", "end": "9999-12-31"}]}', 422,
        "invalid-animal", "too far away", JSON,
    ),
    Refused("animal nested too deeply", ANIMAL, b"[" * 500 + b"]" * 500, 400, "not-json", "inside each other", JSON),
    Refused("animal identifier", "PUT /animals/..%5C", b"{}", 422, "invalid-identifier", "backslash", JSON),
]  # fmt: skip

READING = [
    get("unknown animal", "/animals/nobody", 404, "unknown-animal", "'nobody'"),
    get("unknown zone", "/zones/nowhere", 404, "unknown-zone", "'nowhere'"),
    get("unknown submission", "/submissions/99", 404, "unknown-submission", "'99'"),
    get("submission that is no number", "/submissions/x/payload", 404, "unknown-submission", "'x'"),
    get("use of an unknown animal", "/zone-use?animal=nobody", 404, "unknown-animal", "'nobody'"),
    get("use of an unknown zone", "/zone-use?zone=nowhere", 404, "unknown-zone", "'nowhere'"),
    get("use of an unknown group", "/zone-use?group=nobody", 404, "unknown-group", "'nobody'"),
    get("use in an unknown programme", "/zone-use?programme=other", 404, "unknown-programme", "'other'"),
    get("summary of an unknown zone", "/zone-use/summary?zone=nowhere", 404, "unknown-zone", "'nowhere'"),
    get("month 13", "/zone-use?from=2026-13", 400, "invalid-parameter", "from: '2026-13' is not a month"),
    get("month 13 at the end", "/zone-use/summary?to=2026-13", 400, "invalid-parameter", "to: '2026-13'"),
    get("months reversed", "/zone-use?from=2026-03&to=2026-02", 400, "invalid-parameter", "Swap them"),
    get("unknown parameter of a list", "/zone-use?month=2026-03", 400, "invalid-parameter", "month: "),
    get("parameter twice", "/zone-use?animal=a&animal=b", 400, "invalid-parameter", "animal"),
    get("limit that is no number", "/zone-use?limit=all", 400, "invalid-parameter", "limit"),
    get("foreign cursor", "/zone-use?cursor=WyJhIl0", 400, "invalid-parameter", "cursor"),
    get("garbled cursor", "/animals?cursor=%00%ff", 400, "invalid-parameter", "cursor"),
    get("form that is not offered", "/zone-use?f=xml", 406, "not-acceptable", "f=csv"),
    get("only HTML accepted", "/zone-use", 406, "not-acceptable", "text/html", Accept="text/html"),
    get("no such path", "/nothing", 404, "not-found", "/openapi.json"),
    get("read without key", "/animals", 401, "key-refused", "No key", Authorization=""),
    get("read with another scheme", "/animals", 401, "key-refused", "No key", Authorization=f"Basic {KEY}"),
    Refused("method", "PATCH /zones/z", b"", 405, "method-not-allowed", "method"),
    Refused("retire an unknown zone", "DELETE /zones/nowhere", b"", 404, "unknown-zone", "'nowhere'"),
]

REFUSED = [*WHOLE_BODY, *ROWS, *ZONES, *ANIMALS, *READING]


@pytest.fixture(scope="module")
def server(tmp_path_factory):
    data = tmp_path_factory.mktemp("bad-input")
    with running_server(data, replace(Settings(), body_limit_mb=BODY_LIMIT_MB)) as client:
        yield client, data


@pytest.mark.parametrize("case", REFUSED, ids=str)
def test_what_bad_input_gets(server, case):
    client, data = server
    before = stored(data)
    method, path = case.call.split(" ")
    headers = ({"Content-Type": case.media_type} if case.media_type else {}) | case.headers
    answer = client.request(method, path, content=case.body, headers=headers)
    problem = answer.json()
    assert answer.status_code == problem["status"] == case.status, problem
    assert answer.headers["content-type"] == "application/problem+json"
    assert problem["type"] == f"/problems/{case.slug}"
    assert problem["title"]
    assert case.message in problem["detail"]
    members = dict(case.members)
    if code := members.pop("code of row", None):
        # Nothing that was sent is lost: bytes and rows are kept, and say what was wrong.
        assert {bad["code"] for bad in problem["rejected_rows"]} == {code}
        kept = client.get(f"/submissions/{problem['submission']}").json()
        assert (kept["accepted"], kept["rejected"]) == (0, kept["rows"])
        assert client.get(f"/submissions/{problem['submission']}/payload").content == case.body
        assert client.get("/animals").json()["animals"] == []
    else:
        assert stored(data) == before
    for name, value in members.items():
        assert problem[name] == value
    if case.status == 401:
        assert answer.headers["www-authenticate"].startswith("Bearer")


def test_a_body_of_unknown_length_that_grows_too_large_is_refused(server):
    client, data = server
    before = stored(data)
    parts = (b"x" * 100_000 for _ in range(BODY_LIMIT_MB * 10 + 1))
    answer = client.post("/tracks", content=parts, headers={"Content-Type": "text/csv"})
    assert answer.status_code == 413
    assert answer.json()["type"] == "/problems/body-too-large"
    assert stored(data) == before


ACCEPTED = {
    "unknown columns": (csv(f"{GOOD},7,x", header=f"{HEADER},volt,note"), {"unknown_columns": ["volt", "note"]}, ""),
    "longitude up to 360": (csv("w,2026-03-01T06:00:00Z,190,1"), {"accepted": 1}, "beyond ±180"),
    "0,0": (csv("z,2026-03-01T06:00:00Z,0,0"), {"accepted": 1}, "Longitude 0, latitude 0"),
    "one fix only": (csv("o,2026-03-01T06:00:00Z,1,1"), {"accepted": 1, "rejected": 0}, ""),
    "byte order mark": (b"\xef\xbb\xbf" + csv("b,2026-03-01T06:00:00Z,1,1"), {"accepted": 1}, ""),
    "the same row twice": (csv(*["t,2026-03-01T06:00:00Z,1,1"] * 2), {"accepted": 1, "unchanged": 1}, ""),
    "some bad rows": (
        csv("s,2026-03-01T06:00:00Z,1,1", "s,2026-03-01T07:00:00Z,1,91", "s,2026-03-01T08:00:00Z,1,1", ",,,"),
        {"rows": 4, "accepted": 2, "rejected": 2}, "",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", ACCEPTED)
def test_what_is_taken_although_it_is_odd(tmp_path, name):
    body, members, note = ACCEPTED[name]
    with running_server(tmp_path) as client:
        answer = client.post("/tracks", content=body, headers={"Content-Type": "text/csv"})
        receipt = answer.json()
        assert answer.status_code == 201, receipt
        assert {member: receipt[member] for member in members} == members
        assert note in " ".join(receipt["notes"])
        assert len(receipt["rejected_rows"]) == receipt["rejected"]
        assert client.get(f"/submissions/{receipt['submission']}/payload").content == body


def test_times_without_offset_are_taken_with_a_time_zone(tmp_path):
    with running_server(tmp_path) as client:
        body = csv("a,2026-07-01T12:00:00,1,1")
        answer = client.post("/tracks?time_zone=Pacific/Auckland", content=body, headers={"Content-Type": "text/csv"})
        assert answer.status_code == 201
        assert answer.json()["parameters"] == {"time_zone": "Pacific/Auckland"}
        assert client.get("/animals/a").json()["first_fix"] == "2026-07-01T00:00:00Z"


def circle(vertices: int) -> list[list[float]]:
    turn = [2.0 * math.pi * k / vertices for k in range(vertices)]
    return ring_of(*((10.0 + math.cos(angle), 50.0 + math.sin(angle)) for angle in turn))


WIDE = ring_of(*((x, 10) for x in range(-100, 101, 50)), *((x, 20) for x in range(100, -101, -50)))
ACROSS = ring_of((170, -20), (190, -20), (190, -10), (170, -10))
CRS84 = {"type": "name", "properties": {"name": "urn:ogc:def:crs:OGC:1.3:CRS84"}}

ACCEPTED_ZONES = {
    "50,000 vertices": (feature(circle(50_000)), ""),
    "around the pole": (feature(ring_of((-150, 70), (-60, 70), (30, 70), (120, 70))), "around the north pole"),
    "wide by many edges": (feature(WIDE), ""),
    "across the antimeridian": (feature(ACROSS), "across the antimeridian"),
    "clockwise": (feature(SQUARE[::-1]), "clockwise"),
    "WGS 84 named": (feature(SQUARE, crs=CRS84), ""),
    "crs null": (feature(SQUARE, crs=None), ""),
    "unknown property": (feature(SQUARE, properties={"colour": "red", "name": "Z"}), ""),
}  # fmt: skip


@pytest.mark.parametrize("name", ACCEPTED_ZONES)
def test_zones_that_are_taken_although_they_are_odd(tmp_path, name):
    body, note = ACCEPTED_ZONES[name]
    with running_server(tmp_path) as client:
        answer = client.put("/zones/z", content=body, headers={"Content-Type": GEOJSON})
        assert answer.status_code == 201, answer.json()
        [version] = answer.json()["versions"]
        assert note in " ".join(version["notes"])
        assert version["geometry"]["type"] == "MultiPolygon"
        assert client.get("/zones/z", params={"f": "geojson"}).json()["features"][0]["geometry"] == version["geometry"]
        assert client.get(f"/submissions/{answer.json()['submission']}/payload").content == body
