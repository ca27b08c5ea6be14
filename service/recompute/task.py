"""The task of a worker: one animal, from what is known of it to its rows. It knows no store, clock or network."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from estimators import (
    ESTIMATES_VERSION,
    MonthFacts,
    Season,
    Track,
    Zone,
    ZoneMonth,
    ZoneShape,
    ZoneUseOptions,
    estimate_zone_use,
)
from service.recompute.deployments import tracked_time

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

IMPLIED_DEPLOYMENT = "implied_deployment"
_SHAPES_KEPT = 1024
_VERTICES_KEPT = 3_000_000
_kept_shapes: dict[tuple[str, str], ZoneShape] = {}


@dataclass(frozen=True)
class ZoneInput:
    """A zone version as a task needs it.

    Attributes
    ----------
    zone, version : str, int
    geometry : str, GeoJSON geometry as it was sent
    edges : {"straight", "geodesic"}
    from_ms, until_ms : int or None, effective time in force, half-open
    season : str or None
    """

    zone: str
    version: int
    geometry: str
    edges: str
    from_ms: int | None
    until_ms: int | None
    season: str | None


@dataclass(frozen=True)
class Fitted:
    """Parameters of an earlier computation, and the digest of the track that they were fitted to."""

    track_digest: str
    parameters: Mapping[str, Any]


@dataclass(frozen=True)
class AnimalInput:
    """All that the rows of one animal depend on.

    Attributes
    ----------
    tag : ndarray of int64, shape (n,), index into ``tag_names``
    tag_names : tuple of str, ``""`` for a fix without a tag
    time_ms : ndarray of int64, shape (n,), milliseconds since 1970-01-01 UTC
    lon_deg, lat_deg : ndarray, shape (n,), degrees
    covariance_m2 : ndarray, shape (n, 3), square metres; NaN where no error was stated
    attributes : mapping, of the animal
    default_error_sd_m : float, for fixes without a stated error, unless the animal states one
    options : ZoneUseOptions
        Where the animal states no estimator and no longest bridged gap.
    zones : tuple of ZoneInput
    known_until_ms : int, when the animal was last told of; tracked time never reaches beyond
    fitted : Fitted or None
    """

    tag: IntArray
    tag_names: tuple[str, ...]
    time_ms: IntArray
    lon_deg: FloatArray
    lat_deg: FloatArray
    covariance_m2: FloatArray
    attributes: Mapping[str, Any]
    default_error_sd_m: float
    options: ZoneUseOptions
    zones: tuple[ZoneInput, ...]
    known_until_ms: int
    fitted: Fitted | None = None


@dataclass(frozen=True)
class AnimalResult:
    """Rows of one animal.

    Attributes
    ----------
    estimator : str
    parameters : dict, empty without tracked time
    months : tuple of MonthFacts
    rows : tuple of ZoneMonth; ``zone_index`` is the place in ``zones`` of the input
    track_digest, digest : str, SHA-256 of what the fit, and of what the rows depend on
    """

    estimator: str
    parameters: dict[str, Any]
    months: tuple[MonthFacts, ...]
    rows: tuple[ZoneMonth, ...]
    track_digest: str
    digest: str


def compute_animal(animal: AnimalInput) -> AnimalResult:
    """Rows of one animal; the same input gives the same rows.

    Raises
    ------
    EstimatorError
        The animal cannot be computed with.
    """
    options = _options(animal)
    spans, counted, implied = tracked_time(
        animal.attributes, animal.tag, animal.tag_names, animal.time_ms, options.time_zone, animal.known_until_ms
    )
    covariance, assumed = _errors(animal, counted)
    fixes = (animal.time_ms[counted], animal.lon_deg[counted], animal.lat_deg[counted], covariance, assumed)
    track_digest = _track_digest(fixes, options)
    digest = _digest(track_digest, spans, implied, options, animal.zones)
    if not spans:
        return AnimalResult(options.estimator, {}, (), (), track_digest, digest)
    reusable = animal.fitted is not None and animal.fitted.track_digest == track_digest
    known = animal.fitted.parameters if animal.fitted is not None and reusable else None
    zones = [_zone(stated) for stated in animal.zones]
    use = estimate_zone_use(Track.from_fixes(*fixes), spans, zones, options, known)
    months = tuple(_flagged(facts) for facts in use.months) if implied else use.months
    return AnimalResult(use.estimator, use.parameters, months, use.rows, track_digest, digest)


def _options(animal: AnimalInput) -> ZoneUseOptions:
    stated = animal.attributes
    return replace(
        animal.options,
        estimator=stated.get("estimator") or animal.options.estimator,
        longest_bridged_gap_hours=stated.get("longest_bridged_gap_hours") or animal.options.longest_bridged_gap_hours,
    )


def _errors(animal: AnimalInput, counted: NDArray[np.bool_]) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Error of every counted fix, and where it is the default."""
    sd_m = animal.attributes.get("default_error_sd_m") or animal.default_error_sd_m
    covariance = animal.covariance_m2[counted]
    assumed = np.isnan(covariance[:, 0])
    return np.where(assumed[:, np.newaxis], [sd_m**2, 0.0, sd_m**2], covariance), assumed


def _zone(stated: ZoneInput) -> Zone:
    season = None if stated.season is None else Season.parse(stated.season)
    return Zone(_shape(stated.geometry, stated.edges), stated.from_ms, stated.until_ms, season)


def _shape(geometry: str, edges: str) -> ZoneShape:
    # Reading a shape and preparing its boundary costs more than one animal's integrals: kept between tasks.
    shape = _kept_shapes.get((geometry, edges))
    if shape is None:
        prepared = sum(kept.prepared_vertices for kept in _kept_shapes.values())
        if prepared > _VERTICES_KEPT or len(_kept_shapes) >= _SHAPES_KEPT:
            _kept_shapes.clear()
        shape = ZoneShape.from_geojson(json.loads(geometry), "geodesic" if edges == "geodesic" else "straight")
        _kept_shapes[geometry, edges] = shape
    return shape


def _flagged(facts: MonthFacts) -> MonthFacts:
    return replace(facts, flags=tuple(sorted({*facts.flags, IMPLIED_DEPLOYMENT})))


def _track_digest(fixes: tuple[NDArray[Any], ...], options: ZoneUseOptions) -> str:
    model = [ESTIMATES_VERSION, options.estimator, options.longest_bridged_gap_hours]
    digest = hashlib.sha256(json.dumps(model).encode())
    for column in fixes:
        digest.update(np.ascontiguousarray(column).tobytes())
    return digest.hexdigest()


def _digest(
    track_digest: str,
    spans: list[tuple[int, int]],
    implied: bool,
    options: ZoneUseOptions,
    zones: tuple[ZoneInput, ...],
) -> str:
    stated = [track_digest, spans, implied, options.time_zone, options.minimum_stay_hours]
    digest = hashlib.sha256(json.dumps(stated).encode())
    for zone in zones:
        place = [zone.zone, zone.version, zone.edges, zone.from_ms, zone.until_ms, zone.season, zone.geometry]
        digest.update(json.dumps(place).encode())
    return digest.hexdigest()
