"""The geodesic library that everything rests on, against published lines."""

import numpy as np
import pytest

from estimators.frames import WGS84, earth_centred_m, east_north_axes, plane_coordinates_m


@pytest.mark.parametrize(
    ("line", "metres"),
    [
        ((0, 0, 1, 0), 111319.4908),
        ((0, 0, 0, 1), 110574.3886),
        ((0, 45, 0, 46), 111141.5485),
        ((0, 89, 0, 90), 111693.8649),
        ((0, 0, 0, 90), 10001965.7293),
        ((0, 0, 179.5, 0.5), 19936288.578965),
        ((-73.8, 40.6, -0.5, 51.6), 5551759.400),
        ((179.5, 0, -179.5, 0), 111319.4908),
        ((0, 80, 180, 80), 2233651.7148),
    ],
)
def test_published_lines(line, metres):
    """Degrees of the meridian and of the equator, the quarter meridian (upper limit in Karney's test set,
    doi:10.5281/zenodo.32156), a near-antipodal line where iteration fails, New York to London (from memory), across
    180° and over the pole; derived where nothing is named."""
    assert WGS84.inv(*line)[2] == pytest.approx(metres, abs=1e-3)


@pytest.mark.parametrize(("distance_m", "error_m"), [(1e3, 1e-6), (5e4, 2e-3), (1e5, 2e-2)])
def test_plane_frame_against_geodesics(distance_m, error_m):
    """The plane frame keeps geodesic distance and direction from its origin, everywhere on Earth."""
    draws = np.random.default_rng(2)
    lon, lat = draws.uniform(-180, 180, 2000), np.degrees(np.arcsin(draws.uniform(-1, 1, 2000)))
    azimuth = draws.uniform(-180, 180, 2000)
    there = WGS84.fwd(lon, lat, azimuth, np.full(2000, distance_m))[:2]
    plane = plane_coordinates_m(earth_centred_m(*there), earth_centred_m(lon, lat), east_north_axes(lon, lat))
    angle = np.radians(azimuth)
    assert plane == pytest.approx(distance_m * np.stack([np.sin(angle), np.cos(angle)], -1), abs=error_m)
