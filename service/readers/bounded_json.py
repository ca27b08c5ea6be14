"""A JSON body on its way to the parser, refused where reading it on would take the whole server's memory or more."""

from __future__ import annotations

import io
from typing import BinaryIO, Final

import ijson
import numpy as np

DEEPEST: Final = 100
"""Arrays and objects inside each other; the parser's memory grows with the square of it."""
LONGEST_NUMBER: Final = 640
"""Digits in a row; integers of that length are read by Python under any setting, longer ones end the process."""
LONGEST_ENTRY_BYTES: Final = 4_000_000
"""Size of one entry of the array, about: it is held in memory whole."""

_DIGITS_AS_ZEROS = bytes.maketrans(b"123456789", b"000000000")
_STEP = np.zeros(256, dtype=np.int64)
_STEP[list(b"[{")] = 1
_STEP[list(b"]}")] = -1


_BLOCK_BYTES = 1_000_000


def refuse_deep_json(body: bytes) -> None:
    """Refuse a small body that is nested too deeply for whatever walks through it.

    Raises
    ------
    ijson.JSONError
        It is.
    """
    bounded = BoundedJson(io.BytesIO(body), longest_entry_bytes=len(body))
    while bounded.read(_BLOCK_BYTES):
        pass


class BoundedJson:
    """A stream of JSON, looked at while it is read.

    Parameters
    ----------
    stream : binary file
    longest_entry_bytes : int, for each entry of the array

    Attributes
    ----------
    taken : int, bytes read so far
    """

    def __init__(self, stream: BinaryIO, longest_entry_bytes: int = LONGEST_ENTRY_BYTES) -> None:
        self.taken = 0
        self._stream, self._longest_entry_bytes = stream, longest_entry_bytes
        self._held_back, self._digits = b"", b""
        self._in_text = False
        self._depth = self._of_entry = 0

    def read(self, size: int = -1) -> bytes:
        """Read on.

        Raises
        ------
        ijson.JSONError
            The body has too long a number, is nested too deeply, or one of its entries is too large.
        """
        block = self._stream.read(size)
        self.taken += len(block)
        outside = self._outside_texts(block)
        digits = self._digits + outside.translate(_DIGITS_AS_ZEROS)
        if b"0" * (LONGEST_NUMBER + 1) in digits:
            raise ijson.JSONError(f"a number has more than {LONGEST_NUMBER} digits")
        self._digits = digits[-LONGEST_NUMBER:]
        depth = self._depth + np.cumsum(_STEP[np.frombuffer(outside, dtype=np.uint8)])
        if depth.max(initial=0) > DEEPEST:
            raise ijson.JSONError(f"arrays and objects are more than {DEEPEST} inside each other")
        # Between two entries only the array itself is open.
        self._of_entry = 0 if depth.min(initial=2) <= 1 else self._of_entry + len(block)
        if self._of_entry > self._longest_entry_bytes:
            raise ijson.JSONError(f"one entry is larger than {self._longest_entry_bytes} bytes")
        self._depth = int(depth[-1]) if len(depth) else self._depth
        return block

    def _outside_texts(self, block: bytes) -> bytes:
        """What of the next bytes stands outside of quotes; a quote stands for each text."""
        signs = self._held_back + block
        # A backslash whose other half has not come yet.
        whole = len(signs) - (len(signs) - len(signs.rstrip(b"\\"))) % 2
        self._held_back = signs[whole:]
        parts = signs[:whole].replace(b"\\\\", b"").replace(b'\\"', b"").split(b'"')
        outside = b'"'.join(parts[int(self._in_text) :: 2])
        self._in_text ^= len(parts) % 2 == 0
        return outside
