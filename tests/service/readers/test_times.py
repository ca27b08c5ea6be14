"""Times of fixes."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.readers.faults import Faults
from service.readers.times import read_times

RECEIVED_MS = 1_800_000_000_000


def ms(*parts: int) -> int:
    return round(datetime(*parts, tzinfo=UTC).timestamp() * 1000)


def read(texts: list[str], time_zone: str | None = None) -> tuple[list[int], dict[int, str]]:
    faults = Faults()
    time_ms = read_times(texts, RECEIVED_MS, time_zone and ZoneInfo(time_zone), faults)
    return time_ms.tolist(), {row: found[0].code for row, found in faults.of_row.items()}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2026-03-01T06:00:00Z", ms(2026, 3, 1, 6)),
        ("2026-03-01 06:00:00Z", ms(2026, 3, 1, 6)),
        ("2026-03-01t06:00:00z", ms(2026, 3, 1, 6)),
        (" 2026-03-01T06:00:00Z ", ms(2026, 3, 1, 6)),
        ("2026-03-01T06:00Z", ms(2026, 3, 1, 6)),
        ("2026-03-01T06:00:00.5Z", ms(2026, 3, 1, 6) + 500),
        ("2026-03-01T06:00:00.123456Z", ms(2026, 3, 1, 6) + 123),
        ("2026-03-01T06:00:00.1239999+00:00", ms(2026, 3, 1, 6) + 123),
        ("2026-03-01T06:00:00+12:00", ms(2026, 2, 28, 18)),
        ("2026-03-01T06:00:00-0330", ms(2026, 3, 1, 9, 30)),
        ("2024-02-29T23:59:59Z", ms(2024, 2, 29, 23, 59, 59)),
        ("1960-06-30T23:59:59.250Z", ms(1960, 6, 30, 23, 59, 59) + 250),
        ("2016-12-31T23:59:60Z", ms(2017, 1, 1)),
    ],
)
def test_every_rfc_3339_form_gives_its_instant(text, expected):
    assert read([text]) == ([expected], {})


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("", "missing_time"),
        ("yesterday", "bad_time"),
        ("2026-02-30T00:00:00Z", "bad_time"),
        ("2025-02-29T00:00:00Z", "bad_time"),
        ("2026-13-01T00:00:00Z", "bad_time"),
        ("2026-03-01T24:00:00Z", "bad_time"),
        ("2026-03-01T00:00:00ZZ", "bad_time"),
        ("2026-03-01T00:00:00.Z", "bad_time"),
        ("1772323200", "bad_time"),
        ("2026-W09-1T00:00:00Z", "bad_time"),
        ("٢٠٢٦-03-01T00:00:00Z", "bad_time"),
        ("2026-03-01T06:00:00", "time_without_offset"),
        ("2026-03-01T06:00", "time_without_offset"),
        ("2099-01-01T00:00:00Z", "time_in_future"),
        ("1956-12-31T23:59:59Z", "time_before_1957"),
        ("0001-01-01T00:00:00+14:00", "time_before_1957"),
    ],
)
def test_every_bad_time_is_named(text, code):
    assert read(["2026-03-01T06:00:00Z", text])[1] == {1: code}


def test_now_is_not_the_future_and_a_millisecond_later_is():
    assert read(["2027-01-15T08:00:00Z"]) == ([RECEIVED_MS], {})
    assert read(["2027-01-15T08:00:00.001Z"])[1] == {0: "time_in_future"}


def test_times_without_offset_are_read_in_the_zone_given_and_others_keep_theirs():
    read_ms, faults = read(["2026-07-01T12:00:00", "2026-01-01T12:00:00", "2026-01-01T12:00:00Z"], "Pacific/Auckland")
    assert read_ms == [ms(2026, 7, 1), ms(2025, 12, 31, 23), ms(2026, 1, 1, 12)]
    assert faults == {}


def test_local_times_that_never_came_or_came_twice_are_refused():
    _, faults = read(["2026-03-29T02:30:00", "2026-10-25T02:30:00", "2026-10-25T03:30:00"], "Europe/Berlin")
    assert faults == {0: "time_skipped", 1: "time_ambiguous"}


def test_one_odd_time_does_not_change_the_others():
    common = ["2026-03-01T06:00:00Z", "2026-03-01T07:00:00.250Z"]
    alone, _ = read(common)
    together, faults = read([common[0], "x" * 500, common[1]])
    assert [together[0], together[2]] == alone
    assert faults == {1: "bad_time"}


@given(st.lists(st.datetimes(datetime(1957, 1, 2), datetime(2026, 12, 31)), min_size=1, max_size=20))
def test_the_fast_way_and_the_slow_way_agree(instants):
    stamps = [instant.isoformat(timespec="milliseconds") for instant in instants]
    fast, fast_faults = read([f"{stamp}Z" for stamp in stamps])
    slow, slow_faults = read([f"{stamp}+00:00" for stamp in stamps])
    expected = np.array([np.datetime64(stamp, "ms") for stamp in stamps]).astype(np.int64).tolist()
    assert fast == slow == expected
    assert fast_faults == slow_faults == {}
