"""Who is asking: the one dependency that looks at keys."""

from __future__ import annotations

import hmac
from dataclasses import dataclass
from typing import Annotated

from fastapi import Depends, Request
from fastapi.security import HTTPAuthorizationCredentials, HTTPBearer

from service.problems import Problem

# Named for the API document only; refusals are made here, so that they are problems like all others.
_BEARER = HTTPBearer(
    auto_error=False, description="The key of SOJOURN_ADMIN_KEY, or of admin.key in the data directory."
)


@dataclass(frozen=True)
class Principal:
    """Who is asking.

    Attributes
    ----------
    name : str
    programme : str, the programme whose animals and zones are meant
    """

    name: str
    programme: str


async def principal(
    request: Request, _documented: Annotated[HTTPAuthorizationCredentials | None, Depends(_BEARER)]
) -> Principal:
    """Holder of the key that came with the request.

    Raises
    ------
    Problem
        No key, or a wrong one (401).
    """
    scheme, _, key = request.headers.get("authorization", "").partition(" ")
    if scheme.lower() != "bearer" or not key.strip():
        raise _refusal("No key was sent. Send the header Authorization: Bearer and the key.", "Bearer")
    expected = request.app.state.context.settings.admin_key or ""
    if not expected or not hmac.compare_digest(key.strip().encode(), expected.encode()):
        raise _refusal("The key is not valid. Check it for missing characters.", 'Bearer error="invalid_token"')
    return Principal("admin", "default")


def _refusal(detail: str, challenge: str) -> Problem:
    return Problem(401, "key-refused", "A valid key is needed", detail, headers={"WWW-Authenticate": challenge})


Caller = Annotated[Principal, Depends(principal)]
