"""The data directory, its lock, its schema, and what a transaction sees."""

import signal
import subprocess
import sys
from dataclasses import replace

import pytest
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from sqlalchemy import text

from service.store.database import DEFAULT_PROGRAMME, Store, StoreError, last_commit_no
from service.store.programmes import get_programme
from service.store.schema import metadata
from tests.service.store.sent import send, walk

HOLD_THE_STORE = """
import sys, time
from pathlib import Path
from service.settings import Settings
from service.store.database import Store
store = Store.open(Settings(data=Path(sys.argv[1])))
print("open", flush=True)
time.sleep(60)
"""


def _holder(data):
    process = subprocess.Popen([sys.executable, "-c", HOLD_THE_STORE, str(data)], stdout=subprocess.PIPE, text=True)
    assert process.stdout.readline() == "open\n"
    return process


def _everything(store):
    with store.read() as connection:
        return {
            table.name: sorted(map(repr, connection.execute(table.select()).all())) for table in metadata.sorted_tables
        }


def test_second_server_on_the_same_data_is_refused(settings):
    """Another process that has the data directory is named as the reason."""
    with _holder(settings.data) as holder:
        with pytest.raises(StoreError, match="Another server is using the data directory"):
            Store.open(settings)
        holder.kill()


def test_lock_of_a_killed_server_does_not_block(settings):
    """After kill -9 the same directory opens at once, although the lock file is still there."""
    with _holder(settings.data) as holder:
        holder.send_signal(signal.SIGKILL)
        holder.wait()
        assert (settings.data / "sojourn.lock").exists()
        Store.open(settings).close()


def test_unusable_data_directory_is_refused(settings, tmp_path):
    """A file where the directory should be is said so, with the setting to change."""
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="Set SOJOURN_DATA"):
        Store.open(replace(settings, data=tmp_path / "file"))


def test_tables_of_a_later_version_are_refused(store, settings):
    """A store that a later version has used is not touched; the refusal says what to install."""
    with store.write("test") as tx:
        tx.connection.execute(text("UPDATE alembic_version SET version_num = '9999'"))
    store.close()
    with pytest.raises(StoreError, match=r"not known here: .*9999.* Install the version"):
        Store.open(settings)


def test_migrations_make_the_schema(store):
    """The migrations end in exactly the tables that the code uses."""
    with store.read() as connection:
        assert compare_metadata(MigrationContext.configure(connection), metadata) == []


def test_database_is_durable_and_lets_readers_read(store):
    """Write-ahead log, and a commit that has reached the disk."""
    with store.read() as connection:
        assert connection.execute(text("PRAGMA journal_mode")).scalar() == "wal"
        assert connection.execute(text("PRAGMA synchronous")).scalar() == 2
        assert connection.execute(text("PRAGMA foreign_keys")).scalar() == 1


def test_reader_sees_one_state_while_others_write(store):
    """A read transaction sees what was there when it began, whatever is committed meanwhile."""
    count = text("SELECT count(*) FROM fix")
    with store.read() as connection:
        before = last_commit_no(connection)
        send(store, walk("seal", 5))
        assert connection.execute(count).scalar() == 0
        assert last_commit_no(connection) == before
    with store.read() as connection:
        assert connection.execute(count).scalar() == 5


def test_error_in_a_write_leaves_the_store_as_it_was(store):
    """A submission that breaks off after some chunks leaves no trace, not even a commit number."""
    send(store, walk("seal", 5))
    before = _everything(store)
    with pytest.raises(OSError, match="went dead"):
        send(store, BreakingOff(walk("seal", 300, first=3)), rows_at_a_time=100)
    assert _everything(store) == before
    assert send(store, walk("seal", 6)).accepted == 1


class BreakingOff(list):
    """Rows whose third hundred cannot be read."""

    def __getitem__(self, part):
        if isinstance(part, slice) and part.start >= 200:
            raise OSError("the line went dead")
        return super().__getitem__(part)


def test_changed_settings_make_everything_stale(settings):
    """A start with another time zone raises the settings' revision; a start with the same ones does not."""
    revisions = []
    for zone in ("UTC", "UTC", "Pacific/Auckland"):
        store = Store.open(replace(settings, time_zone=zone))
        with store.read() as connection:
            revisions.append(get_programme(connection, DEFAULT_PROGRAMME).settings_revision)
        store.close()
    assert revisions[0] == revisions[1] < revisions[2]


@pytest.mark.parametrize("name", ["what?", "half #2", "100%25", "ö b"])
def test_everything_is_kept_in_the_data_directory_whatever_its_name(tmp_path, settings, name):
    Store.open(replace(settings, data=tmp_path / name)).close()
    assert (tmp_path / name / "sojourn.db").exists()
    assert [path.name for path in tmp_path.iterdir() if path.is_file()] == []
