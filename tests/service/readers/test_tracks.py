"""Fixes from CSV and from JSON."""

import io
import json
import tracemalloc

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from estimators import ERROR_KINDS
from service.problems import Problem
from service.readers.fix_rows import CHUNK_ROWS, ReadOutcome, RejectedRow
from service.readers.tracks_csv import read_tracks_csv
from service.readers.tracks_json import read_tracks_json

RECEIVED_MS = 1_800_000_000_000
GOOD = {"animal": "a", "time": "2026-03-01T06:00:00Z", "lon": "174.25", "lat": "-36.5"}


class Read:
    """What a reader made of a body, flat."""

    def __init__(self, reader, body: bytes, time_zone: str | None = None) -> None:
        self.rejected: list[RejectedRow] = []
        self.outcome = ReadOutcome(self.rejected.extend)
        self.chunks = list(reader(io.BytesIO(body), RECEIVED_MS, time_zone, self.outcome))
        self.codes = {bad.row: bad.code for bad in self.rejected}

    def names(self, field: str) -> list[str]:
        return [getattr(c, field)[1][k] for c in self.chunks for k in getattr(c, field)[0]]

    def column(self, field: str):
        return np.concatenate([getattr(chunk, field) for chunk in self.chunks])


def csv_of(*rows: dict[str, str]) -> bytes:
    header = list(dict.fromkeys(name for row in rows for name in row))
    return "\n".join([",".join(header), *(",".join(row.get(name, "") for name in header) for row in rows)]).encode()


def read_csv(*rows: dict[str, str]) -> Read:
    return Read(read_tracks_csv, csv_of(*rows))


def test_a_row_is_read_whole():
    read = read_csv({**GOOD, "tag": "T1", "sd_m": "25"})
    assert (read.names("animal"), read.names("tag")) == (["a"], ["T1"])
    assert read.column("time_ms").tolist() == [1772344800000]
    assert (read.column("lon_deg").tolist(), read.column("lat_deg").tolist()) == ([174.25], [-36.5])
    assert [list(ERROR_KINDS)[k] for k in read.column("error_kind")] == ["sd_m"]
    assert read.column("covariance_m2").tolist() == [[625.0, 0.0, 625.0]]
    assert (read.outcome.rows, read.outcome.rejected, read.rejected) == (1, 0, [])


def test_a_row_without_error_statement_has_none():
    read = read_csv({**GOOD, "sd_m": "", "argos_class": " "})
    assert read.column("error_kind").tolist() == [-1]
    assert np.isnan(read.column("covariance_m2")).all()


def test_every_way_of_stating_error_may_stand_in_one_file():
    ways = {
        "sd_m": {"sd_m": "10"},
        "radius95_m": {"radius95_m": "100"},
        "argos_class": {"argos_class": "b"},
        "ellipse": {"semi_major_m": "400", "semi_minor_m": "100", "orientation_deg": "90"},
        "satellites": {"satellites": "6.0"},
    }
    read = read_csv(*({**GOOD, "tag": name, **columns} for name, columns in ways.items()))
    assert [list(ERROR_KINDS)[k] for k in read.column("error_kind")] == list(ways)
    assert read.column("covariance_m2")[3] == pytest.approx([80000.0, 0.0, 5000.0], abs=1e-9)
    assert read.rejected == []


@pytest.mark.parametrize(
    ("columns", "code", "column", "part"),
    [
        ({"animal": ""}, "bad_animal", "animal", "missing"),
        ({"animal": "x/y"}, "bad_animal", "animal", "'/'"),
        ({"animal": ".."}, "bad_animal", "animal", "path"),
        ({"animal": "x" * 101}, "bad_animal", "animal", "101 characters"),
        ({"tag": "x\x07"}, "bad_tag", "tag", "control"),
        ({"lon": "NaN"}, "bad_lon", "lon", "finite"),
        ({"lon": "inf"}, "bad_lon", "lon", "finite"),
        ({"lon": "1_0"}, "bad_lon", "lon", "finite"),
        ({"lon": ""}, "missing_lon", "lon", "No lon"),
        ({"lon": "360.1"}, "lon_out_of_range", "lon", "±360"),
        ({"lat": "-Infinity"}, "bad_lat", "lat", "finite"),
        ({"lat": "90.001"}, "lat_out_of_range", "lat", "±90"),
        ({"lat": "S36"}, "bad_lat", "lat", "'S36'"),
        ({"time": "2026-03-01T06:00:00"}, "time_without_offset", "time", "time_zone="),
        ({"sd_m": "-5"}, "error_not_positive", "sd_m", "-5"),
        ({"sd_m": "0"}, "error_not_positive", "sd_m", "positive"),
        ({"sd_m": "nan"}, "error_not_positive", "sd_m", "nan"),
        ({"sd_m": "1e9"}, "error_out_of_range", "sd_m", "1e9"),
        ({"sd_m": "1e-200"}, "error_out_of_range", "sd_m", "1e-200"),
        ({"radius68_m": "wide"}, "error_not_a_number", "radius68_m", "'wide'"),
        ({"argos_class": "Q"}, "unknown_argos_class", "argos_class", "'Q'"),
        ({"argos_class": "Z"}, "invalid_argos_position", "argos_class", "Z"),
        ({"satellites": "3"}, "too_few_satellites", "satellites", "fewer than 4"),
        ({"satellites": "5.5"}, "satellites_not_a_count", "satellites", "5.5"),
        ({"semi_major_m": "9"}, "incomplete_error_statement", "semi_major_m", "semi_minor_m, orientation_deg"),
        ({"semi_major_m": "9", "semi_minor_m": "10", "orientation_deg": "0"}, "swapped_axes", "semi_major_m", "Swap"),
        ({"sd_m": "5", "satellites": "7"}, "two_error_statements", "sd_m", "sd_m, satellites"),
    ],
)
def test_a_bad_cell_rejects_its_row_alone_and_says_why(columns, code, column, part):
    read = read_csv(GOOD, {**GOOD, **columns}, GOOD)
    assert read.codes == {2: code}
    assert read.rejected[0].column == column
    assert part in read.rejected[0].message
    assert read.column("row").tolist() == [1, 3]
    assert (read.outcome.rows, read.outcome.rejected) == (3, 1)


def test_all_faults_of_a_row_are_told_at_once():
    [bad] = read_csv({**GOOD, "animal": "", "lat": "91", "sd_m": "-1"}).rejected
    assert "identifier is missing" in bad.message
    assert "lat 91 is beyond" in bad.message
    assert "sd_m -1" in bad.message


def test_longitudes_beyond_the_antimeridian_are_wrapped_and_noted():
    read = read_csv(*({**GOOD, "lon": lon} for lon in ("190", "-190", "360", "-180", "180", "-179.5", "-360")))
    assert read.column("lon_deg").tolist() == [-170.0, 170.0, 0.0, 180.0, 180.0, -179.5, 0.0]
    assert read.outcome.notes == {"wrapped_longitude": 4}
    assert "beyond ±180" in read.outcome.note_texts()[0]


def test_the_zero_position_is_taken_and_noted():
    read = read_csv({**GOOD, "lon": "0", "lat": "0"}, {**GOOD, "lon": "0"})
    assert len(read.column("row")) == 2
    assert read.outcome.notes == {"zero_position": 1}


def test_unknown_columns_are_listed_and_a_byte_order_mark_and_line_ends_do_no_harm():
    body = b"\xef\xbb\xbf" + csv_of({**GOOD, "battery": "3.6"}).replace(b"\n", b"\r\n") + b"\r\n\r\n"
    read = Read(read_tracks_csv, body)
    assert read.outcome.unknown_columns == ["battery"]
    assert read.names("animal") == ["a"]


def test_quotes_are_understood_wherever_they_begin():
    plain = b"\n".join(b"a,2026-03-01T06:00:00Z,%d,1," % (k % 90) for k in range(60_000))
    quoted = b'\n"b, ""the second""",2026-03-01T06:00:00Z,1,1,"two\nlines"\nc,2026-03-01T06:00:00Z,1,1,'
    read = Read(read_tracks_csv, b"animal,time,lon,lat,note\n" + plain + quoted)
    assert read.outcome.rows == 60_002
    assert read.column("row").tolist() == list(range(1, 60_003))
    assert read.names("animal")[-2:] == ['b, "the second"', "c"]
    assert read.column("lon_deg")[:60_000].tolist() == [float(k % 90) for k in range(60_000)]


def test_rows_with_too_few_or_too_many_fields_are_rejected():
    body = csv_of(GOOD) + b"\na,2026-03-01T06:00:00Z,1\na,2026-03-01T06:00:00Z,1,2,3\n" + csv_of(GOOD).split(b"\n")[1]
    read = Read(read_tracks_csv, body)
    assert read.codes == {2: "wrong_field_count", 3: "wrong_field_count"}
    assert "3 fields, the header 4" in read.rejected[0].message
    assert read.column("row").tolist() == [1, 4]


def test_chunks_hold_a_bounded_number_of_rows_and_row_numbers_run_on():
    body = b"animal,time,lon,lat\n" + b"a,2026-03-01T06:00:00Z,1,1\n" * 50_000
    read = Read(read_tracks_csv, body)
    assert max(map(len, read.chunks)) <= CHUNK_ROWS
    assert read.column("row").tolist() == list(range(1, 50_001))


def test_memory_does_not_grow_with_the_body():
    def peak(rows: int) -> int:
        body = io.BytesIO(b"animal,time,lon,lat,sd_m\n" + b"a,2026-03-01T06:00:00Z,1.25,1.5,20\n" * rows)
        outcome = ReadOutcome(list[RejectedRow]().extend)
        tracemalloc.start()
        for _ in read_tracks_csv(body, RECEIVED_MS, None, outcome):
            pass
        _, most = tracemalloc.get_traced_memory()
        tracemalloc.stop()
        return most

    assert peak(400_000) < 1.2 * peak(80_000)


@pytest.mark.parametrize(
    ("body", "status", "slug", "part"),
    [
        (b"", 400, "empty-body", "empty"),
        (b"\n\n", 400, "empty-body", "empty"),
        (b"animal,time,lon,lat\n", 422, "no-rows", "no data rows"),
        (b"animal,time,lat\na,b,c\n", 422, "missing-column", "Missing: lon"),
        (b"animal;time;lon;lat\n", 422, "missing-column", "separated by commas"),
        (b"animal,time,lon,lat,lat\n", 422, "duplicate-column", "lat"),
        (b"animal,time,lon,lat\n\xff\n", 400, "not-utf-8", "UTF-8"),
        (b"\xff\xfea\x00", 400, "not-utf-8", "UTF-8"),
        (b'animal,time,lon,lat\n"a,b\n', 400, "not-csv", "quotes"),
        (b"animal,time,lon,lat\ra,b,c,d\r", 400, "not-csv", "line ends"),
        (b"animal,time,lon,lat\n" + b"x" * 200_000, 400, "not-csv", "longer than"),
    ],
)
def test_a_body_that_cannot_be_csv_is_refused_whole(body, status, slug, part):
    with pytest.raises(Problem) as refusal:
        Read(read_tracks_csv, body)
    assert (refusal.value.status, refusal.value.type) == (status, f"/problems/{slug}")
    assert part in refusal.value.detail


@pytest.mark.parametrize(
    ("body", "status", "slug"),
    [
        (b"", 400, "empty-body"),
        (b"  ", 400, "empty-body"),
        (b"[]", 422, "no-rows"),
        (b'{"animal": "a"}', 422, "not-an-array"),
        (b'[{"animal": "a"}', 400, "not-json"),
        (b'[{"animal": NaN}]', 400, "not-json"),
        (b'[{"animal": 1}] x', 400, "not-json"),
        (b"7", 400, "not-json"),
        (b'[{"animal": "\xff"}]', 400, "not-utf-8"),
    ],
)
def test_a_body_that_cannot_be_json_is_refused_whole(body, status, slug):
    with pytest.raises(Problem) as refusal:
        Read(read_tracks_json, body)
    assert (refusal.value.status, refusal.value.type) == (status, f"/problems/{slug}")


def test_json_says_the_same_as_csv():
    rows = [{**GOOD, "lon": 190.5, "lat": -36.5, "sd_m": 12.5, "tag": None}, {**GOOD, "satellites": 8, "battery": 1}]
    as_json = Read(read_tracks_json, b"\xef\xbb\xbf" + json.dumps(rows).encode())
    as_csv = read_csv(*({k: "" if v is None else str(v) for k, v in row.items()} for row in rows))
    for field in ("row", "time_ms", "lon_deg", "lat_deg", "error_kind", "covariance_m2"):
        assert as_json.column(field).tolist() == as_csv.column(field).tolist()
    assert as_json.names("animal") == as_csv.names("animal")
    assert as_json.outcome.notes == as_csv.outcome.notes
    assert as_json.outcome.unknown_columns == ["battery"]


def test_json_rows_that_are_no_fixes_are_rejected_one_by_one():
    read = Read(read_tracks_json, json.dumps([GOOD, 7, [GOOD], {**GOOD, "lon": [1]}, {**GOOD, "lat": True}]).encode())
    assert read.codes == {2: "not_an_object", 3: "not_an_object", 4: "not_a_value", 5: "not_a_value"}
    assert read.column("row").tolist() == [1]


def test_a_time_zone_that_does_not_exist_is_a_bad_parameter():
    with pytest.raises(Problem, match="Atlantis") as refusal:
        Read(read_tracks_csv, csv_of(GOOD), "Atlantis/Central")
    assert refusal.value.status == 400


@given(
    st.lists(
        st.tuples(
            st.text(st.characters(exclude_characters="\x00", codec="utf-8"), max_size=5),
            st.sampled_from(["2026-03-01T06:00:00Z", "", "x", "2026-03-01"]),
            st.one_of(st.floats().map(str), st.text(max_size=3)),
            st.one_of(st.floats().map(str), st.text(max_size=3)),
            st.sampled_from(["", "5", "-1", "x", "1e300"]),
        ),
        min_size=1,
        max_size=8,
    )
)
def test_whatever_is_sent_every_row_is_accepted_or_rejected_once(rows):
    body = json.dumps([dict(zip(("animal", "time", "lon", "lat", "sd_m"), row, strict=True)) for row in rows])
    read = Read(read_tracks_json, body.encode())
    accepted = read.column("row").tolist()
    assert sorted(accepted + [bad.row for bad in read.rejected]) == list(range(1, len(rows) + 1))
    assert np.isfinite(read.column("lon_deg")).all()
    assert (np.abs(read.column("lon_deg")) <= 180.0).all()
