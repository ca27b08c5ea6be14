"""Faults of the rows of a chunk, gathered column by column and told row by row."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

from service.readers.fix_rows import RejectedRow

SHOWN_CHARACTERS: Final = 100


@dataclass(frozen=True)
class _Fault:
    column: str | None
    code: str
    message: str
    value: str | None


@dataclass
class Faults:
    """Faults found so far, by place of the row in the chunk."""

    of_row: dict[int, list[_Fault]] = field(default_factory=dict)

    def add(self, row: int, column: str | None, code: str, message: str, value: str | None = None) -> None:
        """Note a fault of one row.

        Parameters
        ----------
        row : int, place in the chunk
        column, code, message, value : as in RejectedRow
        """
        found = self.of_row.setdefault(row, [])
        if found and found[0].column is None:
            # The row as a whole is at fault: what its cells seem to say means nothing.
            return
        cut = None if value is None else value[:SHOWN_CHARACTERS]
        found.append(_Fault(column, code, message, cut))

    def good(self, count: int) -> NDArray[np.bool_]:
        """Which of the rows of a chunk have no fault, shape (count,)."""
        good = np.ones(count, dtype=bool)
        good[list(self.of_row)] = False
        return good

    def rejected_rows(self, row_number: NDArray[np.int64]) -> list[RejectedRow]:
        """One entry per bad row, in order: its first fault, and the messages of all.

        Parameters
        ----------
        row_number : ndarray of int64, 1-based number of each row of the chunk
        """
        return [
            RejectedRow(
                int(row_number[row]),
                found[0].column,
                found[0].code,
                " ".join(fault.message for fault in found),
                found[0].value,
            )
            for row, found in sorted(self.of_row.items())
        ]
