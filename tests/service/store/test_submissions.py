"""Submissions: what is kept, and what they change."""

import hashlib
import tempfile
from collections import defaultdict
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sqlalchemy import select

from service.readers.fix_rows import ReadOutcome, RejectedRow
from service.settings import Settings
from service.store import schema
from service.store.animals import get_animal
from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.fixes import read_fixes
from service.store.payloads import PART_BYTES
from service.store.submissions import (
    Counts,
    find_by_sha256,
    get_submission,
    list_submissions,
    payload_parts,
    record_tracks,
    rejected_rows,
    store_submission,
)
from tests.service.store.sent import HOUR_MS, START_MS, payload, send, walk

FIX = ("seal", "", START_MS, 1.0, 2.0, 30.0)
ELSEWHERE = ("seal", "", START_MS, 1.5, 2.0, 30.0)
LATER = ("seal", "", START_MS + HOUR_MS, 1.0, 2.0, None)


def _counts(receipt):
    return receipt.accepted, receipt.unchanged, receipt.corrected, receipt.rejected


def _current(store):
    """Current fixes: (animal, tag, time) -> (lon, lat, sd or None)."""
    found = {}
    with store.read() as connection:
        for animal in connection.execute(select(schema.animal.c.id, schema.animal.c.identifier)):
            fixes = read_fixes(connection, animal.id)
            for k, tag in enumerate(fixes.tag):
                sd_m = (
                    None if fixes.covariance_m2[k, 0] != fixes.covariance_m2[k, 0] else fixes.covariance_m2[k, 0] ** 0.5
                )
                place = (float(fixes.lon_deg[k]), float(fixes.lat_deg[k]), sd_m)
                found[animal.identifier, fixes.tag_names[tag], int(fixes.time_ms[k])] = place
    return found


def test_new_repeated_and_corrected_fixes(store):
    """A fix that says the same is unchanged; another position or error corrects it; the last one stands."""
    assert _counts(send(store, [FIX, LATER])) == (2, 0, 0, 0)
    assert _counts(send(store, [FIX, LATER])) == (0, 2, 0, 0)
    assert _counts(send(store, [ELSEWHERE, LATER])) == (1, 1, 1, 0)
    assert _counts(send(store, [(*FIX[:5], 31.0)])) == (1, 0, 1, 0)
    assert _current(store)["seal", "", START_MS] == (1.0, 2.0, 31.0)
    with store.read() as connection:
        values = connection.execute(select(schema.fix.c.lon_deg).order_by(schema.fix.c.commit_no)).scalars().all()
        animal = get_animal(connection, DEFAULT_PROGRAMME, "seal")
    assert values == [1.0, 1.0, 1.5, 1.0], "what was sent before is still there"
    assert (animal.fixes, animal.first_fix_ms, animal.last_fix_ms) == (2, START_MS, START_MS + HOUR_MS)


def test_unchanged_submission_changes_no_revision(store):
    """Sending the same fixes again does not make the animal stale."""
    send(store, [FIX])
    with store.read() as connection:
        before = get_animal(connection, DEFAULT_PROGRAMME, "seal").revision
    receipt = send(store, [FIX])
    with store.read() as connection:
        assert get_animal(connection, DEFAULT_PROGRAMME, "seal").revision == before < receipt.commit_no
    assert not receipt.changed


def test_same_time_of_two_tags_is_two_fixes(store):
    """A fix is known by animal, tag and time."""
    other = ("seal", "B", *ELSEWHERE[2:])
    assert _counts(send(store, [FIX, other])) == (2, 0, 0, 0)
    assert len(_current(store)) == 2


@pytest.mark.parametrize("rows_at_a_time", [1, 2, 100])
def test_rows_that_contradict_each_other_are_all_rejected(store, rows_at_a_time):
    """Two positions of one fix in a submission: neither is taken, however far apart the rows are."""
    receipt = send(store, [FIX, LATER, FIX, ELSEWHERE, FIX], rows_at_a_time)
    assert _counts(receipt) == (1, 0, 0, 4)
    assert list(_current(store)) == [("seal", "", START_MS + HOUR_MS)]
    with store.read() as connection:
        bad = rejected_rows(connection, receipt.submission, 0, 10)
    assert [row.row for row in bad] == [1, 3, 4, 5]
    assert {row.code for row in bad} == {"contradicting_rows"}
    assert "'seal' at 2023-11-14T22:13:20.000Z" in bad[0].message


@pytest.mark.parametrize("rows_at_a_time", [1, 100])
def test_contradiction_leaves_the_stored_fix(store, rows_at_a_time):
    """A contradicted correction does not touch what was stored before."""
    send(store, [FIX])
    assert _counts(send(store, [ELSEWHERE, FIX, LATER], rows_at_a_time)) == (1, 0, 0, 2)
    assert _current(store)["seal", "", START_MS] == FIX[3:]


def test_animal_of_which_nothing_was_taken_is_not_made(store):
    """An animal whose only rows contradict each other is not there afterwards."""
    send(store, [FIX, ELSEWHERE, ("fox", "", START_MS, 0.0, 0.0, None)])
    with store.read() as connection:
        assert get_animal(connection, DEFAULT_PROGRAMME, "seal") is None
        assert get_animal(connection, DEFAULT_PROGRAMME, "fox").fixes == 1


_rows = st.lists(
    st.tuples(
        st.sampled_from(["a", "b"]),
        st.sampled_from(["", "t"]),
        st.integers(0, 4),
        st.sampled_from([1.0, 2.0]),
        st.just(5.0),
        st.sampled_from([None, 30.0]),
    ),
    max_size=12,
)


def _expected(stored, rows):
    """What a submission does, worked out with a dict: (store after it, counts)."""
    sent = defaultdict(list)
    for row in rows:
        sent[row[:3]].append(row[3:])
    after, accepted, unchanged, corrected, rejected = dict(stored), 0, 0, 0, 0
    for key, values in sent.items():
        if len(set(values)) > 1:
            rejected += len(values)
        elif stored.get(key) == values[0]:
            unchanged += len(values)
        else:
            accepted, unchanged = accepted + 1, unchanged + len(values) - 1
            corrected += key in stored
            after[key] = values[0]
    return after, (accepted, unchanged, corrected, rejected)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(submissions=st.lists(st.tuples(_rows, st.integers(1, 5)), min_size=1, max_size=4))
def test_any_submissions_against_a_dict(submissions):
    """Whatever is sent in whatever chunks, the store holds what a dict worked out row by row holds."""
    with tempfile.TemporaryDirectory() as data:
        store = Store.open(Settings(data=Path(data)))
        try:
            stored = {}
            for rows, rows_at_a_time in submissions:
                stored, counts = _expected(stored, rows)
                assert _counts(send(store, rows, rows_at_a_time)) == counts
                assert _current(store) == stored
                with store.read() as connection:
                    for name in ("a", "b"):
                        times = [key[2] for key in stored if key[0] == name]
                        animal = get_animal(connection, DEFAULT_PROGRAMME, name)
                        known = (
                            (0, None, None)
                            if animal is None
                            else (animal.fixes, animal.first_fix_ms, animal.last_fix_ms)
                        )
                        assert known == (len(times), min(times, default=None), max(times, default=None))
        finally:
            store.close()


def test_payload_comes_back_as_it_was_sent(store):
    """A payload of several parts is returned byte for byte, and known by its SHA-256."""
    content = bytes(range(256)) * (PART_BYTES // 100)
    receipt = send(store, walk("seal", 3), content=content)
    with store.read() as connection:
        parts = list(payload_parts(connection, receipt.submission))
        found = find_by_sha256(connection, DEFAULT_PROGRAMME, "tracks", hashlib.sha256(content).hexdigest(), {})
    assert b"".join(parts) == content
    assert len(parts) > 2
    assert found == receipt


def test_reader_keeps_its_place_while_the_payload_is_kept(store):
    """The rows are read from the very file that is being kept."""
    content = b"x" * (3 * PART_BYTES)
    sent = payload(content)
    seen = []

    def read():
        while part := sent.file.read(PART_BYTES // 2):
            seen.append(len(part))
            yield from ()

    receipt = record_tracks(store, DEFAULT_PROGRAMME, sent, read(), ReadOutcome(lambda _rows: None))
    with store.read() as connection:
        assert b"".join(payload_parts(connection, receipt.submission)) == content
    assert sum(seen) == len(content)


def test_rejected_rows_come_in_pages(store):
    """Rows that the reader refused are kept with the submission, in order."""
    bad = [RejectedRow(row, "lat", "out_of_range", f"row {row} is bad", "91") for row in range(1, 8)]
    receipt = send(store, [], refused=bad)
    assert (receipt.rows, receipt.rejected, receipt.changed) == (7, 7, False)
    with store.read() as connection:
        first = rejected_rows(connection, receipt.submission, 0, 4)
        assert first + rejected_rows(connection, receipt.submission, first[-1].row, 4) == bad


def test_receipts_are_listed_in_order(store):
    """Receipts by number; a payload sent again names the first submission of it."""
    first, second = send(store, [FIX]), send(store, [FIX])
    with store.read() as connection:
        assert list_submissions(connection, DEFAULT_PROGRAMME, 0, 10) == [first, second]
        assert list_submissions(connection, DEFAULT_PROGRAMME, first.submission, 10) == [second]
        assert get_submission(connection, DEFAULT_PROGRAMME, 99) is None
    assert (first.repeat_of, second.repeat_of) == (None, first.submission)


def test_other_kinds_are_kept_too(store):
    """Zones and animals are submissions like any other."""
    with store.write("zones") as tx:
        counts = Counts(rows=2, accepted=1, unchanged=1)
        number = store_submission(tx, DEFAULT_PROGRAMME, "zones", payload(b"{}"), counts, ["a note"], [])
    with store.read() as connection:
        receipt = get_submission(connection, DEFAULT_PROGRAMME, number)
        assert b"".join(payload_parts(connection, number)) == b"{}"
    assert (receipt.kind, receipt.rows, receipt.notes, receipt.changed) == ("zones", 2, ["a note"], True)
