"""Columns of few distinct values, as codes into the list of them."""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

Value = TypeVar("Value", bound=Hashable)


def coded(values: Sequence[Value]) -> tuple[NDArray[np.int64], list[Value]]:
    """Code of each value, shape (n,), and the distinct values in order of appearance.

    Parameters
    ----------
    values : sequence, length n
    """
    if len(values) and values.count(values[0]) == len(values):
        return np.zeros(len(values), dtype=np.int64), [values[0]]
    code_of = {value: code for code, value in enumerate(dict.fromkeys(values))}
    return np.fromiter(map(code_of.__getitem__, values), np.int64, len(values)), list(code_of)
