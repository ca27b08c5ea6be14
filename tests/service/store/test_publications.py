"""Publications and their row versions."""

from dataclasses import replace

from sqlalchemy import select

from service.store import publications, schema
from service.store.publications import publish
from tests.service.recompute.computing import computed, publish_all, read_task, row_versions, rows, stale, state
from tests.service.store.sent import HOUR_MS, START_MS, describe, put, send, square, walk, zone


def _publish(store, ready):
    with store.write("publication") as tx:
        return publish(tx, ready)


def test_published_animal_is_current(store):
    """An animal is stale until its rows are published, and again after a change."""
    send(store, walk("seal", 50))
    assert [animal.identifier for animal in stale(store)] == ["seal"]
    publish_all(store)
    assert stale(store) == []
    send(store, walk("seal", 51))
    assert len(stale(store)) == 1


def test_unchanged_rows_keep_their_version(store):
    """Late fixes of one month open no new version of another month's rows."""
    put(store, "reserve", zone(square(-0.05, -0.05)))
    two_months = walk("seal", 24 * 40)
    send(store, two_months)
    publish_all(store)
    send(store, [("seal", "", START_MS + 24 * 40 * HOUR_MS, 0.0, 0.0, 30.0)])
    publish_all(store)
    with store.read() as connection:
        table = schema.animal_month
        versions = connection.execute(
            select(table.c.month, table.c.from_publication, table.c.until_publication).order_by(
                table.c.month, table.c.from_publication
            )
        ).all()
    assert [tuple(version) for version in versions] == [("2023-11", 1, None), ("2023-12", 1, 2), ("2023-12", 2, None)]


def test_zone_far_away_leaves_all_row_versions(store):
    """A new zone that no track comes near changes no stored row, but the rows are current for it."""
    put(store, "reserve", zone(square(-0.05, -0.05)))
    send(store, walk("seal", 100))
    publish_all(store)
    before = row_versions(store)
    put(store, "elsewhere", zone(square(40.0, 40.0)))
    assert {row.zone for row in rows(store)} == {"reserve"}, "not computed yet: no row, rather than a zero"
    publish_all(store)
    assert row_versions(store) == before
    first = rows(store)[0]
    assert (first.zone, first.figures.probability_mass) == ("elsewhere", 0.0)


def test_nothing_relevant_changed_makes_no_publication(store):
    """An attribute that no figure depends on makes the animal current again without a new publication."""
    send(store, walk("seal", 50))
    publish_all(store)
    describe(store, "seal", species="grey seal")
    assert len(stale(store)) == 1
    publish_all(store)
    assert stale(store) == []
    with store.read() as connection:
        assert connection.execute(select(schema.publication.c.id)).scalars().all() == [1]


def test_older_result_does_not_replace_a_newer_one(store):
    """A result of an older state of the store that comes late is dropped."""
    send(store, walk("seal", 50))
    [animal] = stale(store)
    old = computed(read_task(store, animal))
    send(store, walk("seal", 60))
    assert _publish(store, computed(read_task(store, animal)))
    before = row_versions(store)
    assert not _publish(store, old)
    assert row_versions(store) == before


def test_overtaken_result_is_published_and_stays_stale(store):
    """A result that was overtaken while it was computed is better than none, and the animal waits again."""
    send(store, walk("seal", 50))
    [animal] = stale(store)
    overtaken = computed(read_task(store, animal))
    send(store, walk("seal", 60))
    assert _publish(store, overtaken)
    with store.read() as connection:
        assert connection.execute(select(schema.animal_month.c.fixes)).scalar_one() == 50
    assert len(stale(store)) == 1


def test_new_version_of_the_estimates_makes_all_stale(store, monkeypatch):
    """Rows of another version of the estimates are computed again, and replace those of the same snapshot."""
    send(store, walk("seal", 50))
    publish_all(store)
    for module in ("service.store.staleness", "service.store.publications"):
        monkeypatch.setattr(f"{module}.ESTIMATES_VERSION", publications.ESTIMATES_VERSION + 1)
    assert len(stale(store)) == 1
    publish_all(store)
    assert stale(store) == []


def test_animal_without_tracked_time_becomes_current(store):
    """One fix only, or none: no row, no failure, current."""
    put(store, "reserve", zone(square(-0.05, -0.05)))
    send(store, walk("seal", 1))
    describe(store, "fox", species="arctic fox")
    publish_all(store)
    assert rows(store) == []
    assert state(store)["current"]


def test_same_snapshot_is_published_once(store):
    """Publishing a result twice changes nothing the second time."""
    send(store, walk("seal", 50))
    [animal] = stale(store)
    ready = computed(read_task(store, animal))
    assert _publish(store, ready)
    assert not _publish(store, replace(ready, digest="other"))
