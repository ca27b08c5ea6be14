"""The way that is replaced: occurrence on a raster, summed over the cells whose centre lies in the zone.

Compiled too, so that the comparison is of methods. A Gaussian without cross-covariance is a product of its axes.
"""

import math

import numpy as np
import shapely
from numba import njit

from estimators import ZoneShape
from estimators.frames import earth_centred_m, east_north_axes, plane_coordinates_m
from estimators.gaussian_path import GaussianPath


@njit(cache=True)
def _raster_masses(
    steps, starts, ends, origins, covariances, mask, west_m, south_m, cell_m, moments
):  # pragma: no cover
    masses = np.zeros(len(steps))
    column, row = np.empty(mask.shape[1]), np.empty(mask.shape[0])
    for n in range(len(steps)):
        k = steps[n]
        for m in range(moments):
            share = (m + 0.5) / moments
            x = origins[k, 0] + starts[k, 0] + share * (ends[k, 0] - starts[k, 0])
            y = origins[k, 1] + starts[k, 1] + share * (ends[k, 1] - starts[k, 1])
            v = covariances[k, 0, 0] + share * (covariances[k, 1, 0] + share * covariances[k, 2, 0])
            reach = 5.0 * math.sqrt(v)
            i0, i1 = int((x - reach - west_m) / cell_m), int((x + reach - west_m) / cell_m) + 1
            j0, j1 = int((y - reach - south_m) / cell_m), int((y + reach - south_m) / cell_m) + 1
            i0, i1, j0, j1 = max(i0, 0), min(i1, mask.shape[1]), max(j0, 0), min(j1, mask.shape[0])
            for i in range(i0, i1):
                column[i] = math.exp(-0.5 * (west_m + (i + 0.5) * cell_m - x) ** 2 / v)
            for j in range(j0, j1):
                row[j] = math.exp(-0.5 * (south_m + (j + 0.5) * cell_m - y) ** 2 / v)
            inside = 0.0
            for j in range(j0, j1):
                for i in range(i0, i1):
                    if mask[j, i]:
                        inside += row[j] * column[i]
            masses[n] += inside * cell_m * cell_m / (2.0 * math.pi * v) / moments
    return masses


class RasterSum:
    """Mass of a path in a zone near a place by a raster of a stated cell, in a plane around that place."""

    def __init__(self, path: GaussianPath, shape: ZoneShape, lon_deg: float, lat_deg: float) -> None:
        parts = path.steps.parts
        self._middle = earth_centred_m(np.array([lon_deg]), np.array([lat_deg]))
        self._axes = east_north_axes(np.array([lon_deg]), np.array([lat_deg]))
        origins = self._plane(np.column_stack([parts.origin_lon_deg, parts.origin_lat_deg]))
        self._path = (path.start_m, path.end_m, origins, path.covariance_m2)
        self._polygon = shapely.transform(shape.polygon, self._plane)

    def _plane(self, lon_lat_deg: np.ndarray) -> np.ndarray:
        count = len(lon_lat_deg)
        places = earth_centred_m(lon_lat_deg[:, 0], lon_lat_deg[:, 1])
        return plane_coordinates_m(places, np.repeat(self._middle, count, 0), np.repeat(self._axes, count, 0))

    def mask(self, cell_m: float) -> tuple[np.ndarray, float, float]:
        """Which cell centres lie inside, and the west and south edge of the raster."""
        west, south, east, north = self._polygon.bounds
        x = np.arange(west + 0.5 * cell_m, east + cell_m, cell_m)
        y = np.arange(south + 0.5 * cell_m, north + cell_m, cell_m)
        shapely.prepare(self._polygon)
        grid = np.meshgrid(x, y)
        return shapely.contains_xy(self._polygon, *grid), west, south

    def masses(
        self, steps: np.ndarray, mask: tuple[np.ndarray, float, float], cell_m: float, moments: int
    ) -> np.ndarray:
        """Mass inside over each of some steps."""
        return _raster_masses(steps, *self._path, *mask, cell_m, moments)
