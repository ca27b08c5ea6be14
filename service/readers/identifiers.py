"""Identifiers of animals, tags and zones."""

from __future__ import annotations

import re
from typing import Final

LONGEST_IDENTIFIER: Final = 100

_FORBIDDEN = re.compile(r"[/\\\x00-\x1f\x7f-\x9f\u2028\u2029\ud800-\udfff]")


def identifier_fault(text: str) -> str | None:
    """Why a text cannot be an identifier, as a sentence; None where it can.

    Parameters
    ----------
    text : str
    """
    if not text:
        return "An identifier is missing. Give 1 to 100 characters."
    if len(text) > LONGEST_IDENTIFIER:
        return f"The identifier {text[:20]!r}… has {len(text)} characters; at most {LONGEST_IDENTIFIER} are allowed."
    if text in (".", ".."):
        return f"{text!r} cannot be an identifier: it means something else in a path."
    if found := _FORBIDDEN.search(text):
        return f"The identifier {text[:40]!r} contains {found[0]!r}. Leave out slashes, backslashes and control signs."
    if text != text.strip():
        return f"The identifier {text[:40]!r} starts or ends with a space. Remove it."
    return None
