"""What every route works with."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator
from dataclasses import dataclass, field
from typing import Annotated, Any, Final

import orjson
from fastapi import Depends, Request
from starlette.responses import Response

from service.media_types import JSON
from service.problems import Problem
from service.readers.identifiers import identifier_fault
from service.recompute.reconciler import Reconciler
from service.settings import Settings
from service.store.database import Store

WRITES_AT_A_TIME: Final = 8
"""Writes that may hold a thread while they wait for each other; the server's other threads are left to readers."""


@dataclass(frozen=True)
class Context:
    """The store, the settings and, unless nothing computes, the reconciler of a server."""

    store: Store
    settings: Settings
    reconciler: Reconciler | None
    write_turns: asyncio.Semaphore = field(default_factory=lambda: asyncio.Semaphore(WRITES_AT_A_TIME))

    def notify(self) -> None:
        """Tell the reconciler, if there is one, that something was written."""
        if self.reconciler is not None:
            self.reconciler.notify()


async def _context(request: Request) -> Context:
    context: Context = request.app.state.context
    return context


Site = Annotated[Context, Depends(_context)]


async def _write_turn(site: Site) -> AsyncIterator[None]:
    async with site.write_turns:
        yield


WriteTurn = Annotated[None, Depends(_write_turn)]
"""Last parameter of a route that writes: after its body, so that a slow upload does not keep others waiting."""


def json_response(
    body: Any, status: int = 200, headers: dict[str, str] | None = None, media_type: str = JSON
) -> Response:
    """Answer in JSON, or in a media type that is JSON underneath."""
    return Response(orjson.dumps(body), status_code=status, headers=headers, media_type=media_type)


def refuse_identifier(identifier: str) -> None:
    """Refuse a path whose last part cannot be an identifier.

    Raises
    ------
    Problem
        It cannot (422).
    """
    if message := identifier_fault(identifier):
        raise Problem(422, "invalid-identifier", "The identifier is not valid", message)
