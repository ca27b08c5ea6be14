"""Medians of repeated runs, and rows of the printed table."""

import statistics
import time
from collections.abc import Callable
from typing import NamedTuple

REPEATS = 5


class Row(NamedTuple):
    """One line of the table: what was measured, the figure, and what the figure must reach."""

    what: str
    figure: str
    wanted: str


def median_s(work: Callable[[], object], repeats: int = REPEATS) -> float:
    """Median wall time of a call, seconds, after one call that is not counted."""
    work()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return statistics.median(times)
