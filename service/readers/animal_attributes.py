"""Attributes of an animal from JSON, checked."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any, Final

from estimators import CalendarError
from service.problems import Problem
from service.readers.dates import date_ms
from service.readers.identifiers import identifier_fault
from service.readers.times import EARLIEST

ESTIMATORS: Final = ("random_walk", "brownian_bridge")
LONGEST_TEXT: Final = 300
MOST_ENTRIES: Final = 1000
FIRST_DEPLOYMENT_MS: Final = round(EARLIEST.timestamp() * 1000)
LAST_DEPLOYMENT_MS: Final = 7_258_118_400_000
"""2200-01-01 in UTC. A deployment has a row for each of its months, whatever its end."""

Errors = list[dict[str, str]]


def read_animal_attributes(body: Mapping[str, Any], animal: str, time_zone: str) -> dict[str, Any]:
    """Attributes of an animal, every one present, absent ones None or empty.

    Parameters
    ----------
    body : mapping, as sent
    animal : str, identifier from the path; one in the body must be the same
    time_zone : str, IANA name, for dates of deployments

    Raises
    ------
    Problem
        An attribute is unknown or not valid; all faults are named (422).
    """
    errors: Errors = []
    for name in body:
        if name not in _READERS and name != "animal":
            _add(errors, f"/{name}", "unknown_attribute", f"{name[:40]!r} is unknown. Known: {', '.join(_READERS)}.")
    if body.get("animal", animal) != animal:
        message = f"The body is of animal {str(body['animal'])[:40]!r}, the path of {animal!r}. Make them the same."
        _add(errors, "/animal", "animal_mismatch", message)
    attributes = {name: read(body.get(name), f"/{name}", errors) for name, read in _READERS.items()}
    _check_deployment_times(attributes["deployments"] or [], time_zone, errors)
    if errors:
        raise Problem(
            422,
            "invalid-animal",
            "An animal is not valid",
            errors[0]["detail"] + (f" There are {len(errors)} faults; all are listed." if len(errors) > 1 else ""),
            {"errors": errors},
        )
    return attributes


def _add(errors: Errors, pointer: str, code: str, detail: str) -> None:
    errors.append({"code": code, "pointer": pointer, "detail": detail})


def _text(value: Any, pointer: str, errors: Errors) -> str | None:
    if value is None:
        return None
    if not isinstance(value, str) or not value.strip() or len(value) > LONGEST_TEXT:
        _add(errors, pointer, "not_a_text", f"{pointer[1:]} must be a text of 1 to {LONGEST_TEXT} characters, or null.")
        return None
    return value.strip()


def _positive(largest: float, *, zero_allowed: bool = False) -> Callable[[Any, str, Errors], float | None]:
    def read(value: Any, pointer: str, errors: Errors) -> float | None:
        if value is None:
            return None
        number = float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan
        if not (0.0 < number <= largest or (zero_allowed and number == 0.0)):
            lowest = "from 0" if zero_allowed else "above 0"
            message = f"{pointer[1:]} must be a number {lowest} to {largest:g}, got {str(value)[:40]}."
            _add(errors, pointer, "out_of_range", message)
            return None
        return number

    return read


def _estimator(value: Any, pointer: str, errors: Errors) -> str | None:
    if value is not None and value not in ESTIMATORS:
        message = f"estimator {str(value)[:40]!r} is unknown. Use one of {', '.join(ESTIMATORS)}."
        _add(errors, pointer, "unknown_estimator", message)
        return None
    return None if value is None else str(value)


def _entries(value: Any, pointer: str, errors: Errors) -> list[Any]:
    if value is None:
        return []
    if not isinstance(value, list) or len(value) > MOST_ENTRIES:
        _add(errors, pointer, "not_a_list", f"{pointer[1:]} must be a list of at most {MOST_ENTRIES}.")
        return []
    return value


def _groups(value: Any, pointer: str, errors: Errors) -> list[str]:
    groups = []
    for number, name in enumerate(_entries(value, pointer, errors)):
        fault = identifier_fault(name) if isinstance(name, str) else "A group is a text."
        if fault:
            _add(errors, f"{pointer}/{number}", "bad_group", fault)
        else:
            groups.append(name)
    return sorted(set(groups))


def _deployments(value: Any, pointer: str, errors: Errors) -> list[dict[str, Any]]:
    deployments = []
    for number, entry in enumerate(_entries(value, pointer, errors)):
        here = f"{pointer}/{number}"
        if not isinstance(entry, dict):
            _add(errors, here, "not_an_object", 'A deployment is an object: {"start": ..., "end": ..., "tag": ...}.')
            continue
        for name in entry.keys() - {"start", "end", "tag"}:
            _add(errors, f"{here}/{name}", "unknown_attribute", f"{name[:40]!r} is unknown. Known: start, end, tag.")
        tag = entry.get("tag")
        fault = None if tag is None else identifier_fault(tag) if isinstance(tag, str) else "A tag is a text."
        if fault:
            _add(errors, f"{here}/tag", "bad_tag", fault)
        read = {name: _text(entry.get(name), f"{here}/{name}", errors) for name in ("start", "end")}
        deployments.append({**read, "tag": tag})
    return deployments


def _check_deployment_times(deployments: list[dict[str, Any]], time_zone: str, errors: Errors) -> None:
    for number, deployment in enumerate(deployments):
        pointer = f"/deployments/{number}"
        instants: dict[str, int] = {}
        for name in ("start", "end"):
            if (text := deployment[name]) is not None:
                try:
                    instants[name] = date_ms(text, time_zone, FIRST_DEPLOYMENT_MS, LAST_DEPLOYMENT_MS)
                except CalendarError as fault:
                    _add(errors, f"{pointer}/{name}", fault.code, fault.message)
        if deployment["start"] is None:
            _add(errors, f"{pointer}/start", "missing_start", "A deployment needs a start, a date or a time.")
        elif len(instants) == 2 and instants["end"] <= instants["start"]:
            _add(errors, f"{pointer}/end", "empty_deployment", "The deployment ends before it starts.")


_READERS: Final[Mapping[str, Callable[[Any, str, Errors], Any]]] = {
    "species": _text,
    "sex": _text,
    "life_stage": _text,
    "groups": _groups,
    "deployments": _deployments,
    "longest_bridged_gap_hours": _positive(8784.0),
    "post_release_window_hours": _positive(8784.0, zero_allowed=True),
    "default_error_sd_m": _positive(1e6),
    "estimator": _estimator,
}

ATTRIBUTES: Final = tuple(_READERS)
"""Names of all attributes, in the order in which they are shown."""
