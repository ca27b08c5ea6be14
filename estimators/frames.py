"""Positions on the WGS 84 ellipsoid: geodesic steps, local east/north axes, local plane frames.

The only module that turns degrees into metres. A place is carried as Earth-centred coordinates in metres, which
know neither a date line nor a pole; a local plane is the azimuthal-equidistant picture around an origin.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray
from pyproj import Geod

from estimators.compiled import compiled

FloatArray = NDArray[np.float64]

WGS84: Final = Geod(ellps="WGS84")
_A_M: Final = 6378137.0
_F: Final = 1.0 / 298.257223563
_E2: Final = _F * (2.0 - _F)
MEAN_RADIUS_M: Final = 6371008.7714
"""Mean radius R₁ of the WGS 84 ellipsoid, metres."""


def normalised_lon_deg(lon_deg: FloatArray) -> FloatArray:
    """Longitudes brought into (-180, 180], degrees."""
    return np.asarray(180.0 - np.mod(180.0 - np.asarray(lon_deg, np.float64), 360.0))


def earth_centred_m(lon_deg: FloatArray, lat_deg: FloatArray) -> FloatArray:
    """Earth-centred Cartesian coordinates of places on the ellipsoid.

    Parameters
    ----------
    lon_deg, lat_deg : ndarray, shape (n,), degrees; any longitude

    Returns
    -------
    ndarray, shape (n, 3), metres
    """
    # Brought into one range first, so that 180 and -180 give the very same numbers.
    lon, lat = np.deg2rad(normalised_lon_deg(lon_deg)), np.deg2rad(np.asarray(lat_deg, np.float64))
    sin_lat, cos_lat = np.sin(lat), np.cos(lat)
    normal_m = _A_M / np.sqrt(1.0 - _E2 * sin_lat**2)
    horizontal_m = normal_m * cos_lat
    return np.stack([horizontal_m * np.cos(lon), horizontal_m * np.sin(lon), normal_m * (1.0 - _E2) * sin_lat], axis=-1)


def east_north_axes(lon_deg: FloatArray, lat_deg: FloatArray) -> FloatArray:
    """Unit vectors to the east and to the north.

    Parameters
    ----------
    lon_deg, lat_deg : ndarray, shape (n,), degrees; at a pole the longitude fixes the axes

    Returns
    -------
    ndarray, shape (n, 2, 3), Earth-centred, no unit
    """
    lon, lat = np.deg2rad(normalised_lon_deg(lon_deg)), np.deg2rad(np.asarray(lat_deg, np.float64))
    zero = np.zeros_like(lon)
    east = np.stack([-np.sin(lon), np.cos(lon), zero], axis=-1)
    north = np.stack([-np.sin(lat) * np.cos(lon), -np.sin(lat) * np.sin(lon), np.cos(lat)], axis=-1)
    return np.stack([east, north], axis=-2)


def carrying_rotation(axes_from: FloatArray, axes_to: FloatArray) -> FloatArray:
    """Rotation that carries a small deviation along the geodesic from one place to another.

    Parameters
    ----------
    axes_from, axes_to : ndarray, shape (n, 2, 3), east and north axes at the two places

    Returns
    -------
    ndarray, shape (n, 2, 2), turning east/north components there into east/north components here

    Notes
    -----
    The least rotation that takes one local plane into the other; on a sphere this is parallel transport along
    the geodesic between the places.
    """
    products = np.einsum("nik,njk->nij", axes_to, axes_from)
    cos = products[:, 0, 0] + products[:, 1, 1]
    sin = products[:, 1, 0] - products[:, 0, 1]
    angle = np.arctan2(sin, cos)
    cos, sin = np.cos(angle), np.sin(angle)
    return np.stack([np.stack([cos, -sin], axis=-1), np.stack([sin, cos], axis=-1)], axis=-2)


@dataclass(frozen=True)
class StepParts:
    """Steps between consecutive fixes, the long ones cut into parts, each with a plane frame of its own.

    Attributes
    ----------
    step : ndarray of int, shape (n,), the step that the part belongs to
    start_share, end_share : ndarray, shape (n,), share of the step's length, and time, at the part's ends
    origin_lon_deg, origin_lat_deg : ndarray, shape (n,), the part's geodesic midpoint
    origin_m : ndarray, shape (n, 3), the same, Earth-centred
    axes : ndarray, shape (n, 2, 3), east and north there
    start_m, end_m : ndarray, shape (n, 2), the part's ends in its plane, metres
    """

    step: NDArray[np.int64]
    start_share: FloatArray
    end_share: FloatArray
    origin_lon_deg: FloatArray
    origin_lat_deg: FloatArray
    origin_m: FloatArray
    axes: FloatArray
    start_m: FloatArray
    end_m: FloatArray


def step_parts(lon_deg: FloatArray, lat_deg: FloatArray, steps: NDArray[np.int64], longest_m: float) -> StepParts:
    """Cut steps of a track into parts no longer than a stated length.

    Parameters
    ----------
    lon_deg, lat_deg : ndarray, shape (n_fixes,), degrees
    steps : ndarray of int, shape (n_steps,); step k goes from fix k to fix k + 1
    longest_m : float, metres

    Returns
    -------
    StepParts
    """
    from_lon, from_lat = lon_deg[steps], lat_deg[steps]
    azimuth_deg, _, length_m = WGS84.inv(from_lon, from_lat, lon_deg[steps + 1], lat_deg[steps + 1])
    count = np.maximum(1, np.ceil(length_m / longest_m)).astype(np.int64)
    of = np.repeat(np.arange(len(steps)), count)
    place = np.arange(len(of)) - np.repeat(np.cumsum(count) - count, count)
    shares = [(place + part) / count[of] for part in (0.0, 0.5, 1.0)]

    def along(share: FloatArray) -> tuple[FloatArray, FloatArray]:
        lon, lat, _ = WGS84.fwd(from_lon[of], from_lat[of], np.asarray(azimuth_deg)[of], length_m[of] * share)
        return np.asarray(lon), np.asarray(lat)

    origin_lon, origin_lat = along(shares[1])
    origin_m, axes = earth_centred_m(origin_lon, origin_lat), east_north_axes(origin_lon, origin_lat)
    start_m, end_m = (
        plane_coordinates_m(earth_centred_m(*along(share)), origin_m, axes) for share in (shares[0], shares[2])
    )
    return StepParts(steps[of], shares[0], shares[2], origin_lon, origin_lat, origin_m, axes, start_m, end_m)


@compiled()
def plane_point_m(
    x: float, y: float, z: float, origin_m: Any, axes: Any
) -> tuple[float, float]:  # pragma: no cover - compiled
    """Position of one Earth-centred place in a local plane (compiled; see `plane_coordinates_m`)."""
    dx, dy, dz = x - origin_m[0], y - origin_m[1], z - origin_m[2]
    east = dx * axes[0, 0] + dy * axes[0, 1] + dz * axes[0, 2]
    north = dx * axes[1, 0] + dy * axes[1, 1] + dz * axes[1, 2]
    chord2 = dx * dx + dy * dy + dz * dz
    flat2 = east * east + north * north
    if flat2 == 0.0:
        return 0.0, 0.0
    q = chord2 / (4.0 * MEAN_RADIUS_M * MEAN_RADIUS_M)
    if q < 1e-4:
        # asin(√q)/√q; the next term is below 1e-13
        stretch = 1.0 + q * (1.0 / 6.0 + q * (3.0 / 40.0 + q * (15.0 / 336.0)))
        arc_m = math.sqrt(chord2) * stretch
    else:
        arc_m = 2.0 * MEAN_RADIUS_M * math.asin(min(1.0, math.sqrt(q)))
    scale = arc_m / math.sqrt(flat2)
    return east * scale, north * scale


@compiled()
def _plane_points_m(points_m: Any, origin_m: Any, axes: Any) -> Any:  # pragma: no cover - compiled
    found = np.empty((points_m.shape[0], 2))
    for k in range(points_m.shape[0]):
        found[k, 0], found[k, 1] = plane_point_m(points_m[k, 0], points_m[k, 1], points_m[k, 2], origin_m[k], axes[k])
    return found


def plane_coordinates_m(points_m: FloatArray, origin_m: FloatArray, axes: FloatArray) -> FloatArray:
    """Positions in local azimuthal-equidistant planes.

    Parameters
    ----------
    points_m : ndarray, shape (n, 3), Earth-centred, metres
    origin_m : ndarray, shape (n, 3), origin of each plane
    axes : ndarray, shape (n, 2, 3), east and north at the origin

    Returns
    -------
    ndarray, shape (n, 2), metres east and north in the plane

    Notes
    -----
    The direction is that of the normal section, the distance the arc over the chord on a sphere of the mean
    radius. Against the geodesic this errs by less than 2 mm at 50 km and 2 cm at 100 km, and by the same smooth
    map for track and zone alike, so a place on an edge stays on it.
    """
    return np.asarray(_plane_points_m(points_m, origin_m, axes))
