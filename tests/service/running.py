"""A real server in the test's own process: the application behind uvicorn on a free port, its store in a directory.

It starts in a fraction of a second, and takes a Settings. What is tested or measured by killing the process or by its
memory needs :mod:`tests.running_server`.
"""

import socket
import sqlite3
import threading
import time
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import replace
from pathlib import Path

import httpx
import uvicorn

from service.app import create_app
from service.recompute.reconciler import Reconciler
from service.settings import Settings
from service.store.database import DATABASE_FILE, Store

KEY = "test-key-of-this-server"


@contextmanager
def running_server(data: Path, settings: Settings | None = None, *, computing: bool = False) -> Iterator[httpx.Client]:
    """Client of a running server, with the key."""
    settings = replace(settings or Settings(), data=data, admin_key=KEY)
    store = Store.open(settings)
    reconciler = Reconciler(store, settings) if computing else None
    server = uvicorn.Server(
        uvicorn.Config(create_app(store, settings, reconciler), log_level="critical", lifespan="off", ws="none")
    )
    # Named as TCP, so that asyncio turns Nagle's delay off as it does for a socket of its own.
    with socket.socket(socket.AF_INET, socket.SOCK_STREAM, socket.IPPROTO_TCP) as listening:
        listening.bind(("127.0.0.1", 0))
        thread = threading.Thread(target=server.run, kwargs={"sockets": [listening]})
        thread.start()
        if reconciler is not None:
            reconciler.start()
        address = f"http://127.0.0.1:{listening.getsockname()[1]}"
        try:
            with httpx.Client(base_url=address, headers={"Authorization": f"Bearer {KEY}"}, timeout=60) as client:
                yield client
        finally:
            server.should_exit = True
            thread.join()
            if reconciler is not None:
                reconciler.stop()
            store.close()


def wait_until_current(client: httpx.Client, seconds: float = 120.0) -> dict:
    """Status once everything is computed."""
    deadline = time.monotonic() + seconds
    while time.monotonic() < deadline:
        status = client.get("/status").raise_for_status().json()
        assert status["failed"] == []
        if status["current"]:
            return status
        time.sleep(0.05)
    raise AssertionError(f"not current after {seconds} s: {status}")


def stored(data: Path) -> list[str]:
    """Everything in a store's database, as text."""
    with closing(sqlite3.connect(f"file:{data / DATABASE_FILE}?mode=ro", uri=True)) as connection:
        return list(connection.iterdump())
