"""Workers: their deadline, their manners, and their end."""

import os
import signal
import subprocess
import sys
import time

import pytest

from service.recompute.worker_pool import NICENESS, WorkerPool
from tests.service.recompute.computing import wait_until

OVERDUE = """
import time
from service.recompute import worker_pool
worker_pool.compute_animal = time.sleep
worker_pool.run_task(30, 1)
"""

IN_TIME = """
import time
from service.recompute import worker_pool
worker_pool.compute_animal = lambda animal: animal
worker_pool.run_task(0, 1)
time.sleep(1.5)
"""

SERVER = """
import os, time
from service.recompute.worker_pool import WorkerPool
if __name__ == "__main__":
    pool = WorkerPool(2, 3600)
    pids = {pool._executor.submit(os.getpid).result() for _ in range(20)}
    print(*pids, flush=True)
    time.sleep(60)
"""


@pytest.fixture
def pool():
    made = WorkerPool(1, 3600)
    yield made
    made.close()


def _in_worker(pool, call, *arguments):
    return pool._executor.submit(call, *arguments).result(60)


def _is_running(pid):
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    return True


def test_overdue_task_ends_its_process():
    """Past the deadline the system ends the process, even inside a call that never returns."""
    assert subprocess.run([sys.executable, "-c", OVERDUE], check=False).returncode == -signal.SIGALRM


def test_finished_task_leaves_no_alarm():
    """A process whose task is done in time goes on."""
    assert subprocess.run([sys.executable, "-c", IN_TIME], check=False).returncode == 0


def test_worker_yields_to_the_server(pool):
    """Workers run at low priority, and leave Ctrl-C to the server."""
    assert _in_worker(pool, os.nice, 0) == os.nice(0) + NICENESS
    assert _in_worker(pool, signal.getsignal, signal.SIGINT) == signal.SIG_IGN


def test_closed_and_rebuilt_pools_leave_no_process(pool):
    """A pool made anew has other processes; the earlier ones are gone."""
    before = _in_worker(pool, os.getpid)
    pool.rebuild()
    after = _in_worker(pool, os.getpid)
    assert before != after
    assert not _is_running(before)
    pool.close()
    assert not _is_running(after)


def test_workers_end_with_a_killed_server(tmp_path):
    """After kill -9 of the server its workers end by themselves."""
    script = tmp_path / "pool_of_a_server.py"
    script.write_text(SERVER)
    with subprocess.Popen([sys.executable, str(script)], stdout=subprocess.PIPE, text=True) as server:
        workers = [int(pid) for pid in server.stdout.readline().split()]
        assert workers
        assert all(_is_running(pid) for pid in workers)
        server.kill()
    killed_s = time.monotonic()
    wait_until(lambda: not any(_is_running(pid) for pid in workers), 10.0)
    assert time.monotonic() - killed_s < 10.0
