"""Monthly use of zones by one animal: the one call that brings the estimators together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from estimators.brownian_bridge import BrownianBridge
from estimators.defaults import (
    DEFAULT_LONGEST_BRIDGED_GAP_HOURS,
    DEFAULT_MINIMUM_STAY_HOURS,
    TRIVIAL_NUMERICAL_ERROR,
    WIDE_SPREAD_SD_M,
)
from estimators.gaussian_path import CoveredSteps, GaussianPath, covered_steps, path_between_fixes
from estimators.months import MonthSpan, Span, intersect_spans, length_ms, month_spans
from estimators.movement_variance import VariancePosterior, variance_posterior
from estimators.random_walk import RandomWalk
from estimators.residence import inside_stretches, visits_per_period
from estimators.track import Track
from estimators.zone import Zone
from estimators.zone_mass import Cells, integrated_zone_mass
from estimators.zone_month import MonthFacts, ZoneMonth

FloatArray = NDArray[np.float64]
EstimatorName = Literal["random_walk", "brownian_bridge"]
_MODELS = {model.name: model for model in (RandomWalk, BrownianBridge)}
_HOUR_MS = 3_600_000.0


@dataclass(frozen=True)
class ZoneUseOptions:
    """How zone use is computed.

    Attributes
    ----------
    time_zone : str, IANA name of the reporting time zone
    estimator : {"random_walk", "brownian_bridge"}
    longest_bridged_gap_hours, minimum_stay_hours : float
    """

    time_zone: str = "UTC"
    estimator: EstimatorName = "random_walk"
    longest_bridged_gap_hours: float = DEFAULT_LONGEST_BRIDGED_GAP_HOURS
    minimum_stay_hours: float = DEFAULT_MINIMUM_STAY_HOURS


@dataclass(frozen=True)
class AnimalZoneUse:
    """Monthly zone use of one animal.

    Attributes
    ----------
    estimator : str
    parameters : dict, the fit; give it back to skip fitting the same track
    months : tuple of MonthFacts
    rows : tuple of ZoneMonth
        Only what is not trivially zero: left out are months that the zone was in force throughout, without an
        edge in reach and outside.
    """

    estimator: str
    parameters: dict[str, Any]
    months: tuple[MonthFacts, ...]
    rows: tuple[ZoneMonth, ...]


@dataclass(frozen=True)
class _Animal:
    """What all zones of one animal share."""

    track: Track
    steps: CoveredSteps
    paths: tuple[GaussianPath, ...]
    balls_m: FloatArray
    months: list[MonthSpan]
    tracked: list[list[Span]]
    options: ZoneUseOptions


def estimate_zone_use(
    track: Track,
    tracked: Sequence[Span],
    zones: Sequence[Zone],
    options: ZoneUseOptions,
    parameters: Mapping[str, Any] | None = None,
) -> AnimalZoneUse:
    """Monthly use of zones by one animal.

    Parameters
    ----------
    track : Track
    tracked : sequence of (start_ms, end_ms), half-open, sorted, disjoint: deployments less post-release windows
    zones : sequence of Zone
    options : ZoneUseOptions
    parameters : mapping, optional, the fit of this same track from an earlier call

    Returns
    -------
    AnimalZoneUse
    """
    gap_ms = options.longest_bridged_gap_hours * _HOUR_MS
    steps = covered_steps(track, gap_ms)
    fit, paths = _fitted_paths(track, steps, options, parameters)
    months = month_spans(tracked[0][0], tracked[-1][1], options.time_zone) if tracked else []
    spans = [intersect_spans([(m.start_ms, m.end_ms)], list(tracked)) for m in months]
    kept = [k for k, span in enumerate(spans) if span]
    balls_m = np.concatenate([np.empty((0, 4)), *(path.block_balls_m() for path in paths)])
    animal = _Animal(track, steps, paths, balls_m, [months[k] for k in kept], [spans[k] for k in kept], options)
    rows = [row for index, zone in enumerate(zones) for row in _zone_rows(animal, index, zone)]
    return AnimalZoneUse(options.estimator, _stored(fit), tuple(_month_facts(animal, fit)), tuple(rows))


def _fitted_paths(
    track: Track, steps: CoveredSteps, options: ZoneUseOptions, parameters: Mapping[str, Any] | None
) -> tuple[VariancePosterior, tuple[GaussianPath, ...]]:
    if len(steps) == 0:
        # Nothing is covered, and nothing is learned of the movement variance.
        return variance_posterior(lambda _: 0.0), ()
    model = _MODELS[options.estimator](track, options.longest_bridged_gap_hours * _HOUR_MS)
    fit = _restored(parameters) if parameters else variance_posterior(model.log_likelihood)
    paths = tuple(
        path_between_fixes(track, steps, model.marginals(variance), variance, weight)
        for variance, weight in zip(fit.variance_m2_per_s, fit.weight, strict=True)
    )
    return fit, paths


def _stored(fit: VariancePosterior) -> dict[str, Any]:
    return {
        "movement_variance_m2_per_s": list(fit.variance_m2_per_s),
        "weight": list(fit.weight),
        "median_m2_per_s": fit.median_m2_per_s,
        "log_sd": fit.log_sd,
        "prior": "log-normal",
    }


def _restored(parameters: Mapping[str, Any]) -> VariancePosterior:
    return VariancePosterior(
        tuple(parameters["movement_variance_m2_per_s"]),
        tuple(parameters["weight"]),
        parameters["median_m2_per_s"],
        parameters["log_sd"],
    )


def _cells(steps: CoveredSteps, spans: Sequence[Sequence[Span]]) -> Cells:
    """Covered time cut at the spans of each period, in time order."""
    columns: list[tuple[NDArray[Any], ...]] = []
    for period, of_period in enumerate(spans):
        for start_ms, end_ms in of_period:
            first = int(np.searchsorted(steps.end_ms, start_ms, side="right"))
            last = int(np.searchsorted(steps.start_ms, end_ms, side="left"))
            part = np.arange(first, last)
            begin, length = steps.start_ms[part], steps.end_ms[part] - steps.start_ms[part]
            low = np.clip((start_ms - begin) / length, 0.0, 1.0)
            high = np.clip((end_ms - begin) / length, 0.0, 1.0)
            columns.append((part, np.full(len(part), period), low, high, (high - low) * length))
    if not columns:
        columns = [tuple(np.empty(0) for _ in range(5))]
    part, of, low, high, duration = (np.concatenate([column[k] for column in columns]) for k in range(5))
    return Cells(part.astype(np.int64), of.astype(np.int64), low, high, duration)


def _fix_counts(track: Track, spans: Sequence[Span], closing_ms: int) -> tuple[int, float, NDArray[np.bool_]]:
    """Fixes in spans, the longest time without one, and which fixes they are."""
    inside = np.zeros(len(track), dtype=bool)
    longest_ms = 0.0
    for start_ms, end_ms in spans:
        # A last fix ends the tracked time; it counts although spans are half-open.
        here = (track.time_ms >= start_ms) & (
            (track.time_ms < end_ms) | ((track.time_ms == end_ms) & (end_ms == closing_ms))
        )
        inside |= here
        marks = np.concatenate([[start_ms], track.time_ms[here], [end_ms]])
        longest_ms = max(longest_ms, float(np.diff(marks).max()))
    return int(inside.sum()), longest_ms, inside


def _hours(milliseconds: float) -> float:
    return round(float(milliseconds) / _HOUR_MS, 6)


def _month_facts(animal: _Animal, fit: VariancePosterior) -> list[MonthFacts]:
    cells = _cells(animal.steps, animal.tracked)
    covered = np.bincount(cells.period, weights=cells.duration_ms, minlength=len(animal.months))
    widest = np.zeros(len(animal.months))
    # A path of less weight cannot bend the mixture's mass by what the flag speaks of.
    for path in (path for path in animal.paths if path.weight >= 0.01):
        spread_m = np.maximum(path.largest_sd_m(), path.largest_shift_m())
        np.maximum.at(widest, cells.period, spread_m[cells.part])
    facts = []
    for k, month in enumerate(animal.months):
        fixes, longest_ms, inside = _fix_counts(animal.track, animal.tracked[k], animal.tracked[-1][-1][1])
        flags = {
            "assumed_error": bool(np.any(animal.track.assumed_error[inside])),
            "zero_position": bool(np.any(animal.track.zero_position[inside])),
            "wide_spread": bool(widest[k] > WIDE_SPREAD_SD_M),
            "variance_from_prior": fit.log_sd > 3.0,
        }
        facts.append(
            MonthFacts(
                month.month,
                animal.tracked[k][0][0],
                fixes,
                _hours(length_ms(animal.tracked[k])),
                _hours(covered[k]),
                _hours(longest_ms),
                tuple(sorted(name for name, on in flags.items() if on)),
            )
        )
    return facts


def _zone_rows(animal: _Animal, index: int, zone: Zone) -> list[ZoneMonth]:
    if not animal.months:
        return []
    in_force = zone.in_force_spans(animal.months[0].start_ms, animal.months[-1].end_ms, animal.options.time_zone)
    spans = [intersect_spans(tracked, in_force) for tracked in animal.tracked]
    far = _out_of_reach(animal, zone)
    if far and spans == animal.tracked:
        return []
    cells = _cells(animal.steps, spans)
    covered = np.bincount(cells.period, weights=cells.duration_ms, minlength=len(spans))
    if far:
        sums = np.outer(covered, [0.0, TRIVIAL_NUMERICAL_ERROR, 0.0])
        use = _InZone(sums, np.zeros(len(spans)), np.zeros(len(spans), np.int64))
    else:
        use = _in_zone(animal, zone, cells, len(spans))
    rows = []
    for k, span in enumerate(spans):
        untouched = use.sums[k, 2] == 0.0 and use.sums[k, 0] == 0.0 and use.inside_ms[k] == 0.0
        if span and not (untouched and span == animal.tracked[k]):
            figures = (covered[k], use.sums[k], use.inside_ms[k], int(use.visits[k]))
            rows.append(_row(animal, index, k, span, *figures))
    return rows


@dataclass(frozen=True)
class _InZone:
    """Per month: sums of `integrated_zone_mass`, time inside along the path, visits."""

    sums: FloatArray
    inside_ms: FloatArray
    visits: NDArray[np.int64]


def _out_of_reach(animal: _Animal, zone: Zone) -> bool:
    if len(animal.steps) == 0:
        return True
    ball_m = zone.shape.rough_ball_m
    if ball_m is None:
        return False
    away2 = ((animal.balls_m[:, :3] - ball_m[:3]) ** 2).sum(axis=1)
    return bool(np.all(away2 > (animal.balls_m[:, 3] + ball_m[3]) ** 2))


def _in_zone(animal: _Animal, zone: Zone, cells: Cells, n_months: int) -> _InZone:
    sums = np.zeros((n_months, 3))
    stretches = []
    boundaries = zone.shape.boundaries
    for edges in boundaries:
        for path in animal.paths:
            part = integrated_zone_mass(path, edges, cells, n_months, 1.0 / len(boundaries))
            sums += np.array([path.weight, path.weight, 1.0]) * part
        stretches.append(inside_stretches(animal.steps, edges, cells))
    period, start_ms, end_ms = (np.concatenate([stretch[k] for stretch in stretches]) for k in range(3))
    order = np.lexsort((end_ms, start_ms))
    period, start_ms, end_ms = period[order], start_ms[order], end_ms[order]
    inside_ms = np.bincount(period, weights=end_ms - start_ms, minlength=n_months).astype(np.float64)
    shortest_ms = animal.options.minimum_stay_hours * _HOUR_MS
    return _InZone(sums, inside_ms, visits_per_period(period, start_ms, end_ms, n_months, shortest_ms))


def _row(
    animal: _Animal,
    index: int,
    month: int,
    span: list[Span],
    covered_ms: float,
    sums: FloatArray,
    inside_ms: float,
    visits: int,
) -> ZoneMonth:
    fixes, longest_ms, _ = _fix_counts(animal.track, span, animal.tracked[-1][-1][1])
    known = covered_ms > 0.0
    return ZoneMonth(
        index,
        animal.months[month].month,
        fixes,
        _hours(length_ms(span)),
        _hours(length_ms(span)),
        _hours(covered_ms),
        _hours(longest_ms),
        round(min(1.0, max(0.0, float(sums[0] / covered_ms))), 9) if known else None,
        # Upwards, and with the rounding of the mass itself.
        float(np.ceil((sums[1] / covered_ms + 5e-10) * 1e12) / 1e12) if known else None,
        round(min(1.0, float(inside_ms / covered_ms)), 9) if known else None,
        _hours(min(inside_ms, covered_ms)),
        visits,
    )
