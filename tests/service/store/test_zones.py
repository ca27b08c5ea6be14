"""Zones and their versions."""

import pytest

from estimators import local_date_ms
from service.store.database import DEFAULT_PROGRAMME
from service.store.programmes import get_programme
from service.store.zone_history import ZoneHistory
from service.store.zones import ZoneOverlap, get_zone, list_zone_versions, retire_zone
from tests.service.store.sent import put, square, zone

WEST, EAST = square(0.0, 0.0), square(1.0, 0.0)


def _live(store, identifier="reserve"):
    with store.read() as connection:
        return [
            (record.version, record.in_force_from, record.until_ms and record.until_ms)
            for record in get_zone(connection, DEFAULT_PROGRAMME, identifier)
        ]


def _ms(date):
    return local_date_ms(date, "UTC")


def test_same_zone_again_is_no_change(store):
    """The same feature again changes nothing; another name is a new version in its place."""
    assert put(store, "reserve", zone(WEST))
    assert not put(store, "reserve", zone(WEST))
    assert put(store, "reserve", zone(WEST, name="Reserve"))
    assert _live(store) == [(2, None, None)]


def test_later_version_ends_the_earlier_one_there(store):
    """Two versions follow each other; correcting the earlier one leaves the later one and its beginning."""
    put(store, "reserve", zone(WEST))
    put(store, "reserve", zone(EAST, "2024-03-01"))
    assert _live(store) == [(1, None, _ms("2024-03-01")), (2, "2024-03-01", None)]
    put(store, "reserve", zone(square(0.5, 0.0)))
    assert _live(store) == [(3, None, _ms("2024-03-01")), (2, "2024-03-01", None)]


def test_own_end_counts_where_it_comes_first(store):
    """A version that ends before the next begins leaves a time without any."""
    put(store, "reserve", zone(WEST, "2023-01-01", "2023-06-01"))
    put(store, "reserve", zone(EAST, "2024-01-01", "2025-01-01"))
    assert [row[2] for row in _live(store)] == [_ms("2023-06-01"), _ms("2025-01-01")]


@pytest.mark.parametrize(("begins", "ends"), [(None, None), ("2023-01-01", None), ("2023-01-01", "2024-03-02")])
def test_version_that_reaches_into_a_later_one_is_refused(store, begins, ends):
    """An earlier version may not reach into a later one; nothing is stored."""
    put(store, "reserve", zone(WEST, "2024-03-01"))
    with pytest.raises(ZoneOverlap, match="overlaps version 1, in force from 2024-03-01"):
        put(store, "reserve", zone(EAST, begins, ends))
    assert _live(store) == [(1, "2024-03-01", None)]
    assert put(store, "reserve", zone(EAST, begins, "2024-03-01"))


def test_retired_zone_is_gone_and_can_come_back(store):
    """A retired zone has no live version; a new one goes on counting."""
    put(store, "reserve", zone(WEST))
    with store.write("zone") as tx:
        assert retire_zone(tx, DEFAULT_PROGRAMME, "reserve")
        assert not retire_zone(tx, DEFAULT_PROGRAMME, "reserve")
    assert _live(store) == []
    put(store, "reserve", zone(WEST))
    assert _live(store) == [(2, None, None)]


def test_zones_are_listed_in_pages(store):
    """Pages by zone and version join to the whole."""
    for name in ("b", "a"):
        put(store, name, zone(WEST))
        put(store, name, zone(EAST, "2024-03-01"))
    with store.read() as connection:
        found, after = [], ("", 0)
        while page := list_zone_versions(connection, DEFAULT_PROGRAMME, after, 3):
            found += [(record.zone, record.version) for record in page]
            after = found[-1]
    assert found == [("a", 1), ("a", 2), ("b", 1), ("b", 2)]


def test_history_tells_what_was_live_at_any_commit(store):
    """After each change the versions of that moment are found again, with the ends they had then."""
    put(store, "reserve", zone(WEST))
    put(store, "reserve", zone(EAST, "2024-03-01"))
    put(store, "reserve", zone(square(0.5, 0.0)))
    with store.read() as connection:
        owner = get_programme(connection, DEFAULT_PROGRAMME)
        history = ZoneHistory(connection, owner)
        last = owner.zones_revision
    found = [[(times.version, times.until_ms) for times in history.at(last - back)] for back in (0, 1, 2, 3)]
    cut = _ms("2024-03-01")
    assert found == [[(2, None), (3, cut)], [(1, cut), (2, None)], [(1, None)], []]


def test_in_force_by_date_and_season(store):
    """A seasonal zone with dates is in force inside both, across New Year."""
    put(store, "reserve", zone(WEST, "2023-12-01", "2025-01-01", season="11-15/02-29"))
    with store.read() as connection:
        owner = get_programme(connection, DEFAULT_PROGRAMME)
        history = ZoneHistory(connection, owner)
    in_force = {
        day: bool(history.in_force(owner.zones_revision, _ms(day)))
        for day in ("2023-11-20", "2023-12-01", "2024-02-29", "2024-03-01", "2024-12-31", "2025-01-01")
    }
    assert in_force == {
        "2023-11-20": False,
        "2023-12-01": True,
        "2024-02-29": True,
        "2024-03-01": False,
        "2024-12-31": True,
        "2025-01-01": False,
    }
