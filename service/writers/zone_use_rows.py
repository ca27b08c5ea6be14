"""Zone-use rows as dicts, fields in the order of the contract."""

from __future__ import annotations

from typing import Any, Final

from service.store.zone_use_reading import StoredRow

ROW_FIELDS: Final = (
    "programme",
    "animal",
    "zone",
    "zone_version",
    "month",
    "distribution",
    "estimator",
    "fixes",
    "tracked_hours",
    "covered_hours",
    "coverage",
    "in_force_hours",
    "longest_gap_hours",
    "probability_mass",
    "inside_interval",
    "use_probability",
    "numerical_error",
    "expected_hours",
    "time_fraction",
    "inside_hours",
    "bounds",
    "path_bounds",
    "visits",
    "flags",
)

CAUTIONS: Final = (
    "Figures speak of tracked animals during their covered time only; they say nothing of animals without a tag, "
    "and they are not a legal finding.",
    "Exact places of sensitive species must be handled under local regulation and permits.",
)
"""What every answer about zone use says."""


def zone_use_row(stored: StoredRow, programme: str) -> dict[str, Any]:
    """One row of GET /zone-use.

    Parameters
    ----------
    stored : StoredRow
    programme : str
    """
    figures = stored.figures
    coverage = figures.covered_hours / figures.tracked_hours
    mass = figures.probability_mass
    path_bounds = bounds_of(figures.time_fraction, coverage)
    values = (
        programme,
        stored.animal,
        stored.zone,
        stored.zone_version,
        stored.month,
        "occurrence",
        stored.estimator,
        figures.fixes,
        figures.tracked_hours,
        figures.covered_hours,
        round(min(1.0, coverage), 9),
        figures.in_force_hours,
        figures.longest_gap_hours,
        mass,
        None,
        None,
        figures.numerical_error,
        None if mass is None else round(mass * figures.covered_hours, 6),
        figures.time_fraction,
        figures.inside_hours,
        path_bounds,
        path_bounds,
        figures.visits,
        list(stored.flags),
    )
    return dict(zip(ROW_FIELDS, values, strict=True))


def bounds_of(fraction: float | None, coverage: float) -> list[float]:
    """What the whole time could be if every gap were outside, or inside.

    Parameters
    ----------
    fraction : float or None, share of the covered time inside; None without covered time
    coverage : float, covered time over tracked time
    """
    if fraction is None:
        return [0.0, 1.0]
    low = fraction * coverage
    return [round(min(1.0, low), 9), round(min(1.0, low + 1.0 - coverage), 9)]
