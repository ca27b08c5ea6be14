"""The one file that knows which database driver is behind the store: SQLite, embedded."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from sqlalchemy import URL, Connection, Engine, Table, create_engine, event

# Temporary tables and sorts go to files, dirty pages beyond the cache to the write-ahead log: a large
# submission must not take memory in proportion.
_PRAGMAS = (
    "PRAGMA journal_mode = WAL",
    "PRAGMA synchronous = FULL",
    "PRAGMA foreign_keys = ON",
    "PRAGMA busy_timeout = 30000",
    "PRAGMA temp_store = FILE",
    "PRAGMA cache_size = -32000",
)


def open_engine(path: Path) -> Engine:
    """Engine on a SQLite file whose transactions begin where the program says so."""
    # Not a URL as text: a directory may have a question mark in its name.
    url = URL.create("sqlite+pysqlite", database=str(path))
    engine = create_engine(url, pool_size=8, max_overflow=64, hide_parameters=True)

    @event.listens_for(engine, "connect")
    def _configure(connection: Any, _record: Any) -> None:
        # The driver's own transaction control begins too late for a snapshot and never immediately.
        connection.isolation_level = None
        for pragma in _PRAGMAS:
            connection.execute(pragma)

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        writes = connection.get_execution_options().get("sojourn_writes", False)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")

    return engine


def insert_rows(
    connection: Connection, table: Table | str, columns: Sequence[str], rows: Iterable[Sequence[Any]]
) -> None:
    """Insert rows through the driver, without a Python mapping per row."""
    marks = ", ".join("?" * len(columns))
    cursor: Any = connection.connection.cursor()
    try:
        # From an iterator the driver takes one row at a time, and no list of all of them is made.
        cursor.executemany(f"INSERT INTO {table} ({', '.join(columns)}) VALUES ({marks})", rows)
    finally:
        cursor.close()


def fetch_rows(connection: Connection, statement: str, parameters: tuple[Any, ...]) -> list[tuple[Any, ...]]:
    """All rows of a query as plain tuples, straight from the driver; parameters are marked ``?``."""
    cursor = connection.connection.cursor()
    try:
        cursor.execute(statement, parameters)
        return list(cursor.fetchall())
    finally:
        cursor.close()


def make_temporary_table(connection: Connection, name: str, columns: str) -> None:
    """Empty temporary table of this connection, made anew."""
    connection.exec_driver_sql(f"DROP TABLE IF EXISTS temp.{name}")
    connection.exec_driver_sql(f"CREATE TEMPORARY TABLE {name} ({columns})")
