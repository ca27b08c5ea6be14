"""Tracked time and counted fixes."""

import numpy as np

from service.recompute.deployments import tracked_time

DAY_MS = 86_400_000
TIME_MS = np.arange(10, dtype=np.int64) * DAY_MS
NO_TAG = np.zeros(10, dtype=np.int64)


def _tracked(deployments=(), window_hours=None, tag=NO_TAG, tag_names=("",), time_ms=TIME_MS, zone="UTC", told_day=999):
    attributes = {"deployments": list(deployments), "post_release_window_hours": window_hours}
    spans, counted, implied = tracked_time(attributes, tag, tag_names, time_ms, zone, told_day * DAY_MS)
    return [(start / DAY_MS, end / DAY_MS) for start, end in spans], np.nonzero(counted)[0].tolist(), implied


def _deployment(start, end=None, tag=None):
    return {"start": start, "end": end, "tag": tag}


def test_implied_deployment():
    """Without any deployment all fixes count, from the first to the last."""
    assert _tracked() == ([(0.0, 9.0)], list(range(10)), True)


def test_no_or_one_fix_has_no_tracked_time():
    """A single fix has no extent in time."""
    assert _tracked(time_ms=TIME_MS[:1], tag=NO_TAG[:1]) == ([], [0], True)
    assert _tracked(time_ms=TIME_MS[:0], tag=NO_TAG[:0]) == ([], [], True)


def test_closed_deployment():
    """A stated end ends the tracked time, with or without fixes, and does not belong to it."""
    assert _tracked([_deployment("1970-01-03", "1970-01-05")]) == ([(2.0, 4.0)], [2, 3], False)
    assert _tracked([_deployment("1970-01-09", "1970-01-20")]) == ([(8.0, 19.0)], [8, 9], False)


def test_deployment_that_ends_in_the_future_is_tracked_until_the_animal_was_last_told_of():
    """What a tag will do next year is not known today, and no row speaks of it."""
    assert _tracked([_deployment("1970-01-09", "1970-01-20")], told_day=12) == ([(8.0, 12.0)], [8, 9], False)
    assert _tracked([_deployment("1970-01-15", "1970-01-20")], told_day=12) == ([], [], False)


def test_open_deployment_ends_at_its_last_fix():
    """Without an end the last fix is the end; without a fix there is no time."""
    assert _tracked([_deployment("1970-01-03")]) == ([(2.0, 9.0)], list(range(2, 10)), False)
    assert _tracked([_deployment("1971-01-01")]) == ([], [], False)


def test_deployment_of_a_tag_counts_fixes_of_that_tag():
    """Fixes of another tag do not count in it, and do not end it."""
    tag = np.array([0] * 5 + [1] * 5)
    one = _tracked([_deployment("1970-01-02", None, "A")], tag=tag, tag_names=("A", "B"))
    assert one == ([(1.0, 4.0)], [1, 2, 3, 4], False)
    both = _tracked(
        [_deployment("1970-01-02", None, "A"), _deployment("1970-01-07", None, "B")], tag=tag, tag_names=("A", "B")
    )
    assert both == ([(1.0, 4.0), (6.0, 9.0)], [1, 2, 3, 4, 6, 7, 8, 9], False)


def test_post_release_window():
    """The time after each release is not tracked; the fixes in it still say where the animal came from."""
    spans, counted, _ = _tracked([_deployment("1970-01-02", "1970-01-05"), _deployment("1970-01-07")], 36.0)
    assert spans == [(2.5, 4.0), (7.5, 9.0)]
    assert counted == [1, 2, 3, 6, 7, 8, 9]


def test_window_longer_than_the_deployment_leaves_nothing():
    """A deployment shorter than the window has no tracked time."""
    assert _tracked([_deployment("1970-01-02", "1970-01-03")], 48.0)[0] == []


def test_dates_are_local():
    """A date is midnight in the reporting time zone."""
    assert _tracked([_deployment("1970-01-02", "1970-01-03")], zone="Etc/GMT-12")[0] == [(0.5, 1.5)]
