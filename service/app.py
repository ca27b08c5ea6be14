"""The HTTP application: routes put together, and every failure turned into problem details."""

from __future__ import annotations

from typing import Any, Final

from fastapi import Depends, FastAPI, Request
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.responses import Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.principal import principal
from service.problems import PROBLEM_MEDIA_TYPE, Problem, problem_response
from service.recompute.reconciler import Reconciler
from service.routes import animals, status, submissions, tracks, zone_use, zones
from service.routes.context import Context
from service.routes.models import ProblemBody
from service.routes.parameters import refuse_repeated
from service.settings import Settings
from service.store.database import Store

_PROBLEM_CONTENT: Final = {"content": {PROBLEM_MEDIA_TYPE: {"schema": ProblemBody.model_json_schema()}}}
_DOCUMENTED_PROBLEMS: Final[dict[int | str, dict[str, Any]]] = {
    "4XX": {"description": "The request cannot be done; the body says why.", **_PROBLEM_CONTENT},
    "5XX": {"description": "The server failed.", **_PROBLEM_CONTENT},
}


def create_app(store: Store, settings: Settings, reconciler: Reconciler | None) -> FastAPI:
    """The application around an open store.

    Parameters
    ----------
    store : Store, open; closed by whoever opened it
    settings : Settings, with the admin key
    reconciler : Reconciler or None, told of every write
    """
    app = FastAPI(
        title="Sojourn",
        description="Monthly use of management zones by tracked animals, with what is not known.",
        version="0.1.0",
        # The pages behind these would be loaded from other people's servers.
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
        responses=_DOCUMENTED_PROBLEMS,
    )
    app.state.context = Context(store, settings, reconciler)
    app.include_router(status.open_router)
    for module in (tracks, submissions, animals, zones, zone_use, status):
        app.include_router(module.router, dependencies=[Depends(principal), Depends(refuse_repeated)])
    app.add_exception_handler(Problem, _answer_problem)
    app.add_exception_handler(RequestValidationError, _answer_invalid_request)
    app.add_exception_handler(HTTPException, _answer_http_exception)
    app.add_exception_handler(Exception, _answer_failure)
    app.add_middleware(_HeadAsGet)
    return app


class _HeadAsGet:
    """HEAD on every GET: the same headers, no body."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http" or scope["method"] != "HEAD":
            await self.app(scope, receive, send)
            return

        async def send_without_body(message: Message) -> None:
            if message["type"] == "http.response.body":
                message = {**message, "body": b""}
            await send(message)

        await self.app({**scope, "method": "GET"}, receive, send_without_body)


async def _answer_problem(_request: Request, fault: Exception) -> Response:
    if not isinstance(fault, Problem):
        raise fault
    return problem_response(fault)


async def _answer_invalid_request(_request: Request, fault: Exception) -> Response:
    """Faults of query and path parameters; bodies are read and judged elsewhere."""
    if not isinstance(fault, RequestValidationError):
        raise fault
    errors = [_parameter_fault(error) for error in fault.errors()]
    detail = " ".join(f"{error['parameter']}: {error['detail']}" for error in errors)
    return problem_response(
        Problem(400, "invalid-parameter", "A query parameter is not valid", detail, {"errors": errors})
    )


def _parameter_fault(error: dict[str, Any]) -> dict[str, str]:
    # The value itself is never sent back: it may be anything.
    name = ".".join(str(part) for part in error["loc"][1:])[:60] or "query"
    if error["type"] == "extra_forbidden":
        return {"parameter": name, "code": "unknown_parameter", "detail": "This parameter is not known here."}
    return {"parameter": name, "code": error["type"], "detail": error["msg"]}


_HTTP_TITLES: Final = {
    404: ("not-found", "There is nothing here", "There is no such path. The paths are listed in /openapi.json."),
    405: ("method-not-allowed", "The method is not allowed", "This path does not know that method."),
}


async def _answer_http_exception(_request: Request, fault: Exception) -> Response:
    if not isinstance(fault, HTTPException):
        raise fault
    slug, title, detail = _HTTP_TITLES.get(
        fault.status_code, ("http-error", "The request cannot be done", str(fault.detail))
    )
    return problem_response(Problem(fault.status_code, slug, title, detail, headers=dict(fault.headers or {})))


async def _answer_failure(_request: Request, _fault: Exception) -> Response:
    # What went wrong goes to the server's log, not to whoever asked.
    detail = "The server failed at this request; nothing was changed. Its log says more."
    return problem_response(Problem(500, "internal-error", "The server failed", detail))
