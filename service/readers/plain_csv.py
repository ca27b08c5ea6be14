"""CSV without quotes, split a block at a time: several times faster than row by row."""

from __future__ import annotations

from typing import BinaryIO, Final

import numpy as np

BLOCK_BYTES: Final = 1_000_000
LONGEST_LINE: Final = 100_000
"""Bytes of one line; bounds the memory that a body without line ends can take."""

_COMMA, _LINE_END = ord(","), ord("\n")


def next_plain_columns(stream: BinaryIO, width: int) -> list[list[str]] | None:
    """Columns of the next block of whole lines; None at the end of the stream, or where a block is not plain.

    Parameters
    ----------
    stream : binary file, seekable, at the start of a line; left where it was if the answer is None
    width : int, fields that every line must have

    Returns
    -------
    list of width lists of str, each of length n, or None
    """
    block = stream.read(BLOCK_BYTES) + stream.readline(LONGEST_LINE)
    columns = _split(block.replace(b"\r\n", b"\n") if b"\r" in block else block, width)
    if columns is None:
        stream.seek(-len(block), 1)
    return columns


def _split(block: bytes, width: int) -> list[list[str]] | None:
    if not block or b'"' in block or b"\r" in block:
        return None
    if not block.endswith(b"\n"):
        block += b"\n"
    signs = np.frombuffer(block, dtype=np.uint8)
    separators = signs[(signs == _COMMA) | (signs == _LINE_END)]
    if len(separators) % width:
        return None
    of_line = separators.reshape(-1, width)
    if np.any(of_line[:, :-1] != _COMMA) or np.any(of_line[:, -1] != _LINE_END):
        return None
    cells = block.decode("utf-8").replace("\n", ",").split(",")
    # The last line end leaves an empty cell behind it.
    return [cells[place:-1:width] for place in range(width)]
