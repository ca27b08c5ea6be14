"""Seeded tracks and small zones that the estimator tests share."""

import numpy as np

from estimators import Track, Zone, ZoneShape
from estimators.frames import WGS84

START_MS = 1_767_225_600_000
"""2026-01-01T00:00:00Z."""


def random_walk_track(
    n: int,
    *,
    step_s: float = 3600.0,
    variance_m2_per_s: float = 2.0,
    sd_m: float = 20.0,
    lon_deg: float = 10.0,
    lat_deg: float = 45.0,
    seed: int = 1,
) -> Track:
    """Random walk around a place, observed with a circular error."""
    draws = np.random.default_rng(seed)
    way = np.cumsum(draws.normal(0.0, np.sqrt(variance_m2_per_s * step_s), (n, 2)), axis=0)
    seen = way + draws.normal(0.0, sd_m, (n, 2))
    azimuth = np.degrees(np.arctan2(seen[:, 0], seen[:, 1]))
    lon, lat, _ = WGS84.fwd(np.full(n, lon_deg), np.full(n, lat_deg), azimuth, np.hypot(*seen.T))
    time_ms = START_MS + (np.arange(n) * step_s * 1000).astype(np.int64)
    return Track.from_fixes(time_ms, lon, lat, np.tile([sd_m**2, 0.0, sd_m**2], (n, 1)), np.zeros(n, bool))


def box(west: float, south: float, east: float, north: float) -> Zone:
    """Zone between two meridians and two parallels."""
    ring = [[west, south], [east, south], [east, north], [west, north], [west, south]]
    return Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [ring]}))


def whole_span(track: Track) -> list[tuple[int, int]]:
    """Tracked time from the first to the last fix."""
    return [(int(track.time_ms[0]), int(track.time_ms[-1]))]
