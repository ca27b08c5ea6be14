"""Months, dates and seasons in a reporting time zone."""

from itertools import pairwise

import pytest

from estimators import CalendarError, Season, local_date_ms, month_spans
from estimators.months import length_ms

DAY_MS = 86_400_000


@pytest.mark.parametrize(
    ("first", "last", "seconds"),
    [
        ("2026-01-01", "2026-02-01", 2678400),
        ("2024-02-01", "2024-03-01", 2505600),
        ("2023-02-01", "2023-03-01", 2419200),
    ],
)
def test_length_of_months(first, last, seconds):
    """31 days, February of a leap year and of a common one (the calendar)."""
    spans = month_spans(local_date_ms(first, "UTC"), local_date_ms(last, "UTC"), "UTC")
    assert [span.month for span in spans] == [first[:7]]
    assert spans[0].end_ms - spans[0].start_ms == seconds * 1000


def test_months_split_a_span_exactly():
    """Parts join to the whole, in a zone with a clock change."""
    start, end = (
        local_date_ms("2026-01-15", "Europe/Berlin"),
        local_date_ms("2027-04-02", "Europe/Berlin") + 7,
    )
    spans = month_spans(start, end, "Europe/Berlin")
    assert spans[0].start_ms == start
    assert spans[-1].end_ms == end
    assert all(a.end_ms == b.start_ms for a, b in pairwise(spans))
    march = next(span for span in spans if span.month == "2026-03")
    assert march.end_ms - march.start_ms == 31 * DAY_MS - 3_600_000


def test_season_across_new_year():
    """15 November to 29 February: to the 28th in a common year, to the 29th in a leap year."""
    season = Season.parse("11-15/02-29")
    start, end = local_date_ms("2026-01-01", "UTC"), local_date_ms("2027-01-01", "UTC")
    assert length_ms(season.spans(start, end, "UTC")) == (31 + 28 + 16 + 31) * DAY_MS
    start, end = local_date_ms("2024-01-01", "UTC"), local_date_ms("2024-06-01", "UTC")
    assert length_ms(season.spans(start, end, "UTC")) == (31 + 29) * DAY_MS


@pytest.mark.parametrize("text", ["11-15", "13-01/02-01", "02-30/03-01", "2-1/3-1"])
def test_bad_seasons_are_refused(text):
    """A season is two days that exist."""
    with pytest.raises(CalendarError):
        Season.parse(text)
