"""A track: the accepted fixes of one animal in time order, with the error of each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from estimators.errors import TrackError
from estimators.frames import WGS84
from estimators.location_error import usable_covariance

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Track:
    """Fixes in strictly increasing time order.

    Attributes
    ----------
    time_ms : ndarray of int64, shape (n,), milliseconds since 1970-01-01 UTC
    lon_deg, lat_deg : ndarray, shape (n,), degrees
    covariance_m2 : ndarray, shape (n, 2, 2), square metres in the east and north axes at the fix
    assumed_error : ndarray of bool, shape (n,), the error is a default, not a statement
    zero_position : ndarray of bool, shape (n,), the fix was sent as exactly 0, 0
    """

    time_ms: NDArray[np.int64]
    lon_deg: FloatArray
    lat_deg: FloatArray
    covariance_m2: FloatArray
    assumed_error: NDArray[np.bool_]
    zero_position: NDArray[np.bool_]

    @classmethod
    def from_fixes(
        cls,
        time_ms: NDArray[np.int64],
        lon_deg: FloatArray,
        lat_deg: FloatArray,
        covariance: FloatArray,
        assumed_error: NDArray[np.bool_],
    ) -> Track:
        """Track from fixes in any order.

        Parameters
        ----------
        time_ms : ndarray of int64, shape (n,)
        lon_deg, lat_deg : ndarray, shape (n,), degrees
        covariance : ndarray, shape (n, 3), [east variance, covariance, north variance], square metres
        assumed_error : ndarray of bool, shape (n,)

        Raises
        ------
        TrackError
            A value is not finite, a latitude is beyond a pole, or a covariance is not positive definite or too narrow.

        Notes
        -----
        Fixes of one instant (from two tags) become one: weighted by the inverse of their covariances.
        """
        columns = [np.asarray(v, np.float64) for v in (lon_deg, lat_deg, covariance)]
        _check_finite(*columns)
        lon, lat, cov = columns
        # Ties are broken by the values, so that the order of the input never shows in the answer.
        order = np.lexsort((cov[:, 2], cov[:, 1], cov[:, 0], lat, lon, np.asarray(time_ms)))
        matrix = np.stack([cov[:, :2], cov[:, 1:]], axis=1)[order]
        track = cls(
            np.asarray(time_ms, np.int64)[order],
            lon[order],
            lat[order],
            matrix,
            np.asarray(assumed_error, bool)[order],
            ((lon == 0.0) & (lat == 0.0))[order],
        )
        return track if np.all(np.diff(track.time_ms) > 0) else _merge_simultaneous(track)

    def __len__(self) -> int:
        return len(self.time_ms)


def _check_finite(lon: FloatArray, lat: FloatArray, cov: FloatArray) -> None:
    if not (np.all(np.isfinite(lon)) and np.all(np.abs(lat) <= 90.0)):
        raise TrackError("bad_position", "A fix has no place on Earth. Give finite degrees, latitude within ±90.")
    if not np.all(usable_covariance(cov)):
        raise TrackError(
            "bad_error",
            "A fix's error is not positive definite, or its ellipse is too narrow to be computed with. State a radius.",
        )


def _merge_simultaneous(track: Track) -> Track:
    first = np.nonzero(np.concatenate([[True], np.diff(track.time_ms) > 0]))[0]
    ends = np.append(first[1:], len(track))
    lon, lat = track.lon_deg[first].copy(), track.lat_deg[first].copy()
    covariance = track.covariance_m2[first].copy()
    for place in np.nonzero(ends - first > 1)[0]:
        members = slice(first[place], ends[place])
        lon[place], lat[place], covariance[place] = _precision_mean(
            track.lon_deg[members], track.lat_deg[members], track.covariance_m2[members]
        )
    return Track(
        track.time_ms[first],
        lon,
        lat,
        covariance,
        np.logical_or.reduceat(track.assumed_error, first),
        np.logical_or.reduceat(track.zero_position, first),
    )


def _precision_mean(lon: FloatArray, lat: FloatArray, covariance: FloatArray) -> tuple[float, float, FloatArray]:
    """Mean of places weighted by the inverse covariances, in the plane around the first."""
    count = len(lon)
    azimuth, _, length = WGS84.inv(np.full(count, lon[0]), np.full(count, lat[0]), lon, lat)
    angle = np.deg2rad(azimuth)
    offset = np.stack([length * np.sin(angle), length * np.cos(angle)], axis=-1)
    precision = np.linalg.inv(covariance)
    merged = np.linalg.inv(precision.sum(axis=0))
    mean = merged @ np.einsum("nij,nj->i", precision, offset)
    distance = float(np.hypot(*mean))
    if distance == 0.0:
        return float(lon[0]), float(lat[0]), merged
    new_lon, new_lat, _ = WGS84.fwd(lon[0], lat[0], np.rad2deg(np.arctan2(mean[0], mean[1])), distance)
    return float(new_lon), float(new_lat), merged
