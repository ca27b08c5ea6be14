"""Zone use as CSV."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from service.writers.csv_cells import csv_bytes
from service.writers.zone_use_rows import CAUTIONS, ROW_FIELDS


def zone_use_csv(rows: Iterable[Mapping[str, Any]]) -> bytes:
    """The rows with all their fields, and the cautions as a last column.

    Parameters
    ----------
    rows : iterable of mappings, as `zone_use_row` makes them
    """
    cautions = " ".join(CAUTIONS)
    return csv_bytes((*ROW_FIELDS, "cautions"), ({**row, "cautions": cautions} for row in rows))
