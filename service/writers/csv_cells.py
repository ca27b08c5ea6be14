"""CSV cells: lists as JSON, and texts that a spreadsheet would run as a formula made harmless."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Final

FORMULA_SIGNS: Final = ("=", "+", "-", "@")


def csv_bytes(columns: Sequence[str], rows: Iterable[Mapping[str, Any]]) -> bytes:
    """Rows as CSV in UTF-8 with a header line.

    Parameters
    ----------
    columns : sequence of str
    rows : iterable of mappings; None becomes an empty cell, a list of texts is joined with semicolons, a list of
        numbers becomes a JSON array
    """
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow(columns)
    writer.writerows([_cell(row[name]) for name in columns] for row in rows)
    return text.getvalue().encode()


def _cell(value: Any) -> Any:
    if isinstance(value, str):
        return _guarded(value)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, list | tuple):
        if value and not isinstance(value[0], str):
            return f"[{','.join(map(repr, value))}]"
        return _guarded(";".join(value))
    return value


def _guarded(text: str) -> str:
    # An apostrophe in front makes a spreadsheet show the text instead of computing it.
    return f"'{text}" if text.startswith(FORMULA_SIGNS) else text
