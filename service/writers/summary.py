"""Zone use over animals: one row per zone version and month, every animal with the same weight."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

from service.store.zone_use_reading import StoredRow
from service.writers.csv_cells import csv_bytes
from service.writers.zone_use_rows import CAUTIONS

SUMMARY_FIELDS: Final = (
    "programme",
    "zone",
    "zone_version",
    "month",
    "distribution",
    "animals_tracked",
    "animals_with_covered_time",
    "animals_using",
    "mean_probability_mass",
    "minimum_probability_mass",
    "maximum_probability_mass",
    "mean_time_fraction",
    "minimum_time_fraction",
    "maximum_time_fraction",
)

USING_RULE: Final = (
    "An animal counts as using a zone in a month if its time fraction is above 0, or its probability mass is above "
    "its numerical error. Means give every animal with covered time the same weight."
)

SummaryKey = tuple[str, int]


@dataclass
class ZoneSummary:
    """Sums over the rows of one zone, by month and version."""

    masses: dict[SummaryKey, list[float]] = field(default_factory=dict)
    fractions: dict[SummaryKey, list[float]] = field(default_factory=dict)
    tracked: dict[SummaryKey, int] = field(default_factory=dict)
    using: dict[SummaryKey, int] = field(default_factory=dict)

    def add(self, rows: Iterable[StoredRow]) -> None:
        """Take in rows of this zone, one per animal, month and version, in any order."""
        for row in rows:
            key = (row.month, row.zone_version)
            self.tracked[key] = self.tracked.get(key, 0) + 1
            figures = row.figures
            mass, error, fraction = figures.probability_mass, figures.numerical_error, figures.time_fraction
            if mass is None or error is None or fraction is None:
                continue
            self.masses.setdefault(key, []).append(mass)
            self.fractions.setdefault(key, []).append(fraction)
            self.using[key] = self.using.get(key, 0) + (fraction > 0.0 or mass > error)

    def rows(self, programme: str, zone: str) -> list[dict[str, Any]]:
        """Summary rows by month and version."""
        return [self._row(programme, zone, key) for key in sorted(self.tracked)]

    def _row(self, programme: str, zone: str, key: SummaryKey) -> dict[str, Any]:
        masses, fractions = self.masses.get(key, []), self.fractions.get(key, [])
        values = (
            programme,
            zone,
            key[1],
            key[0],
            "occurrence",
            self.tracked[key],
            len(masses),
            self.using.get(key, 0),
            *_spread(masses),
            *_spread(fractions),
        )
        return dict(zip(SUMMARY_FIELDS, values, strict=True))


def _spread(values: list[float]) -> tuple[float | None, float | None, float | None]:
    """Mean, least and largest; None of nothing."""
    if not values:
        return None, None, None
    return round(sum(sorted(values)) / len(values), 9), min(values), max(values)


def summary_csv(rows: Iterable[Mapping[str, Any]]) -> bytes:
    """Summary rows as CSV, the cautions as a last column."""
    cautions = " ".join(CAUTIONS)
    return csv_bytes((*SUMMARY_FIELDS, "cautions"), ({**row, "cautions": cautions} for row in rows))
