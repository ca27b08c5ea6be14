"""What goes out."""

import csv
import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from estimators import MonthFacts, ZoneMonth
from service.store.zone_use_reading import StoredRow
from service.writers.csv_cells import FORMULA_SIGNS, csv_bytes
from service.writers.instants import utc_text
from service.writers.summary import ZoneSummary
from service.writers.zone_use_rows import ROW_FIELDS, bounds_of, zone_use_row


def stored(mass: float | None, fraction: float | None, *, animal: str = "a", covered: float = 300.0) -> StoredRow:
    facts = MonthFacts("2026-03", 0, 10, 744.0, covered, 30.0, ("assumed_error",))
    error = None if mass is None else 1e-9
    figures = ZoneMonth(0, "2026-03", 10, 600.0, 600.0, covered, 30.0, mass, error, fraction, 75.0, 2)
    return StoredRow(animal, "z", 3, "2026-03", "random_walk", facts, figures, facts.flags)


def test_a_row_says_what_is_stored_and_what_follows_from_it():
    row = zone_use_row(stored(0.5, 0.25), "default")
    assert tuple(row) == ROW_FIELDS
    assert row["coverage"] == 0.5
    assert row["expected_hours"] == 150.0
    assert row["bounds"] == row["path_bounds"] == [0.125, 0.625]
    assert (row["inside_interval"], row["use_probability"]) == (None, None)
    assert (row["distribution"], row["flags"]) == ("occurrence", ["assumed_error"])


def test_without_covered_time_nothing_is_known_and_the_bounds_say_so():
    row = zone_use_row(stored(None, None, covered=0.0), "default")
    assert row["coverage"] == 0.0
    assert [row[n] for n in ("probability_mass", "numerical_error", "expected_hours", "time_fraction")] == [None] * 4
    assert row["bounds"] == [0.0, 1.0]


@given(st.floats(0.0, 1.0), st.floats(0.0, 1.0))
def test_bounds_hold_every_answer_that_the_gaps_allow(fraction, coverage):
    low, high = bounds_of(fraction, coverage)
    assert 0.0 <= low <= high <= 1.0
    assert high - low == pytest.approx(1.0 - coverage, abs=2e-9)
    assert low - 1e-9 <= fraction * coverage <= high + 1e-9


@given(st.text(st.characters(codec="utf-8", exclude_categories=["Cc"]), max_size=20))
def test_no_text_cell_begins_like_a_formula_and_others_stay(text):
    [line] = csv.DictReader(io.StringIO(csv_bytes(["cell"], [{"cell": f"{text}."}]).decode()))
    assert not line["cell"].startswith(FORMULA_SIGNS)
    assert line["cell"].removeprefix("'").removeprefix("'") == f"{text}.".removeprefix("'").removeprefix("'")


def test_numbers_are_never_guarded_and_nothing_is_an_empty_cell():
    cells = {"number": -1.5, "none": None, "pair": [-0.5, 1.0], "flags": ["=a", "b"], "empty": [], "yes": True}
    [line] = csv.DictReader(io.StringIO(csv_bytes(list(cells), [cells]).decode()))
    assert line == {
        "number": "-1.5", "none": "", "pair": "[-0.5,1.0]", "flags": "'=a;b", "empty": "", "yes": "true",
    }  # fmt: skip


def test_a_summary_counts_the_animals_and_weighs_them_alike():
    summary = ZoneSummary()
    summary.add([stored(0.4, 0.5), stored(0.1, 0.0, animal="b"), stored(0.0, 0.0, animal="c"), stored(None, None)])
    [row] = summary.rows("default", "z")
    assert (row["animals_tracked"], row["animals_with_covered_time"], row["animals_using"]) == (4, 3, 2)
    assert row["mean_probability_mass"] == pytest.approx(0.5 / 3, abs=1e-9)
    assert (row["minimum_time_fraction"], row["maximum_time_fraction"]) == (0.0, 0.5)


def test_a_summary_of_animals_without_covered_time_knows_no_mean():
    summary = ZoneSummary()
    summary.add([stored(None, None)])
    [row] = summary.rows("default", "z")
    assert (row["animals_tracked"], row["animals_with_covered_time"], row["animals_using"]) == (1, 0, 0)
    assert row["mean_probability_mass"] is None


def test_a_mass_within_its_numerical_error_is_no_use():
    summary = ZoneSummary()
    summary.add([stored(5e-10, 0.0)])
    assert summary.rows("default", "z")[0]["animals_using"] == 0


def test_instants_are_utc_with_milliseconds_where_there_are_any():
    assert utc_text(0) == "1970-01-01T00:00:00Z"
    assert utc_text(-1) == "1969-12-31T23:59:59.999Z"
    assert utc_text(None) is None
