"""Request bodies, kept in a temporary file in the data directory while they arrive, never in memory."""

from __future__ import annotations

import hashlib
import tempfile
from collections.abc import AsyncIterator, Callable
from dataclasses import dataclass
from typing import IO, BinaryIO, Final, cast

from fastapi import Request
from starlette.concurrency import run_in_threadpool
from starlette.requests import ClientDisconnect

from service.media_types import parse_media_type
from service.problems import Problem

WRITE_BYTES: Final = 1_000_000
"""Bytes gathered in memory before they are written."""


@dataclass(frozen=True)
class SpooledBody:
    """A whole request body.

    Attributes
    ----------
    file : binary file at its start, gone when the request is done
    size : int, bytes
    sha256 : str, hexadecimal
    media_type : str, without parameters
    """

    file: BinaryIO
    size: int
    sha256: str
    media_type: str


def spooled(*media_types: str, largest_bytes: int | None = None) -> Callable[[Request], AsyncIterator[SpooledBody]]:
    """Dependency that gives the request's body, if it is of one of these media types.

    Parameters
    ----------
    *media_types : str
    largest_bytes : int, optional
        Limit of this path, below that of the settings: for bodies that are read whole into memory.

    Raises
    ------
    Problem
        Another content type (415), or too large (413), whether its length was announced or not.
    """

    async def body(request: Request) -> AsyncIterator[SpooledBody]:
        settings = request.app.state.context.settings
        media_type = _checked_media_type(request, media_types)
        announced = request.headers.get("content-length", "0")
        limit_bytes = min(settings.body_limit_bytes, largest_bytes or settings.body_limit_bytes)
        if announced.isdecimal() and int(announced) > limit_bytes:
            raise _too_large(limit_bytes)
        with tempfile.TemporaryFile(dir=settings.data, prefix="body-") as file:
            size, sha256 = await _receive(request, file, limit_bytes)
            file.seek(0)
            yield SpooledBody(cast(BinaryIO, file), size, sha256, media_type)

    return body


def _checked_media_type(request: Request, media_types: tuple[str, ...]) -> str:
    name, parameters = parse_media_type(request.headers.get("content-type", ""))
    coding = request.headers.get("content-encoding", "identity").strip().lower()
    charset = parameters.get("charset", "utf-8").lower()
    if name not in media_types:
        got = f"Content-Type {name[:60]!r} cannot be read here" if name else "There is no Content-Type"
        detail = f"{got}. Send {' or '.join(media_types)}."
    elif coding not in ("", "identity"):
        detail = f"Content-Encoding {coding[:40]!r} cannot be read. Send the body uncompressed."
    elif charset not in ("utf-8", "utf8", "us-ascii"):
        detail = f"The charset {charset[:40]!r} cannot be read. Send UTF-8."
    else:
        return name
    raise Problem(415, "unsupported-media-type", "The content type cannot be read", detail, {"accepted": media_types})


def _too_large(limit_bytes: int) -> Problem:
    detail = (
        f"The body is larger than {limit_bytes} bytes. Send it in parts; tracks have the limit SOJOURN_BODY_LIMIT_MB."
    )
    return Problem(413, "body-too-large", "The body is too large", detail, {"limit_bytes": limit_bytes})


async def _receive(request: Request, file: IO[bytes], limit_bytes: int) -> tuple[int, str]:
    digest, size, waiting = hashlib.sha256(), 0, bytearray()

    def write(content: bytes) -> None:
        digest.update(content)
        file.write(content)

    try:
        async for part in request.stream():
            size += len(part)
            if size > limit_bytes:
                raise _too_large(limit_bytes)
            waiting += part
            if len(waiting) >= WRITE_BYTES:
                await run_in_threadpool(write, bytes(waiting))
                waiting.clear()
    except ClientDisconnect as fault:
        raise Problem(400, "body-incomplete", "The body broke off", "The connection ended before the body.") from fault
    await run_in_threadpool(write, bytes(waiting))
    return size, digest.hexdigest()
