"""Tracks, zones and calls that the tests of hard cases share."""

import numpy as np

from estimators import Track, Zone, ZoneShape, ZoneUseOptions, covariance_from_ellipse, estimate_zone_use
from tests.estimators.simulated import START_MS

HOUR_MS = 3_600_000
DAY_MS = 24 * HOUR_MS


def track_of(lon, lat, sd_m, *, step_ms=HOUR_MS, time_ms=None):
    n = len(lon)
    when = START_MS + np.arange(n) * step_ms if time_ms is None else np.asarray(time_ms)
    variance = np.broadcast_to(np.asarray(sd_m, float) ** 2, (n,))
    return Track.from_fixes(
        when.astype(np.int64),
        np.array(lon, float),
        np.array(lat, float),
        np.column_stack([variance, 0 * variance, variance]),
        np.zeros(n, bool),
    )


def zone_of(*rings, kind="Polygon", edges="straight"):
    return Zone(ZoneShape.from_geojson({"type": kind, "coordinates": list(rings)}, edges))


def corners(west, south, east, north):
    return [[west, south], [east, south], [east, north], [west, north], [west, south]]


def rows_of(track, zones, tracked=None, parameters=None, **options):
    span = [(int(track.time_ms[0]), int(track.time_ms[-1]))] if tracked is None else tracked
    return estimate_zone_use(track, span, zones, ZoneUseOptions(**options), parameters)


def only_row(track, zone, **options):
    (row,) = rows_of(track, [zone], **options).rows
    return row


def fixed_variance(variance_m2_per_s):
    return {
        "movement_variance_m2_per_s": [variance_m2_per_s],
        "weight": [1.0],
        "median_m2_per_s": variance_m2_per_s,
        "log_sd": 0.0,
    }


def needle_track(semi_minor_m):
    """Three hourly fixes whose error is 50 km long and as wide as stated."""
    errors = covariance_from_ellipse(np.full(3, 5e4), np.full(3, semi_minor_m), np.full(3, 37.0))
    lon, lat = np.array([10, 10.01, 10.02]), np.array([45, 45.0, 45.01])
    return Track.from_fixes(START_MS + np.arange(3) * HOUR_MS, lon, lat, errors, np.zeros(3, bool))
