"""Reading zone use in pages, with the zeros that are not stored."""

import pytest

from service.store.database import DEFAULT_PROGRAMME
from service.store.zone_use_reading import ZoneUseFilter, touched_current, zone_use_page
from tests.service.recompute.computing import publish_all, rows
from tests.service.store.sent import describe, put, send, square, walk, zone


@pytest.fixture
def filled(store):
    """Three animals over three months; zones at home, far away, seasonal, and one that changed."""
    put(store, "home", zone(square(-0.05, -0.05)))
    put(store, "far", zone(square(40.0, 40.0)))
    put(store, "winter", zone(square(60.0, 40.0), season="12-10/02-28"))
    put(store, "moved", zone(square(-0.05, -0.05), None))
    put(store, "moved", zone(square(0.0, 0.0), "2023-12-16"))
    for seed, name in enumerate(("a", "b", "c")):
        send(store, walk(name, 24 * 60, seed))
    describe(store, "b", groups=["north"])
    publish_all(store)
    return store


def _key(row):
    return row.animal, row.month, row.zone, row.zone_version


def test_rows_are_in_order_and_complete(filled):
    """Every zone version has a row in every month in which it was in force for a part of the tracked time."""
    months = {"2023-11": ["far", "home", "moved"], "2023-12": ["far", "home", "moved", "moved", "winter"]}
    months["2024-01"] = ["far", "home", "moved", "winter"]
    found = rows(filled)
    assert [_key(row)[:3] for row in found] == [(a, m, z) for a in "abc" for m in sorted(months) for z in months[m]]
    assert [_key(row) for row in found] == sorted(_key(row) for row in found)


def test_row_left_out_of_the_store_is_a_zero(filled):
    """A zone out of reach has a row that says zero, with the month's own hours."""
    row = rows(filled, animal="a", zone="far")[1]
    assert (row.figures.probability_mass, row.figures.time_fraction, row.figures.visits) == (0.0, 0.0, 0)
    assert row.figures.in_force_hours == row.facts.tracked_hours == 31 * 24


def test_zone_in_force_for_a_part_says_so(filled):
    """The seasonal zone is judged on its part of the month only."""
    row = rows(filled, animal="a", zone="winter", month_to="2023-12")[0]
    assert row.figures.in_force_hours == 22 * 24
    assert row.figures.probability_mass == 0.0


@pytest.mark.parametrize("limit", [1, 2, 5, 7, 100])
@pytest.mark.parametrize("wanted", [{}, {"zone": "moved"}, {"group": "north"}, {"nonzero": True}, {"animal": "c"}])
def test_pages_join_to_the_whole(filled, limit, wanted):
    """Whatever the page size, pages after the last place of each other hold every row once."""
    found, after = [], None
    with filled.read() as connection:
        while page := zone_use_page(connection, DEFAULT_PROGRAMME, ZoneUseFilter(**wanted), after, limit):
            found += page
            after = _key(page[-1])
    assert found == rows(filled, **wanted) != []


def test_filters(filled):
    """Each filter leaves exactly the rows that it names."""
    everything = rows(filled)
    assert rows(filled, animal="b") == rows(filled, group="north") == [row for row in everything if row.animal == "b"]
    assert rows(filled, zone="moved") == [row for row in everything if row.zone == "moved"]
    assert rows(filled, month_from="2023-12", month_to="2023-12") == [
        row for row in everything if row.month == "2023-12"
    ]
    used = [row for row in everything if row.figures.probability_mass or row.figures.time_fraction]
    assert rows(filled, nonzero=True) == used
    assert 0 < len(used) < len(everything)


def test_time_that_nobody_knows_is_not_left_out_as_zero(store):
    """A month without covered time is neither zero nor use."""
    put(store, "home", zone(square(-0.05, -0.05)))
    describe(store, "lost", deployments=[{"start": "2023-11-01", "end": "2023-12-01", "tag": None}])
    publish_all(store)
    [row] = rows(store, nonzero=True)
    assert (row.animal, row.month, row.figures.probability_mass) == ("lost", "2023-11", None)


def test_current_is_asked_of_what_the_filter_touches(filled):
    """A new fix of one animal leaves the answers about others current; a zone touches all."""

    def current(**wanted):
        with filled.read() as connection:
            return touched_current(connection, DEFAULT_PROGRAMME, ZoneUseFilter(**wanted))

    assert current()
    send(filled, walk("a", 24 * 60 + 1, 0))
    assert (current(), current(animal="a"), current(animal="b"), current(group="north")) == (False, False, True, True)
    put(filled, "new", zone(square(1.0, 1.0)))
    assert not current(animal="b")
    publish_all(filled)
    assert current()


def test_corrected_zone_is_answered_as_published_until_computed(filled):
    """Between a correction and its computation the published rows stand, with the version they were computed for."""
    before = rows(filled, zone="home")
    put(filled, "home", zone(square(0.02, 0.02)))
    assert rows(filled, zone="home") == before
    publish_all(filled)
    assert {row.zone_version for row in rows(filled, zone="home")} == {2}
