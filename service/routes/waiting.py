"""``Prefer: wait=30`` (RFC 7240): wait until what is asked for is computed, at most so many seconds."""

from __future__ import annotations

import asyncio
import re
import time
from typing import Final

from fastapi import Request
from starlette.concurrency import run_in_threadpool

from service.principal import Caller
from service.routes.context import Context, Site
from service.store.zone_use_reading import ZoneUseFilter, touched_current

LONGEST_WAIT_S: Final = 120.0
_LOOK_AGAIN_S: Final = (0.02, 0.05, 0.1, 0.2, 0.5)
_WAIT = re.compile(r'(?:^|[,;\s])wait\s*=\s*"?(\d{1,9})"?\s*(?:[,;]|$)', re.IGNORECASE)


async def wait_if_preferred(request: Request, site: Site, caller: Caller) -> None:
    """Return once the rows asked for are current, or the preferred time is over; the answer says which."""
    preferred = _WAIT.search(", ".join(request.headers.getlist("prefer")))
    if preferred is None or site.reconciler is None:
        return
    deadline = time.monotonic() + min(float(preferred[1]), LONGEST_WAIT_S)
    asked = request.query_params
    wanted = ZoneUseFilter(animal=asked.get("animal"), zone=asked.get("zone"), group=asked.get("group"))
    pauses = iter(_LOOK_AGAIN_S)
    pause = next(pauses)
    # The server's threads are left to others between two looks.
    while not await run_in_threadpool(_is_current, site, caller.programme, wanted):
        if time.monotonic() + pause > deadline:
            return
        await asyncio.sleep(pause)
        pause = next(pauses, pause)


def _is_current(site: Context, programme: str, wanted: ZoneUseFilter) -> bool:
    with site.store.read() as connection:
        return touched_current(connection, programme, wanted)
