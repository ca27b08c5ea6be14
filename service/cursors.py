"""Cursors of pages: the key of the last entry given, packed so that nobody takes it for more."""

from __future__ import annotations

import base64
import binascii
from collections.abc import Sequence

import orjson

from service.problems import Problem


def pack_cursor(key: Sequence[str | int]) -> str:
    """Cursor after the entry of that key."""
    return base64.urlsafe_b64encode(orjson.dumps(list(key))).decode().rstrip("=")


def unpack_cursor(text: str | None, *kinds: type) -> tuple[str | int, ...] | None:
    """Key that a cursor stands for, None for none.

    Parameters
    ----------
    text : str or None
    *kinds : type, str or int for each part of the key

    Raises
    ------
    Problem
        The cursor is not one that this list gave (400).
    """
    if text is None:
        return None
    try:
        key = orjson.loads(base64.urlsafe_b64decode(text.encode() + b"=" * (-len(text) % 4)))
        if isinstance(key, list) and [type(part) for part in key] == list(kinds) and _in_range(key):
            return tuple(key)
    except (ValueError, binascii.Error):
        pass
    detail = "cursor: this is no cursor of this list. Take it unchanged from next of the page before."
    raise Problem(400, "invalid-parameter", "A query parameter is not valid", detail)


def _in_range(key: list[str | int]) -> bool:
    return all(isinstance(part, str) or abs(part) < 2**63 for part in key)
