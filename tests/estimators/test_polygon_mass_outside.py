"""Exact polygon mass against three outside references: simulation, exact raster coverage, the bivariate normal cdf."""

import math

import numpy as np
import pytest
import shapely
from exactextract import exact_extract
from exactextract.raster import NumPyRasterSource
from scipy.special import ndtr
from scipy.stats import multivariate_normal

from estimators import gaussian_mass_in_polygon


def mass_of(polygon, mean, covariance):
    rings = [np.array(ring.coords) for ring in (polygon.exterior, *polygon.interiors)]
    return float(gaussian_mass_in_polygon(np.array([mean]), np.array([covariance]), rings)[0])


def random_star(draws, corners, with_hole):
    """A star of random radii, anticlockwise, with a small hole of the same form where asked."""
    angles = 2.0 * np.pi * (np.arange(corners) + draws.uniform(0.0, 0.9, corners)) / corners
    radius = draws.uniform(0.4, 3.0, corners)
    shell = np.column_stack([radius * np.cos(angles), radius * np.sin(angles)])
    holes = [0.2 * shell] if with_hole else []
    return shapely.orient_polygons(shapely.Polygon(shell, holes))


def random_covariance(draws):
    angle, (large, small) = draws.uniform(0.0, np.pi), np.exp(draws.uniform(-1.0, 1.0, 2))
    turn = np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])
    return turn @ np.diag([large**2, (small * large) ** 2]) @ turn.T


@pytest.mark.parametrize("seed", range(12))
def test_stars_against_simulation(seed):
    """A million draws, five standard errors of their share; non-convex, half of them with a hole, any tilt."""
    draws = np.random.default_rng(seed)
    star = random_star(draws, int(draws.integers(5, 40)), with_hole=seed % 2 == 1)
    assert star.is_valid
    mean, covariance = draws.normal(0.0, 1.0, 2), random_covariance(draws)
    points = draws.multivariate_normal(mean, covariance, 1_000_000)
    shapely.prepare(star)
    share = float(shapely.contains_xy(star, points[:, 0], points[:, 1]).mean())
    found = mass_of(star, mean, covariance)
    assert 1e-4 < found < 1.0
    assert abs(found - share) <= 5.0 * math.sqrt(found * (1.0 - found) / len(points))


@pytest.mark.parametrize("seed", range(6))
def test_stars_against_exact_coverage_of_a_fine_raster(seed):
    """Cells of 0.006 standard deviations with their exact mass, weighted by exactextract's share of coverage.

    A cell cut by an edge counts by area instead of mass: at most width²·slope a cell and edge, together below 2e-5.
    """
    draws = np.random.default_rng(100 + seed)
    star = random_star(draws, int(draws.integers(5, 30)), with_hole=seed % 2 == 0)
    mean, sd = draws.normal(0.0, 0.6, 2), np.exp(draws.uniform(-0.5, 0.5, 2))
    count = 2000
    lines = [np.linspace(m - 6.0 * s, m + 6.0 * s, count + 1) for m, s in zip(mean, sd, strict=True)]
    share_x, share_y = (np.diff(ndtr((line - m) / s)) for line, m, s in zip(lines, mean, sd, strict=True))
    raster = NumPyRasterSource(
        np.outer(share_y[::-1], share_x), xmin=lines[0][0], ymin=lines[1][0], xmax=lines[0][-1], ymax=lines[1][-1]
    )
    feature = {"type": "Feature", "geometry": shapely.geometry.mapping(star), "properties": {}}
    summed = exact_extract(raster, [feature], ["sum"])[0]["properties"]["sum"]
    found = mass_of(star, mean, np.diag(sd**2))
    assert 0.01 < found < 0.999
    assert found == pytest.approx(summed, abs=2e-5)


@pytest.mark.parametrize("correlation", [-0.97, -0.5, 0.0, 0.3, 0.8, 0.995])
def test_rectangles_against_the_bivariate_normal_cdf(correlation):
    """scipy.stats.multivariate_normal.cdf between two limits, correlated, edges near and far."""
    covariance = np.array([[2.25, correlation * 1.5 * 0.4], [correlation * 1.5 * 0.4, 0.16]])
    draws = np.random.default_rng(8)
    for _ in range(20):
        low = draws.uniform(-2.0, 0.5, 2) * [1.5, 0.4]
        high = low + draws.uniform(0.05, 4.0, 2) * [1.5, 0.4]
        expected = multivariate_normal.cdf(
            high, mean=[0.0, 0.0], cov=covariance, lower_limit=low, abseps=1e-10, releps=1e-10, maxpts=10_000_000
        )
        assert mass_of(shapely.box(*low, *high), [0.0, 0.0], covariance) == pytest.approx(float(expected), abs=3e-8)


@pytest.mark.parametrize("ratio", [1e-2, 1e-4])
def test_needle_shaped_errors_against_the_bivariate_normal_cdf(ratio):
    """A normal a hundred and ten thousand times as long as wide, at 37°, against rectangles along its own axes."""
    angle = math.radians(37.0)
    turn = np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])
    covariance = turn @ np.diag([1.0, ratio**2]) @ turn.T
    for x0, x1, y0, y1 in [(-0.5, 1.0, -0.3, 2.0), (0.0, 3.0, 0.2, 0.9), (-4.0, -0.7, -9.0, 0.0)]:
        rectangle = shapely.box(x0, y0 * ratio, x1, y1 * ratio)
        ring = np.array(rectangle.exterior.coords) @ turn.T
        polygon = shapely.orient_polygons(shapely.Polygon(ring))
        expected = (ndtr(x1) - ndtr(x0)) * (ndtr(y1) - ndtr(y0))
        assert mass_of(polygon, [0.0, 0.0], covariance) == pytest.approx(expected, abs=1e-7)
