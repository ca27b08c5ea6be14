"""A pool of processes that compute, and what a process does before its first task."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from contextlib import contextmanager
from multiprocessing.context import SpawnContext, SpawnProcess
from typing import Any

from service.recompute.task import AnimalInput, AnimalResult, compute_animal
from service.recompute.warm_up import warm_up

NICENESS = 10
PARENT_CHECK_S = 0.5


class WorkerPool:
    """Processes that run one task each at a time; made anew after one of them was killed.

    Parameters
    ----------
    workers : int
    deadline_s : int, a process whose task takes longer ends
    """

    def __init__(self, workers: int, deadline_s: int) -> None:
        self._workers, self._deadline_s = workers, deadline_s
        self._context = _RecordingContext()
        self._executor = self._make()
        self.rebuilt = 0

    def submit(self, animal: AnimalInput) -> Future[AnimalResult]:
        """Compute an animal; the future's errors are those of :func:`compute_animal`, or BrokenExecutor."""
        return self._executor.submit(run_task, animal, self._deadline_s)

    def rebuild(self) -> None:
        """End all processes and start anew."""
        self.close()
        self._context = _RecordingContext()
        self._executor = self._make()
        self.rebuilt += 1

    def close(self) -> None:
        """End all processes now; what they were computing is lost."""
        self._context.kill_all()
        self._executor.shutdown(wait=True, cancel_futures=True)

    def _make(self) -> Executor:
        # Spawned, not forked: a fork of a threaded server inherits locks in whatever state they are.
        executor = ProcessPoolExecutor(
            self._workers, mp_context=self._context, initializer=prepare_worker, initargs=(os.getpid(),)
        )
        # A process is started per waiting task: these are there before the first animal is.
        try:
            with _interruptions_deferred():
                for _ in range(self._workers):
                    executor.submit(os.getpid)
        except BaseException:
            self._context.kill_all()
            raise
        return executor


@contextmanager
def _interruptions_deferred() -> Iterator[None]:
    """Let no Ctrl-C fall between the start of a process and the moment when it is known, or nobody would end it."""
    if threading.current_thread() is not threading.main_thread():
        # Python raises interruptions in the main thread only.
        yield
        return
    came: list[int] = []
    before = {
        number: signal.signal(number, lambda arrived, _frame: came.append(arrived))
        for number in (signal.SIGINT, signal.SIGTERM)
    }
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, signal.SIG_DFL if handler is None else handler)
        if came:
            signal.raise_signal(came[0])


class _Worker(SpawnProcess):
    """Process that no Ctrl-C reaches before it is prepared: it inherits the signals held back at its start."""

    def start(self) -> None:
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT, signal.SIGTERM})
        try:
            super().start()
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)


class _RecordingContext(SpawnContext):
    """Start method that remembers its processes, so that they can be ended."""

    def __init__(self) -> None:
        super().__init__()
        self._started: list[multiprocessing.process.BaseProcess] = []

    def Process(self, *args: Any, **kwargs: Any) -> Any:  # type: ignore[override]  # noqa: N802 - executors call it
        process = _Worker(*args, **kwargs)
        self._started.append(process)
        return process

    def kill_all(self) -> None:
        for process in self._started:
            if process.is_alive():
                process.kill()


def prepare_worker(parent_pid: int) -> None:
    """Make this process a worker: it yields to the server, leaves Ctrl-C to it and ends with it."""
    os.nice(NICENESS)
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGINT, signal.SIGTERM})
    threading.Thread(target=_end_with, args=(parent_pid,), daemon=True).start()
    warm_up()


def run_task(animal: AnimalInput, deadline_s: int) -> AnimalResult:
    """Compute an animal; past the deadline the system ends this process."""
    # The signal is not caught: compiled code would not let a handler run.
    signal.alarm(deadline_s)
    try:
        return compute_animal(animal)
    finally:
        signal.alarm(0)


def _end_with(parent_pid: int, exit_now: Callable[[int], None] = os._exit) -> None:
    """Wait until the server is gone, however it ended; a worker left alone would wait for ever."""
    while os.getppid() == parent_pid:
        time.sleep(PARENT_CHECK_S)
    exit_now(1)
