"""The reconciler: computes what is stale, publishes it, and survives what goes wrong."""

from __future__ import annotations

import logging
import threading
import time
from collections import deque
from concurrent.futures import BrokenExecutor, Future
from dataclasses import dataclass
from typing import Any

from estimators import EstimatorError
from service.recompute.task import AnimalResult
from service.recompute.task_reading import Task, TaskReader
from service.recompute.worker_pool import WorkerPool
from service.settings import Settings
from service.store.database import Store
from service.store.publications import publish
from service.store.staleness import StaleAnimal, record_failure, stale_animals

LOOK_AGAIN_S = 1.0
PAUSE_AFTER_ERROR_S = 5.0
TASKS_PER_WORKER = 2

log = logging.getLogger("sojourn.recompute")


@dataclass(frozen=True)
class _Running:
    """A task that a worker has, or is next to have; alone where its animal was suspected of killing a worker."""

    task: Task
    started_s: float
    alone: bool


class Reconciler:
    """Keeps published rows up with the store, on a pool of worker processes.

    It looks for stale animals, computes each in a worker and publishes the rows. Nothing is queued: whatever is
    lost on the way is still stale, and found again.

    Parameters
    ----------
    store : Store
    settings : Settings
    """

    def __init__(self, store: Store, settings: Settings) -> None:
        self._store, self._settings = store, settings
        self._reader = TaskReader()
        self._running: dict[Future[AnimalResult], _Running] = {}
        self._suspects: deque[StaleAnimal] = deque()
        self._pool: WorkerPool | None = None
        self._wake = threading.Event()
        self._stopping = False
        self._thread = threading.Thread(target=self._run, name="reconciler", daemon=True)

    def start(self) -> None:
        """Start computing in the background."""
        self._pool = WorkerPool(self._settings.workers, self._settings.task_deadline_s)
        self._thread.start()

    def stop(self) -> None:
        """Stop; what was being computed is computed again after the next start."""
        self._stopping = True
        self._wake.set()
        if self._thread.is_alive():
            self._thread.join()
        if self._pool is not None:
            self._pool.close()

    def notify(self) -> None:
        """Look for stale animals now; called after a write."""
        self._wake.set()

    @property
    def progress(self) -> dict[str, Any]:
        """Members: computing (animals in work), workers, rebuilt_pools."""
        return {
            "computing": len(self._running),
            "workers": self._settings.workers,
            "rebuilt_pools": 0 if self._pool is None else self._pool.rebuilt,
        }

    def _run(self) -> None:
        while not self._stopping:
            try:
                self._step()
                self._wake.wait(LOOK_AGAIN_S)
            except Exception:
                # A full disk must not end recomputation for good: what is stale stays stale.
                log.exception("Recomputation met an error and tries again in %g s.", PAUSE_AFTER_ERROR_S)
                self._wake.wait(PAUSE_AFTER_ERROR_S)

    def _step(self) -> None:
        self._wake.clear()
        done = [future for future in list(self._running) if future.done()]
        broken = [self._running.pop(future) for future in done if isinstance(future.exception(), BrokenExecutor)]
        for future in done:
            if future in self._running:
                self._finish(self._running.pop(future), future)
        if broken:
            self._recover(broken)
        self._fill()

    def _finish(self, running: _Running, future: Future[AnimalResult]) -> None:
        """Publish a result, or note the failure."""
        task, fault = running.task, future.exception()
        if fault is not None:
            code = fault.code if isinstance(fault, EstimatorError) else "internal_error"
            self._note_failure(task, code, f"{fault}" if isinstance(fault, EstimatorError) else repr(fault))
            return
        with self._store.write("publication") as tx:
            publish(tx, task.to_publish(future.result()))

    def _recover(self, broken: list[_Running]) -> None:
        """Make the pool anew after a worker was killed; each task that it may have been runs again alone."""
        lost = [*broken, *self._running.values()]
        self._running.clear()
        for running in lost:
            if running.alone:
                self._blame(running)
            else:
                self._suspects.append(running.task.animal)
        self._rebuild()

    def _blame(self, running: _Running) -> None:
        elapsed_s = time.monotonic() - running.started_s
        if elapsed_s >= self._settings.task_deadline_s:
            deadline_s = self._settings.task_deadline_s
            message = f"Computing took longer than {deadline_s} s. Raise SOJOURN_TASK_DEADLINE_S, or split the animal."
            self._note_failure(running.task, "deadline_exceeded", message)
        else:
            message = "The process that computed this animal ended. Memory may have run out; see the system's log."
            self._note_failure(running.task, "worker_ended", message)

    def _rebuild(self) -> None:
        assert self._pool is not None
        log.warning("A worker process ended unexpectedly; the pool is made anew.")
        self._pool.rebuild()

    def _note_failure(self, task: Task, code: str, message: str) -> None:
        log.warning("Animal %r could not be computed: %s: %s", task.animal.identifier, code, message)
        with self._store.write("failure") as tx:
            record_failure(tx, task.animal.animal_id, task.snapshot_commit_no, code, message)

    def _fill(self) -> None:
        """Give the pool what it can take; suspects one at a time, with nothing beside them."""
        if self._suspects:
            if not self._running:
                self._submit(self._suspects.popleft(), alone=True)
            return
        room = TASKS_PER_WORKER * self._settings.workers - len(self._running)
        if room <= 0:
            return
        busy = {running.task.animal.animal_id for running in self._running.values()}
        with self._store.read() as connection:
            stale = stale_animals(connection, time.time_ns() // 1_000_000, room + len(busy))
        for animal in [animal for animal in stale if animal.animal_id not in busy][:room]:
            self._submit(animal, alone=False)

    def _submit(self, animal: StaleAnimal, *, alone: bool) -> None:
        assert self._pool is not None
        with self._store.read() as connection:
            task = self._reader.read(connection, animal)
        running = _Running(task, time.monotonic(), alone)
        try:
            future = self._pool.submit(task.sent)
        except BrokenExecutor:
            # A worker died idle. Only this task was not given yet; those that were are found broken next time.
            if not self._running:
                self._rebuild()
            self._wake.set()
            if alone:
                self._suspects.appendleft(animal)
            return
        self._running[future] = running
        future.add_done_callback(lambda _future: self._wake.set())
