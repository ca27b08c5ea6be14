"""JSON that would take the server's memory, or end it, is refused while it is read."""

import io
import json
import re

import ijson
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.readers import bounded_json
from service.readers.bounded_json import DEEPEST, LONGEST_NUMBER, BoundedJson, refuse_deep_json

TEXT = st.text(st.sampled_from('a"\\[{]}1é'), max_size=8)


def read(body: bytes, size: int, longest_entry_bytes: int = 10**6) -> bytes:
    bounded = BoundedJson(io.BytesIO(body), longest_entry_bytes)
    return b"".join(iter(lambda: bounded.read(size), b""))


@given(st.lists(st.dictionaries(TEXT, TEXT | st.integers() | st.lists(TEXT))), st.integers(1, 9))
def test_texts_are_told_from_what_stands_outside_at_any_size_of_block(rows, size):
    body = json.dumps(rows, ensure_ascii=False).encode()
    bounded, stream = BoundedJson(io.BytesIO()), io.BytesIO(body)
    found = b"".join(bounded._outside_texts(block) for block in iter(lambda: stream.read(size), b""))
    exact = re.sub(rb'"(?:[^"\\]|\\.)*"', b"", body)
    assert found.replace(b'"', b"") == exact


@pytest.mark.parametrize("size", [1, 7, 65536])
def test_what_is_just_within_is_read_unchanged(size):
    deep = b"[" * DEEPEST + b"]" * DEEPEST
    for body in (deep, b"[%b]" % (b"9" * LONGEST_NUMBER), json.dumps(["[" * 500, "9" * 5000, '\\"[{' * 99]).encode()):
        assert read(body, size) == body


@pytest.mark.parametrize("size", [1, 7, 65536])
@pytest.mark.parametrize(
    ("body", "message"),
    [
        (b"[" * (DEEPEST + 1), "inside each other"),
        (b'[{"a":' * DEEPEST, "inside each other"),
        (b"[-1%b]" % (b"9" * LONGEST_NUMBER), "more than 640 digits"),
        (b'[{"a": "%b"}]' % (b"x" * 200_000), "one entry is larger"),
    ],
)
def test_what_is_beyond_is_refused(body, message, size):
    with pytest.raises(ijson.JSONError, match=message):
        read(body, size, longest_entry_bytes=100_000)


def test_many_small_entries_are_no_large_one():
    body = json.dumps([{"a": k} for k in range(2000)]).encode()
    assert read(body, 512, longest_entry_bytes=2000) == body


def test_a_small_body_is_looked_at_whole(monkeypatch):
    monkeypatch.setattr(bounded_json, "_BLOCK_BYTES", 64)
    refuse_deep_json(b'{"a": [%b]}' % b",".join([b"[1]"] * 500))
    with pytest.raises(ijson.JSONError, match="inside each other"):
        refuse_deep_json(b" " * 100 + b"[" * 101)
