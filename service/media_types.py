"""The one place where the form of an answer is chosen: ``f=`` beats the Accept header."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from service.problems import Problem

JSON: Final = "application/json"
GEOJSON: Final = "application/geo+json"
CSV: Final = "text/csv"

SHORT_NAMES: Final = {"json": JSON, "geojson": GEOJSON, "csv": CSV}
"""What ``f=`` may say."""


def negotiated(offered: Sequence[str], short_name: str | None, accept: str | None) -> str:
    """Media type of the answer.

    Parameters
    ----------
    offered : sequence of str, media types that can be given, the preferred one first
    short_name : str or None, value of ``f=``
    accept : str or None, the Accept header

    Raises
    ------
    Problem
        Nothing that is offered is acceptable (406).
    """
    if short_name is not None:
        chosen = SHORT_NAMES.get(short_name)
        if chosen in offered:
            return str(chosen)
        raise _not_acceptable(offered, f"f={short_name[:40]}")
    if not accept or not accept.strip():
        return offered[0]
    quality, best = max(((_quality(name, accept), -place) for place, name in enumerate(offered)))
    if quality > 0.0:
        return offered[-best]
    raise _not_acceptable(offered, f"Accept: {accept[:100]}")


def parse_media_type(text: str) -> tuple[str, dict[str, str]]:
    """Media type and parameters of a header value, names in lower case."""
    first, *rest = text.split(";")
    parameters = dict(part.strip().partition("=")[::2] for part in rest if "=" in part)
    return first.strip().lower(), {name.strip().lower(): value.strip().strip('"') for name, value in parameters.items()}


def _not_acceptable(offered: Sequence[str], asked: str) -> Problem:
    names = [name for name, media_type in SHORT_NAMES.items() if media_type in offered]
    return Problem(
        406,
        "not-acceptable",
        "The form asked for is not offered",
        f"{asked} is not offered here. Ask for {', '.join(offered)}, or write f={' or f='.join(names)}.",
        {"offered": list(offered)},
    )


def _quality(media_type: str, accept: str) -> float:
    """Weight that an Accept header gives a media type: its most specific range decides."""
    kind = media_type.split("/", maxsplit=1)[0]
    specific = {media_type: 3, f"{kind}/*": 2, "*/*": 1}
    found = (0, 0.0)
    for part in accept.split(","):
        name, parameters = parse_media_type(part)
        if name in specific and specific[name] > found[0]:
            found = (specific[name], _weight(parameters.get("q", "1")))
    return found[1]


def _weight(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        return 0.0
    return value if 0.0 <= value <= 1.0 else 0.0
