"""Entity tags: a representation is named by the revision it shows."""

from __future__ import annotations

from collections.abc import Mapping

from starlette.responses import Response

from service.problems import Problem


def entity_tag(revision: int, media_type: str) -> str:
    """Strong entity tag of a revision in one form."""
    return f'"{revision}-{media_type.rpartition("/")[2]}"'


def check_preconditions(headers: Mapping[str, str], revision: int | None) -> None:
    """Refuse a write whose If-Match or If-None-Match does not hold.

    Parameters
    ----------
    headers : mapping of lower-case names
    revision : int or None, of what is stored; None where nothing is

    Raises
    ------
    Problem
        The precondition failed (412).
    """
    if (wanted := headers.get("if-match")) is not None:
        held = revision is not None and ("*" in _tags(wanted) or str(revision) in map(_revision, _tags(wanted)))
        if not held:
            now = "nothing is stored" if revision is None else f"the stored revision is {revision}"
            raise _failed(f"If-Match is {wanted[:60]}, but {now}. Read it again before you change it.")
    if headers.get("if-none-match", "").strip() == "*" and revision is not None:
        raise _failed(f"If-None-Match: * asks for a new one, but revision {revision} is stored.")


def not_modified(headers: Mapping[str, str], tag: str) -> Response | None:
    """The short answer to a reader who has this already, None for others."""
    known = headers.get("if-none-match")
    if known is not None and ("*" in _tags(known) or tag in _tags(known)):
        return Response(status_code=304, headers={"ETag": tag})
    return None


def _tags(text: str) -> list[str]:
    return [part.strip().removeprefix("W/") for part in text.split(",")]


def _revision(tag: str) -> str:
    # A writer may have read any form; what it changes is the same revision.
    return tag.strip('"').partition("-")[0]


def _failed(detail: str) -> Problem:
    return Problem(412, "precondition-failed", "What is stored has changed", detail)
