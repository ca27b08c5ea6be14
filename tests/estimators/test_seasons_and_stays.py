"""Seasons, clock changes, and stays of exactly the least duration, seen through the estimates."""

from datetime import datetime
from itertools import pairwise
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from estimators import (
    Season,
    Zone,
    local_date_ms,
    month_spans,
)
from tests.estimators.hard_cases import (
    DAY_MS,
    HOUR_MS,
    only_row,
    rows_of,
    track_of,
)
from tests.estimators.simulated import START_MS, box


@pytest.mark.parametrize(("year", "days"), [(2026, 31 + 28 + 16 + 31), (2028, 31 + 29 + 16 + 31)])
def test_season_across_new_year_and_the_29th_of_february(year, days):
    """Season 11-15/02-29 over a whole year inside the zone: in force exactly on those days."""
    start_ms, end_ms = local_date_ms(f"{year}-01-01", "UTC"), local_date_ms(f"{year + 1}-01-01", "UTC")
    time_ms = np.arange(start_ms, end_ms + 1, 12 * HOUR_MS)
    track = track_of([0.5] * len(time_ms), [0.5] * len(time_ms), 5.0, time_ms=time_ms)
    zone = Zone(box(0, 0, 1, 1).shape, season=Season.parse("11-15/02-29"))
    rows = rows_of(track, [zone]).rows
    assert [row.month[5:] for row in rows] == ["01", "02", "11", "12"]
    assert sum(row.in_force_hours for row in rows) == 24.0 * days
    assert all(row.covered_hours == row.in_force_hours for row in rows)
    assert all(row.probability_mass == pytest.approx(1.0, abs=1e-6) for row in rows)


@pytest.mark.parametrize(
    ("zone_name", "hours"),
    [
        ("Pacific/Auckland", {"2026-04": 721, "2026-09": 719, "2026-06": 720}),
        ("Africa/Cairo", {"2026-04": 719, "2026-10": 745, "2026-06": 720}),
    ],
)
def test_months_with_a_clock_change(zone_name, hours):
    """Months are as long as the zone's clock says; an animal inside throughout has them whole."""
    start_ms, end_ms = local_date_ms("2026-03-20", zone_name), local_date_ms("2026-11-10", zone_name)
    time_ms = np.append(np.arange(start_ms, end_ms, 7 * HOUR_MS), end_ms)
    track = track_of([0.5] * len(time_ms), [0.5] * len(time_ms), 5.0, time_ms=time_ms)
    use = rows_of(track, [box(0, 0, 1, 1)], time_zone=zone_name)
    covered = {facts.month: facts.covered_hours for facts in use.months}
    assert {month: covered[month] for month in hours} == hours
    assert sum(covered.values()) == pytest.approx((end_ms - start_ms) / HOUR_MS, abs=1e-5)
    assert sum(row.inside_hours for row in use.rows) == pytest.approx((end_ms - start_ms) / HOUR_MS, abs=1e-5)


def test_a_season_that_opens_at_a_midnight_that_does_not_exist():
    """Cairo's clock jumps from 24 April 2026, 00:00, to 01:00: a season from that day opens at that instant."""
    start_ms, end_ms = local_date_ms("2026-04-20", "Africa/Cairo"), local_date_ms("2026-05-02", "Africa/Cairo")
    (span,) = Season.parse("04-24/04-30").spans(start_ms, end_ms, "Africa/Cairo")
    opened = datetime.fromtimestamp(span[0] / 1000, ZoneInfo("Africa/Cairo"))
    assert (opened.day, opened.hour) == (24, 1)
    assert span[1] - span[0] == 7 * DAY_MS - HOUR_MS


@pytest.mark.parametrize("zone_name", ["Pacific/Auckland", "Africa/Cairo", "America/St_Johns", "Pacific/Apia"])
def test_every_month_starts_where_the_last_one_ended(zone_name):
    """Thirty years of months, millisecond by millisecond, named in order."""
    start_ms, end_ms = local_date_ms("2000-01-01", zone_name), local_date_ms("2030-01-01", zone_name)
    spans = month_spans(start_ms, end_ms, zone_name)
    assert [span.month for span in spans] == [f"{y}-{m:02d}" for y in range(2000, 2030) for m in range(1, 13)]
    assert spans[0].start_ms == start_ms
    assert spans[-1].end_ms == end_ms
    assert all(a.end_ms == b.start_ms for a, b in pairwise(spans))


@pytest.mark.parametrize(("minimum_hours", "visits"), [(1.0, 1), (1.0 + 1e-6, 0)])
@pytest.mark.parametrize("offset_ms", [0, 1, 1_234_567, 5 * HOUR_MS - 1])
def test_a_stay_of_exactly_the_minimum_is_a_visit(offset_ms, minimum_hours, visits):
    """In force for exactly one hour of a stay, wherever in the step that hour lies."""
    opens_ms = START_MS + offset_ms
    zone = Zone(box(0, 0, 1, 1).shape, opens_ms, opens_ms + HOUR_MS)
    row = only_row(track_of([0.5, 0.5], [0.5, 0.5], 5.0, step_ms=6 * HOUR_MS), zone, minimum_stay_hours=minimum_hours)
    assert row.visits == visits


def test_a_stay_across_the_turn_of_a_month_is_counted_in_both():
    """40 minutes before and 40 after midnight: one stay of 80 minutes, a visit in each month; apart, none."""
    turn_ms = local_date_ms("2026-02-01", "UTC")
    time_ms = turn_ms + np.array([-90, -41, -40, 40, 41, 90]) * 60_000
    track = track_of([5.0, 5.0, 0.5, 0.5, 5.0, 5.0], [0.5] * 6, 1.0, time_ms=time_ms)
    zone = box(0, 0, 1, 1)
    visits = {row.month: row.visits for row in rows_of(track, [zone], minimum_stay_hours=1.25).rows}
    assert visits == {"2026-01": 1, "2026-02": 1}
    visits = {row.month: row.visits for row in rows_of(track, [zone], minimum_stay_hours=1.5).rows}
    assert visits == {"2026-01": 0, "2026-02": 0}
