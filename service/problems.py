"""Problem details (RFC 9457): the one form in which the service says that something is wrong."""

from __future__ import annotations

from typing import Any, Final

import orjson
from starlette.responses import Response

PROBLEM_MEDIA_TYPE: Final = "application/problem+json"


class Problem(Exception):  # noqa: N818 - named as RFC 9457 names it
    """A request cannot be done; becomes the answer.

    Parameters
    ----------
    status : int, HTTP status
    slug : str
        Stable name of the kind of problem in ``kebab-case``; the type is ``/problems/<slug>``.
    title : str, the same words for every problem of that kind
    detail : str
        What is wrong here, what was got, what to do.
    extra : dict, optional, further members of the answer
    headers : dict, optional, further HTTP headers
    """

    def __init__(
        self,
        status: int,
        slug: str,
        title: str,
        detail: str,
        extra: dict[str, Any] | None = None,
        headers: dict[str, str] | None = None,
    ) -> None:
        super().__init__(detail)
        self.status = status
        self.type = f"/problems/{slug}"
        self.title = title
        self.detail = detail
        self.extra = extra or {}
        self.headers = headers or {}

    def body(self) -> dict[str, Any]:
        """Members of the answer, the standard ones first."""
        standard = {"type": self.type, "title": self.title, "status": self.status, "detail": self.detail}
        return standard | self.extra


def problem_response(problem: Problem) -> Response:
    """HTTP response of a problem."""
    return Response(
        orjson.dumps(problem.body(), option=orjson.OPT_SERIALIZE_NUMPY),
        status_code=problem.status,
        media_type=PROBLEM_MEDIA_TYPE,
        headers=problem.headers,
    )
