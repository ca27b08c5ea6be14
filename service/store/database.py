"""The store: a data directory with its lock, its schema, snapshots to read and one writer at a time."""

from __future__ import annotations

import fcntl
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import IO

from alembic import command
from alembic.config import Config
from alembic.util import CommandError
from sqlalchemy import Connection, Engine, func, insert, select
from sqlalchemy.exc import DBAPIError

from service.settings import Settings
from service.store import driver, schema
from service.store.programmes import keep_programme

DATABASE_FILE = "sojourn.db"
LOCK_FILE = "sojourn.lock"
DEFAULT_PROGRAMME = "default"


class StoreError(RuntimeError):
    """The store cannot be opened; the message says why and what to do."""


@dataclass(frozen=True)
class WriteTransaction:
    """One write transaction.

    Attributes
    ----------
    connection : Connection
    commit_no : int, number of this transaction; later ones are higher
    now_ms : int, its time, milliseconds since 1970-01-01 UTC
    """

    connection: Connection
    commit_no: int
    now_ms: int


class Store:
    """An open store. Open it with :meth:`open`; close it when done."""

    def __init__(self, engine: Engine, lock: IO[str]) -> None:
        self._engine = engine
        self._lock = lock
        self._writer = threading.Lock()

    @classmethod
    def open(cls, settings: Settings) -> Store:
        """Open or make the store in the data directory, and bring its schema and the default programme up to date.

        Raises
        ------
        StoreError
            Another server has the data directory, or it or the database in it cannot be used.
        """
        try:
            # Positions are for whoever runs the service; no other account of the machine may read them.
            settings.data.mkdir(mode=0o700, parents=True, exist_ok=True)
            lock = _take_lock(settings.data / LOCK_FILE)
        except OSError as fault:
            raise StoreError(
                f"The data directory {settings.data} cannot be used: {fault.strerror}. Set SOJOURN_DATA to another."
            ) from fault
        path = settings.data / DATABASE_FILE
        store = cls(driver.open_engine(path), lock)
        try:
            store._upgrade()
            with store.write("settings") as tx:
                keep_programme(tx.connection, DEFAULT_PROGRAMME, settings, tx.commit_no)
        except BaseException as fault:
            store.close()
            if isinstance(fault, DBAPIError):
                cure = "Check that it and its directory can be written to, or set SOJOURN_DATA to another directory."
                raise StoreError(f"The database {path} cannot be used: {fault.orig}. {cure}") from fault
            if isinstance(fault, CommandError):
                cure = "Install the version of Sojourn that it was last used with, or a later one."
                raise StoreError(f"The tables of the database {path} are not known here: {fault}. {cure}") from fault
            raise
        return store

    @contextmanager
    def read(self) -> Iterator[Connection]:
        """One read transaction: every query in it sees the same state."""
        with self._engine.connect() as connection, connection.begin():
            # SQLite takes its snapshot with the first query, not with BEGIN.
            last_commit_no(connection)
            yield connection

    @contextmanager
    def write(self, kind: str) -> Iterator[WriteTransaction]:
        """One write transaction; committed on leaving, rolled back by an error. Writers wait for each other."""
        with self._writer, self._engine.connect() as plain:
            connection = plain.execution_options(sojourn_writes=True)
            with connection.begin():
                commit_no, now_ms = last_commit_no(connection) + 1, time.time_ns() // 1_000_000
                connection.execute(insert(schema.store_commit).values(commit_no=commit_no, kind=kind, at_ms=now_ms))
                yield WriteTransaction(connection, commit_no, now_ms)

    def close(self) -> None:
        """Close all connections and give up the data directory, once whoever is writing has ended."""
        with self._writer:
            self._engine.dispose()
        self._lock.close()

    def _upgrade(self) -> None:
        config = Config()
        location = str(Path(__file__).parent / "migrations").replace("%", "%%")
        config.set_main_option("script_location", location)
        with self._engine.connect() as plain:
            connection = plain.execution_options(sojourn_writes=True)
            with connection.begin():
                config.attributes["connection"] = connection
                command.upgrade(config, "head")


def last_commit_no(connection: Connection) -> int:
    """Highest commit number of this transaction's state, 0 in an empty store."""
    return int(connection.execute(select(func.coalesce(func.max(schema.store_commit.c.commit_no), 0))).scalar_one())


def _take_lock(path: Path) -> IO[str]:
    # flock belongs to the open file: it is gone with the process, however that ended.
    lock = path.open("a", encoding="utf-8")
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        lock.close()
        raise StoreError(
            f"Another server is using the data directory {path.parent}. Stop it, or set SOJOURN_DATA to another."
        ) from None
    return lock
