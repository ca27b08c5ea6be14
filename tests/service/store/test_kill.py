"""kill -9 at any moment keeps everything that was acknowledged, and nothing half."""

import subprocess
import sys
import time

import pytest
from sqlalchemy import text

from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.submissions import list_submissions, payload_parts

WRITER = """
import sys
from pathlib import Path
from service.settings import Settings
from service.store.database import Store
from tests.service.store.sent import send, walk
store = Store.open(Settings(data=Path(sys.argv[1])))
for number in range(100_000):
    receipt = send(store, walk("seal", 300, number, 300 * number), 50, content=b"submission %d" % number)
    print(receipt.submission, receipt.accepted, flush=True)
"""


@pytest.mark.parametrize("after_s", [0.0, 0.13, 0.31])
def test_killed_server_keeps_every_acknowledged_submission(settings, after_s):
    """What was acknowledged before the kill is there whole; a submission in work is there whole or not at all."""
    command = [sys.executable, "-c", WRITER, str(settings.data)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as writer:
        lines = [writer.stdout.readline()]
        time.sleep(after_s)
        writer.kill()
        lines += writer.stdout.readlines()
    acknowledged = [tuple(map(int, line.split())) for line in lines if line.endswith("\n")]
    store = Store.open(settings)
    try:
        with store.read() as connection:
            receipts = list_submissions(connection, DEFAULT_PROGRAMME, 0, 10_000)
            kept = [(receipt.submission, receipt.accepted) for receipt in receipts]
            assert kept[: len(acknowledged)] == acknowledged != []
            assert len(kept) <= len(acknowledged) + 1
            counts = dict(connection.execute(text("SELECT commit_no, count(*) FROM fix GROUP BY commit_no")).all())
            assert counts == {receipt.commit_no: 300 for receipt in receipts}
            for number, receipt in enumerate(receipts):
                assert b"".join(payload_parts(connection, receipt.submission)) == b"submission %d" % number
            assert connection.execute(text("PRAGMA integrity_check")).scalar() == "ok"
    finally:
        store.close()
