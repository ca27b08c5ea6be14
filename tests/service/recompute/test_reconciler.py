"""The reconciler publishes everything, whatever happens on the way."""

import multiprocessing
import os
import signal
import time
from dataclasses import replace

import numpy as np
import pytest

from service.readers.fix_rows import ReadOutcome
from service.recompute.reconciler import Reconciler
from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.publications import publish
from service.store.submissions import record_tracks
from tests.service.recompute.computing import publish_all, rows, stale, state, wait_until
from tests.service.store.sent import SD_M, chunk, payload, put, send, square, walk, zone


@pytest.fixture
def reconciler(store, settings):
    made = Reconciler(store, settings)
    yield made
    made.stop()


def _fill(store, animals=4, fixes=24 * 20):
    put(store, "reserve", zone(square(-0.05, -0.05)))
    for seed in range(animals):
        send(store, walk(f"animal-{seed}", fixes, seed))


def _send_unusable(store, animal):
    """A fix with an error that no reader lets through."""
    bad = chunk([(animal, "", 0, 0.0, 0.0, 1.0), (animal, "", 1000, 0.0, 0.0, 1.0)])
    bad = replace(bad, covariance_m2=-np.ones((2, 3)), error_kind=np.full(2, SD_M, np.int8))
    record_tracks(store, DEFAULT_PROGRAMME, payload(), [bad], ReadOutcome(lambda _rows: None))


def _workers():
    return [process.pid for process in multiprocessing.active_children()]


def test_publishes_the_same_as_without_workers(store, settings, tmp_path, reconciler):
    """What the workers compute is what the task computes in this process."""
    _fill(store)
    reconciler.start()
    wait_until(lambda: state(store)["current"])
    other = Store.open(replace(settings, data=tmp_path / "other"))
    _fill(other)
    publish_all(other)
    found = rows(store)
    assert found == rows(other)
    assert {row.animal for row in found} == {f"animal-{seed}" for seed in range(4)}
    other.close()


def test_later_writes_are_published_after_notice(store, reconciler):
    """A fix that comes later is in the rows soon after the notice."""
    _fill(store, animals=1)
    reconciler.start()
    wait_until(lambda: state(store)["current"])
    send(store, walk("animal-0", 24 * 20 + 1, 0))
    reconciler.notify()
    wait_until(lambda: state(store)["current"])
    assert sum(row.facts.fixes for row in rows(store)) == 24 * 20 + 1


@pytest.mark.parametrize("kills", [1, 3])
def test_killed_workers_lose_nothing(store, settings, kills):
    """Workers killed while they compute: the pool is made anew, and every animal is published in the end."""
    _fill(store, animals=12, fixes=24 * 200)
    reconciler = Reconciler(store, replace(settings, workers=2))
    reconciler.start()
    try:
        for _ in range(kills):
            wait_until(lambda: reconciler.progress["computing"] > 0 and _workers())
            pool = reconciler.progress["rebuilt_pools"]
            os.kill(_workers()[0], signal.SIGKILL)
            wait_until(lambda before=pool: reconciler.progress["rebuilt_pools"] > before)
            send(store, walk("animal-0", 24 * 200 + kills, 0))
        wait_until(lambda: state(store)["current"])
        assert state(store)["failed"] == []
        assert {row.animal for row in rows(store)} == {f"animal-{seed}" for seed in range(12)}
    finally:
        reconciler.stop()


def test_failing_animal_stops_no_other(store, reconciler):
    """An animal that cannot be computed is named with the reason; all others are published."""
    _fill(store, animals=2)
    _send_unusable(store, "broken")
    send(store, walk("later", 30))
    reconciler.start()
    wait_until(lambda: state(store)["pending"] == 1 and state(store)["failed"])
    [failure] = state(store)["failed"]
    assert (failure["animal"], failure["code"]) == ("broken", "bad_error")
    assert "not positive definite" in failure["message"]
    assert {row.animal for row in rows(store)} == {"animal-0", "animal-1", "later"}
    assert [animal.identifier for animal in stale(store)] == ["broken"]


def test_mended_animal_is_published(store, reconciler):
    """Correcting the fix that made an animal fail ends the failure."""
    _send_unusable(store, "broken")
    reconciler.start()
    wait_until(lambda: state(store)["failed"])
    send(store, [("broken", "", 0, 0.0, 0.0, 1.0), ("broken", "", 1000, 0.0, 0.0, 1.0)])
    reconciler.notify()
    wait_until(lambda: state(store)["current"])
    assert state(store)["failed"] == []


def test_overdue_animal_is_named_and_stops_no_other(store, settings):
    """An animal that takes longer than the deadline fails by it; the others are published."""
    send(store, walk("overdue", 200_000))
    put(store, "reserve", zone(square(-0.05, -0.05)))
    send(store, walk("quick", 50))
    reconciler = Reconciler(store, replace(settings, task_deadline_s=1))
    reconciler.start()
    try:
        wait_until(lambda: state(store)["pending"] == 1 and state(store)["failed"])
        [failure] = state(store)["failed"]
        assert (failure["animal"], failure["code"]) == ("overdue", "deadline_exceeded")
        assert {row.animal for row in rows(store)} == {"quick"}
    finally:
        reconciler.stop()


def test_error_of_the_store_does_not_end_recomputation(store, reconciler, monkeypatch):
    """A write that fails once, as on a full disk, is tried again."""
    monkeypatch.setattr("service.recompute.reconciler.PAUSE_AFTER_ERROR_S", 0.05)
    failures = []

    def fail_once(tx, computed):
        if not failures:
            failures.append(computed.animal_id)
            raise OSError("no space left on device")
        return publish(tx, computed)

    monkeypatch.setattr("service.recompute.reconciler.publish", fail_once)
    _fill(store, animals=2)
    reconciler.start()
    wait_until(lambda: state(store)["current"])
    assert len(failures) == 1


def test_stops_at_once(store, settings):
    """Stopping does not wait for what is being computed; no process is left."""
    _fill(store, animals=4, fixes=24 * 200)
    reconciler = Reconciler(store, settings)
    reconciler.start()
    wait_until(lambda: reconciler.progress["computing"] > 0)
    started_s = time.monotonic()
    reconciler.stop()
    assert time.monotonic() - started_s < 5.0
    assert _workers() == []
