"""Cursors."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.cursors import pack_cursor, unpack_cursor
from service.problems import Problem

TEXT = st.text(st.characters(codec="utf-8"), max_size=100)


@given(TEXT, st.integers(-(2**63) + 1, 2**63 - 1))
def test_a_cursor_comes_back_as_it_was(name, number):
    cursor = pack_cursor([name, number])
    assert unpack_cursor(cursor, str, int) == (name, number)
    assert cursor.isascii()
    assert "=" not in cursor


@given(st.text(st.characters(codec="utf-8"), max_size=40))
def test_what_no_list_gave_is_refused_or_a_key_of_that_kind(text):
    try:
        key = unpack_cursor(text, str, int)
    except Problem as refusal:
        assert refusal.status == 400  # noqa: PT017 - both outcomes are right; any other exception is not
    else:
        assert key is not None
        assert [type(part) for part in key] == [str, int]


@pytest.mark.parametrize("key", [["a"], [1, "a"], ["a", 1.5], ["a", True], ["a", 2**63], ["a", 1, 2]])
def test_a_cursor_of_another_list_is_refused(key):
    with pytest.raises(Problem, match="no cursor of this list"):
        unpack_cursor(pack_cursor(key), str, int)


def test_no_cursor_is_none():
    assert unpack_cursor(None, str) is None
