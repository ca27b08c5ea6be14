"""Which animals are computed next, and what becomes of those that fail."""

from sqlalchemy import text

from service.store.staleness import FIRST_RETRY_S, record_failure
from tests.service.recompute.computing import LATE_MS, publish_all, stale, state
from tests.service.store.sent import put, send, square, walk, zone


def _names(store, now_ms=LATE_MS):
    return [animal.identifier for animal in stale(store, now_ms)]


def _fail(store, animal):
    with store.write("failure") as tx:
        record_failure(tx, animal.animal_id, tx.commit_no - 1, "some_code", "some message")


def _failed_at_ms(store):
    return state(store)["failed"][0]["failed_at_ms"]


def test_longest_waiting_is_first(store):
    """The order is that of the first change that is not published, however often an animal changes after it."""
    for name in ("a", "b", "c"):
        send(store, walk(name, 3))
    send(store, walk("a", 4))
    assert _names(store) == ["a", "b", "c"]
    publish_all(store)
    send(store, walk("c", 4))
    send(store, walk("b", 4))
    send(store, walk("c", 5))
    assert _names(store) == ["c", "b"]


def test_zone_makes_all_animals_wait(store):
    """A new zone concerns every animal; one that had waited before is still first."""
    for name in ("a", "b"):
        send(store, walk(name, 3))
    publish_all(store)
    send(store, walk("b", 4))
    put(store, "reserve", zone(square(0.0, 0.0)))
    assert _names(store) == ["b", "a"]


def test_status_counts(store):
    """Pending animals and the age of the oldest change; nothing pending once all is published."""
    assert state(store) == {"current": True, "animals": 0, "pending": 0, "oldest_stale_s": None, "failed": []}
    send(store, walk("a", 3))
    with store.write("settings") as tx:
        tx.connection.execute(text("UPDATE store_commit SET at_ms = at_ms - 5000 WHERE kind = 'tracks'"))
    found = state(store)
    assert (found["current"], found["animals"], found["pending"]) == (False, 1, 1)
    assert 5.0 <= found["oldest_stale_s"] < 60.0


def test_failed_animal_waits_longer_after_each_failure(store):
    """After each failure in a row the next try comes twice as late."""
    send(store, walk("a", 3))
    [animal] = stale(store)
    for attempt in range(3):
        _fail(store, animal)
        failed_at_ms, wait_ms = _failed_at_ms(store), 1000 * FIRST_RETRY_S * 2**attempt
        assert _names(store, failed_at_ms + wait_ms - 1) == []
        assert _names(store, failed_at_ms + wait_ms) == ["a"]
    [failure] = state(store)["failed"]
    assert (failure["animal"], failure["code"], failure["attempts"]) == ("a", "some_code", 3)
    assert not state(store)["current"]


def test_failed_animal_is_tried_at_once_when_its_input_changes(store):
    """New fixes, a new zone or a new version of the estimates end the waiting."""
    send(store, walk("a", 3))
    [animal] = stale(store)
    _fail(store, animal)
    assert _names(store, _failed_at_ms(store)) == []
    send(store, walk("a", 4))
    assert _names(store, _failed_at_ms(store)) == ["a"]
    _fail(store, animal)
    assert _names(store, _failed_at_ms(store)) == []
    put(store, "reserve", zone(square(0.0, 0.0)))
    assert _names(store, _failed_at_ms(store)) == ["a"]


def test_new_version_of_the_estimates_ends_the_waiting(store, monkeypatch):
    """What failed with the old code is tried with the new one."""
    send(store, walk("a", 3))
    _fail(store, stale(store)[0])
    assert _names(store, _failed_at_ms(store)) == []
    monkeypatch.setattr("service.store.staleness.ESTIMATES_VERSION", 10**6)
    assert _names(store, _failed_at_ms(store)) == ["a"]


def test_failure_is_forgotten_once_published(store):
    """A published animal has no failure."""
    send(store, walk("a", 3))
    _fail(store, stale(store)[0])
    publish_all(store)
    assert state(store)["failed"] == []
