"""Rows of zone use: what is known of an animal in a month, and of a zone in it."""

from __future__ import annotations

from dataclasses import dataclass

from estimators.defaults import TRIVIAL_NUMERICAL_ERROR


@dataclass(frozen=True)
class MonthFacts:
    """What is known of an animal in a month, whatever the zone.

    Attributes
    ----------
    month : str, ``"2026-03"``
    tracked_from_ms : int, first tracked instant of the month, milliseconds since 1970-01-01 UTC
    fixes : int, fixes within the tracked time
    tracked_hours, covered_hours, longest_gap_hours : float
    flags : tuple of str: assumed_error, zero_position, wide_spread, variance_from_prior
    """

    month: str
    tracked_from_ms: int
    fixes: int
    tracked_hours: float
    covered_hours: float
    longest_gap_hours: float
    flags: tuple[str, ...]

    def outside_row(self, zone_index: int) -> ZoneMonth:
        """Row of a zone that was in force for all of the tracked month and that no part of the path came near."""
        known = self.covered_hours > 0.0
        return ZoneMonth(
            zone_index,
            self.month,
            self.fixes,
            self.tracked_hours,
            self.tracked_hours,
            self.covered_hours,
            self.longest_gap_hours,
            0.0 if known else None,
            TRIVIAL_NUMERICAL_ERROR if known else None,
            0.0 if known else None,
            0.0,
            0,
        )


@dataclass(frozen=True)
class ZoneMonth:
    """Use of one zone in one month.

    Attributes
    ----------
    zone_index : int, place of the zone in the list given
    month : str
    fixes : int
    in_force_hours : float, tracked time that the zone was in force
    tracked_hours, covered_hours, longest_gap_hours : float, of the time in force
    probability_mass, numerical_error, time_fraction : float or None, None without covered time
    inside_hours : float, along the straight path
    visits : int
    """

    zone_index: int
    month: str
    fixes: int
    in_force_hours: float
    tracked_hours: float
    covered_hours: float
    longest_gap_hours: float
    probability_mass: float | None
    numerical_error: float | None
    time_fraction: float | None
    inside_hours: float
    visits: int
