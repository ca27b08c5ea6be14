"""Computing and publishing in the test's own process, as the reconciler does in workers."""

import time

from sqlalchemy import text

from service.recompute.task import compute_animal
from service.recompute.task_reading import TaskReader
from service.store.database import DEFAULT_PROGRAMME
from service.store.publications import publish
from service.store.staleness import stale_animals, status
from service.store.zone_use_reading import ZoneUseFilter, zone_use_page

LATE_MS = 2**60


def read_task(store, animal):
    with store.read() as connection:
        return TaskReader().read(connection, animal)


def computed(task):
    return task.to_publish(compute_animal(task.sent))


def stale(store, now_ms=LATE_MS):
    with store.read() as connection:
        return stale_animals(connection, now_ms, 100)


def publish_all(store):
    """Compute and publish every stale animal."""
    for animal in stale(store):
        ready = computed(read_task(store, animal))
        with store.write("publication") as tx:
            publish(tx, ready)


def rows(store, limit=10_000, **wanted):
    with store.read() as connection:
        return zone_use_page(connection, DEFAULT_PROGRAMME, ZoneUseFilter(**wanted), None, limit)


def row_versions(store):
    with store.read() as connection:
        months = connection.execute(text("SELECT * FROM animal_month")).all()
        uses = connection.execute(text("SELECT * FROM zone_use")).all()
    return {tuple(row) for row in months} | {tuple(row) for row in uses}


def state(store):
    with store.read() as connection:
        return status(connection)


def wait_until(condition, seconds=60.0):
    """Wait for a condition; fail after some seconds."""
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end, "waited in vain"
        time.sleep(0.02)
