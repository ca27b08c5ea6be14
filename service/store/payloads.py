"""Payloads: request bodies as they came, kept in compressed parts."""

from __future__ import annotations

import zlib
from collections.abc import Iterator, Mapping
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from types import TracebackType
from typing import BinaryIO, Final

from sqlalchemy import Connection, select

from service.store import driver, schema

PART_BYTES: Final = 1_000_000
_COMPRESSION_LEVEL: Final = 1


@dataclass(frozen=True)
class Payload:
    """A request body as it came.

    Attributes
    ----------
    file : binary file, seekable
    size : int, bytes
    sha256 : str, hexadecimal
    media_type : str
    parameters : dict, query parameters that change how the body is read
    received_at_ms : int or None, None takes the time of the transaction
    """

    file: BinaryIO
    size: int
    sha256: str
    media_type: str
    parameters: Mapping[str, str]
    received_at_ms: int | None = None


class PayloadKeeper:
    """Keeps a payload part by part while the same file is being read; parts are compressed in a thread beside.

    Used in a ``with`` statement: :meth:`step` now and then, :meth:`finish` at the end.
    """

    def __init__(self, connection: Connection, submission: int, file: BinaryIO) -> None:
        self._connection, self._submission, self._file = connection, submission, file
        self._next_part = 0
        self._thread = ThreadPoolExecutor(1)
        self._compressed: Future[bytes] | None = None

    def __enter__(self) -> PayloadKeeper:
        self._read_part()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._thread.shutdown()

    def step(self) -> None:
        """Write the part that is ready, if one is, and begin the next."""
        if self._compressed is not None and self._compressed.done():
            self._write_part(self._compressed.result())

    def finish(self) -> None:
        """Write all that is left."""
        while self._compressed is not None:
            self._write_part(self._compressed.result())

    def _read_part(self) -> None:
        # The reader of the rows has its own place in the file.
        place = self._file.tell()
        self._file.seek(self._next_part * PART_BYTES)
        part = self._file.read(PART_BYTES)
        self._file.seek(place)
        self._compressed = self._thread.submit(zlib.compress, part, _COMPRESSION_LEVEL) if part else None

    def _write_part(self, content: bytes) -> None:
        columns = ("submission_id", "part_no", "content")
        row = (self._submission, self._next_part, content)
        driver.insert_rows(self._connection, schema.submission_payload, columns, [row])
        self._next_part += 1
        self._read_part()


def payload_parts(connection: Connection, submission: int) -> Iterator[bytes]:
    """The payload of a submission as it was sent, part by part."""
    table = schema.submission_payload
    part_no = 0
    while True:
        query = select(table.c.content).where(table.c.submission_id == submission, table.c.part_no == part_no)
        content = connection.execute(query).scalar_one_or_none()
        if content is None:
            return
        yield zlib.decompress(content)
        part_no += 1
