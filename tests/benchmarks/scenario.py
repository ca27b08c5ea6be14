"""Tracks and zones that the benchmarks share, made from fixed seeds."""

import math

import numpy as np

from estimators import Track, Zone, ZoneShape

START_MS = 1_704_067_200_000
SD_M = 20.0
STEP_SD_M = 350.0
METRES_PER_DEGREE = 111_200.0


def home_track(n: int, seed: int = 1, lon_deg: float = 10.0, lat_deg: float = 45.0) -> Track:
    """Hourly fixes of an animal that keeps to a home of about 1.75 km standard deviation, error 20 m."""
    draws = np.random.default_rng(seed)
    steps = draws.normal(0.0, STEP_SD_M, (n, 2))
    way = np.zeros((n, 2))
    for k in range(1, n):
        way[k] = 0.98 * way[k - 1] + steps[k]
    seen = way + draws.normal(0.0, SD_M, (n, 2))
    lat = lat_deg + seen[:, 1] / METRES_PER_DEGREE
    lon = lon_deg + seen[:, 0] / (METRES_PER_DEGREE * math.cos(math.radians(lat_deg)))
    time_ms = START_MS + np.arange(n, dtype=np.int64) * 3_600_000
    return Track.from_fixes(time_ms, lon, lat, np.tile([SD_M**2, 0.0, SD_M**2], (n, 1)), np.zeros(n, bool))


def star_zone(vertices: int, radius_m: float, seed: int = 2, lon_deg: float = 10.0, lat_deg: float = 45.0) -> Zone:
    """Ragged star around a place."""
    draws = np.random.default_rng(seed)
    angle = np.linspace(0.0, 2.0 * np.pi, vertices, endpoint=False)
    radius = radius_m * (1.0 + 0.15 * np.sin(5.0 * angle) + 0.03 * draws.normal(size=vertices))
    lon = lon_deg + radius * np.cos(angle) / (METRES_PER_DEGREE * math.cos(math.radians(lat_deg)))
    lat = lat_deg + radius * np.sin(angle) / METRES_PER_DEGREE
    ring = np.column_stack([lon, lat]).tolist()
    return Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [[*ring, ring[0]]]}))


def whole_span(track: Track) -> list[tuple[int, int]]:
    """Tracked time from the first to the last fix."""
    return [(int(track.time_ms[0]), int(track.time_ms[-1]))]


def csv_of(tracks: dict[str, Track]) -> str:
    """The fixes of named animals as a pipeline posts them, errors stated."""
    lines = ["animal,time,lon,lat,sd_m"]
    for name, track in tracks.items():
        times = np.datetime_as_string(track.time_ms.astype("datetime64[ms]"), unit="s")
        lines += [
            f"{name},{time}Z,{lon:.6f},{lat:.6f},{SD_M:g}"
            for time, lon, lat in zip(times, track.lon_deg, track.lat_deg, strict=True)
        ]
    return "\n".join(lines) + "\n"


def zone_features(zones: dict[str, Zone]) -> dict[str, object]:
    """Zones as the FeatureCollection that is posted."""
    features = [
        {"type": "Feature", "id": name, "properties": {"name": name}, "geometry": zone.shape.to_geojson()}
        for name, zone in zones.items()
    ]
    return {"type": "FeatureCollection", "features": features}
