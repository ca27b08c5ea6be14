"""Whether the server answers, and whether everything that was sent is computed."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Query
from starlette.responses import Response

from service.routes.context import Site, json_response
from service.routes.models import HealthBody, StatusBody
from service.routes.parameters import Parameters
from service.store.staleness import status
from service.writers.status import status_body

router = APIRouter(tags=["status"])
open_router = APIRouter(tags=["status"])


@open_router.get("/health", response_model=HealthBody)
async def get_health(_: Annotated[Parameters, Query()]) -> Response:
    """Liveness; needs no key."""
    return json_response({"status": "ok"})


@router.get("/status", response_model=StatusBody)
def get_status(site: Site, _: Annotated[Parameters, Query()]) -> Response:
    """What is computed, what is pending, and what failed."""
    with site.store.read() as connection:
        body = status(connection)
    progress = None if site.reconciler is None else site.reconciler.progress
    return json_response(status_body(body, progress))
