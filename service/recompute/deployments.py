"""Deployments: which time of an animal is tracked, and which of its fixes count."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from estimators import Span, join_spans, local_date_ms

_HOUR_MS = 3_600_000


def tracked_time(
    attributes: Mapping[str, Any],
    tag: NDArray[np.int64],
    tag_names: tuple[str, ...],
    time_ms: NDArray[np.int64],
    time_zone: str,
    known_until_ms: int,
) -> tuple[list[Span], NDArray[np.bool_], bool]:
    """Tracked time of an animal.

    Parameters
    ----------
    attributes : mapping
        ``deployments`` (start, end, tag), ``post_release_window_hours``.
    tag : ndarray of int64, shape (n,), index into ``tag_names``
    tag_names : tuple of str
    time_ms : ndarray of int64, shape (n,)
    time_zone : str, IANA name, for dates
    known_until_ms : int, when the animal was last told of; a deployment that goes on later is tracked until then

    Returns
    -------
    spans : list of (start_ms, end_ms)
        Half-open, sorted, disjoint: deployments less the time after each release.
    counted : ndarray of bool, shape (n,)
        Fixes within a deployment; those soon after a release count too, for they say where the animal came from.
    implied : bool
        No deployment was stated: one from the first to the last fix is taken.

    Notes
    -----
    A deployment without end ends at its last fix; a stated end does not belong to it.
    """
    if not attributes.get("deployments"):
        counted = np.ones(len(time_ms), dtype=bool)
        deployments = [(int(time_ms.min()), int(time_ms.max()))] if len(time_ms) else []
        return _less_release(deployments, attributes), counted, True
    counted = np.zeros(len(time_ms), dtype=bool)
    deployments = []
    for stated in attributes["deployments"]:
        within = time_ms >= (start_ms := local_date_ms(stated["start"], time_zone))
        if stated.get("tag") is not None:
            within &= np.array([name == stated["tag"] for name in tag_names], dtype=bool)[tag]
        if stated.get("end") is not None:
            end_ms = local_date_ms(stated["end"], time_zone)
            within &= time_ms < end_ms
            end_ms = min(end_ms, known_until_ms)
        else:
            end_ms = int(time_ms[within].max(initial=start_ms))
        counted |= within
        deployments.append((start_ms, end_ms))
    return _less_release(deployments, attributes), counted, False


def _less_release(deployments: list[Span], attributes: Mapping[str, Any]) -> list[Span]:
    window_ms = round((attributes.get("post_release_window_hours") or 0.0) * _HOUR_MS)
    return join_spans([(start_ms + window_ms, end_ms) for start_ms, end_ms in deployments])
