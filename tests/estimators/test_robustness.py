"""Hard tracks: no time, one fix, gaps, poles, the seam, antipodes, errors of any size."""

import numpy as np
import pytest

from estimators import (
    Track,
)
from tests.estimators.hard_cases import (
    DAY_MS,
    HOUR_MS,
    corners,
    fixed_variance,
    needle_track,
    only_row,
    rows_of,
    track_of,
    zone_of,
)
from tests.estimators.simulated import START_MS, box


def test_one_fix_has_no_covered_time():
    """Tracked months without a step: nothing is known, and no figure is made up."""
    use = rows_of(track_of([0.5], [0.5], 10.0), [box(0, 0, 1, 1)], [(START_MS - DAY_MS, START_MS + DAY_MS)])
    assert [(m.month, m.covered_hours, m.fixes) for m in use.months] == [("2025-12", 0.0, 0), ("2026-01", 0.0, 1)]
    assert all(facts.outside_row(0).probability_mass is None for facts in use.months)
    assert all(row.probability_mass is None and row.time_fraction is None for row in use.rows)


@pytest.mark.parametrize("tracked", [[], [(START_MS, START_MS)]], ids=["none", "empty"])
def test_no_tracked_time_is_no_row(tracked):
    """No deployment, and one that ended as it began."""
    use = rows_of(track_of([0.5, 0.5], [0.5, 0.5], 10.0), [box(0, 0, 1, 1)], tracked)
    assert (use.months, use.rows) == ((), ())


def test_no_fix_at_all():
    """All fixes withdrawn, a deployment left: months without covered time, no row that claims anything."""
    empty = Track.from_fixes(np.empty(0, np.int64), np.empty(0), np.empty(0), np.empty((0, 3)), np.empty(0, bool))
    use = rows_of(empty, [box(0, 0, 1, 1)], [(START_MS, START_MS + DAY_MS)])
    assert all(facts.covered_hours == 0.0 and facts.fixes == 0 for facts in use.months)
    assert all(row.probability_mass is None for row in use.rows)


def test_two_identical_fixes():
    """No movement seen: all inside a large zone, half inside one whose edge runs through the place."""
    track = track_of([0.5, 0.5], [0.5, 0.5], 10.0)
    rows = rows_of(track, [box(-9, -9, 10, 10), box(0.5, -9, 9, 9)], parameters=fixed_variance(0.01)).rows
    assert rows[0].probability_mass == pytest.approx(1.0, abs=1e-6)
    assert rows[1].probability_mass == pytest.approx(0.5, abs=1e-6)
    assert 0.9 < only_row(track, box(-9, -9, 10, 10)).probability_mass <= 1.0


def test_a_huge_gap_is_not_known():
    """Two hours known, 40 days not, two hours known: coverage, longest gap and the mass speak of the four hours."""
    time_ms = START_MS + np.array([0, 1, 2, 962, 963, 964]) * HOUR_MS
    track = track_of([0.5, 0.5, 0.5, 5.5, 5.5, 5.5], [0.5] * 6, 10.0, time_ms=time_ms)
    use = rows_of(track, [box(0, 0, 1, 1), box(5, 0, 6, 1)])
    assert [(m.month, m.covered_hours, m.longest_gap_hours) for m in use.months] == [
        ("2026-01", 2.0, 742.0),
        ("2026-02", 2.0, 218.0),
    ]
    masses = {(row.zone_index, row.month): row.probability_mass for row in use.rows}
    assert masses[0, "2026-01"] == pytest.approx(1.0, abs=1e-6)
    assert masses[1, "2026-02"] == pytest.approx(1.0, abs=1e-6)
    assert masses.get((0, "2026-02"), 0.0) == 0.0


def test_a_gap_of_exactly_the_longest_is_bridged():
    """24 h are bridged, one millisecond more is not."""
    for extra, covered in ((0, 24.0), (1, 0.0)):
        track = track_of([0.5, 0.5], [0.5, 0.5], 10.0, step_ms=DAY_MS + extra)
        assert rows_of(track, []).months[0].covered_hours == covered


def test_fixes_at_the_pole_have_no_longitude():
    """Whatever longitude a fix at the pole is given, the answer is the same."""
    zone = zone_of(corners(-30, 89.99, 100, 90))
    rows = [
        only_row(track_of([lon, 0.0, lon, 40.0], [90.0, 89.98, 90.0, 89.985], 300.0), zone)
        for lon in (0.0, 77.0, 180.0, -123.4)
    ]
    assert 0.05 < rows[0].probability_mass < 0.95
    for row in rows[1:]:
        assert row.probability_mass == pytest.approx(rows[0].probability_mass, abs=1e-6)
        assert row.time_fraction == pytest.approx(rows[0].time_fraction, abs=1e-6)


def test_fixes_on_180_and_on_minus_180_are_the_same():
    """The seam has two names."""
    zone = zone_of(corners(179.998, -1, 180.001, 1))
    signs = [(180.0, 180.0, 180.0), (-180.0, -180.0, -180.0), (180.0, -180.0, 180.0)]
    rows = [only_row(track_of([*lon, 179.995], [0.0, 0.001, 0.003, 0.0], 200.0), zone) for lon in signs]
    assert 0.05 < rows[0].probability_mass < 0.95
    assert all(vars(row) == vars(rows[0]) for row in rows)


def test_antipodal_steps():
    """Half-way round the globe in an hour: hemispheres share it, both poles' way may be taken, nothing fails."""
    track = track_of([10.0, -170.0, 10.0], [20.0, -20.0, 20.0], 100.0)
    east, west = zone_of(corners(-180, -90, 10, 90)), zone_of(corners(10, -90, 180, 90))
    use = rows_of(track, [east, west], parameters=fixed_variance(10.0), estimator="brownian_bridge")
    rows = {row.zone_index: row for row in use.rows}
    assert sum(row.probability_mass for row in rows.values()) == pytest.approx(1.0, abs=2e-6)
    assert sum(row.time_fraction for row in rows.values()) == pytest.approx(1.0, abs=1e-6)


@pytest.mark.parametrize("sd_m", [1e-3, 1.0, 1e3, 5e4, 5e5])
def test_error_of_any_size(sd_m):
    """From 1 mm to 500 km: stays a probability, zone + rest of a large box = box, error as stated."""
    track = track_of([10.0, 10.01, 10.0, 9.99], [45.0, 45.01, 45.02, 45.0], sd_m)
    inner = corners(9.997, 44.998, 10.006, 45.013)
    zones = [zone_of(inner), zone_of(corners(-20, 20, 40, 70), inner), zone_of(corners(-20, 20, 40, 70))]
    rows = rows_of(track, zones).rows
    masses = [row.probability_mass for row in rows]
    assert masses[0] + masses[1] == pytest.approx(masses[2], abs=3e-6)
    assert all(0.0 <= mass <= 1.0 for mass in masses)
    assert all(row.numerical_error <= 1e-6 for row in rows)
    assert sum(row.time_fraction for row in rows[:2]) == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize("semi_minor_m", [100.0, 1.0, 0.01])
def test_needle_shaped_ellipses(semi_minor_m):
    """50 km long, down to a centimetre wide: zone and the rest still share the whole."""
    inner = corners(9.9, 44.9, 10.1, 45.1)
    box_of = [zone_of(inner), zone_of(corners(0, 30, 20, 60), inner), zone_of(corners(0, 30, 20, 60))]
    rows = rows_of(needle_track(semi_minor_m), box_of).rows
    assert rows[0].probability_mass + rows[1].probability_mass == pytest.approx(rows[2].probability_mass, abs=3e-6)
    assert 0.01 < rows[0].probability_mass < 0.99


def test_a_few_fixes_close_together_are_not_called_wide():
    """Three fixes leave the movement variance wide open; its unlikely ends must not flag the row."""
    use = rows_of(track_of([179.95, -179.97, -179.80], [-40.02, -40.01, -40.03], 20.0, step_ms=6 * HOUR_MS), [])
    assert [facts.flags for facts in use.months] == [()]
