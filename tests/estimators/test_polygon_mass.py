"""Exact polygon mass against published values, closed forms, Owen's T and simulation."""

import math

import numpy as np
import pytest
from scipy.special import ndtr, owens_t
from scipy.stats import ncx2

from estimators import EstimatorError, gaussian_mass_in_polygon

STANDARD = np.eye(2)[None]
FAR = 60.0


def mass(ring, mean=(0.0, 0.0), covariance=STANDARD, holes=()):
    rings = [np.array([*part, part[0]], dtype=float) for part in (ring, *holes)]
    return float(gaussian_mass_in_polygon(np.array([mean], dtype=float), covariance, rings)[0])


def regular(n, apothem):
    angles = 2.0 * np.pi * (np.arange(n) + 0.5) / n
    radius = apothem / math.cos(math.pi / n)
    return [(radius * math.cos(a), radius * math.sin(a)) for a in angles]


@pytest.mark.parametrize(
    ("n", "expected"), [(3, 0.535381), (4, 0.466065), (6, 0.423153), (12, 0.400518), (4000, 0.393469)]
)
def test_regular_polygons_have_the_mass_of_owens_t(n, expected):
    """1 - 2n T(h, tan(pi/n)) (Owen 1956); many corners approach the disc, 1 - exp(-1/2)."""
    assert mass(regular(n, 1.0)) == pytest.approx(expected, abs=1e-6)
    assert mass(regular(n, 1.0)) == pytest.approx(1.0 - 2 * n * owens_t(1.0, math.tan(math.pi / n)), abs=2e-8)


def test_triangle_and_l_shape():
    """Triangle and non-convex L, each derived by two routes."""
    assert mass([(1, 0), (3, 1), (0, 2)]) == pytest.approx(0.100836742408, abs=1e-9)
    shape = [(-1, -1), (2, -1), (2, 0), (0, 0), (0, 2), (-1, 2)]
    assert mass(shape) == pytest.approx(0.442329705711, abs=1e-9)


@pytest.mark.parametrize(("half", "expected"), [(1, 0.466065), (2, 0.911070), (3, 0.994608)])
def test_centred_squares(half, expected):
    """(2Phi(a) - 1)^2 (derived)."""
    square = [(-half, -half), (half, -half), (half, half), (-half, half)]
    assert mass(square) == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize(("correlation", "expected"), [(0, 0.25), (0.5, 1 / 3), (-0.5, 1 / 6), (0.9, 0.428217)])
def test_quadrant_of_a_correlated_normal(correlation, expected):
    """1/4 + asin(rho)/2pi (Sheppard 1899)."""
    covariance = np.array([[[1.0, correlation], [correlation, 1.0]]])
    assert mass([(0, 0), (FAR, 0), (FAR, FAR), (0, FAR)], covariance=covariance) == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize(("distance", "expected"), [(1, 0.841345), (1.96, 0.975002), (-2, 0.022750)])
def test_half_planes(distance, expected):
    """Phi(d) (tables of the normal distribution)."""
    plane = [(-FAR, -FAR), (FAR, -FAR), (FAR, distance), (-FAR, distance)]
    assert mass(plane) == pytest.approx(expected, abs=1e-6)
    assert mass(plane) == pytest.approx(float(ndtr(distance)), abs=2e-9)


@pytest.mark.parametrize(
    ("offset", "radius", "expected"), [(1, 1, 0.267120), (2, 1, 0.081892), (1, 2, 0.730988), (3, 3, 0.432520)]
)
def test_offset_discs(offset, radius, expected):
    """Noncentral chi-square with two degrees of freedom (tables), a disc drawn with 4,000 corners."""
    found = mass(regular(4000, radius), mean=(offset, 0.0))
    assert found == pytest.approx(expected, abs=1e-6)
    assert found == pytest.approx(ncx2.cdf(radius**2, 2, offset**2), abs=1e-6)


def test_union_of_half_planes_is_not_counted_twice():
    """x > 0 or y > 0 holds three quarters (derived)."""
    shape = [(0, -FAR), (FAR, -FAR), (FAR, FAR), (-FAR, FAR), (-FAR, 0), (0, 0)]
    assert mass(shape) == pytest.approx(0.75, abs=1e-9)


def test_mean_on_an_edge_and_on_a_corner():
    """On a straight edge one half, on a right corner one quarter: no side is lost."""
    square = [(0, 0), (FAR, 0), (FAR, FAR), (0, FAR)]
    assert mass(square, mean=(30.0, 0.0)) == pytest.approx(0.5, abs=1e-9)
    assert mass(square, mean=(0.0, 30.0)) == pytest.approx(0.5, abs=1e-9)
    assert mass(square, mean=(FAR, FAR)) == pytest.approx(0.25, abs=1e-9)


def test_hole_takes_its_mass_away():
    """Square with a square hole = difference of the two."""
    outer = [(-2, -2), (2, -2), (2, 2), (-2, 2)]
    hole = [(-1, -1), (-1, 1), (1, 1), (1, -1)]
    assert mass(outer, holes=(hole,)) == pytest.approx(0.911070 - 0.466065, abs=2e-6)


def test_star_against_simulation():
    """A star under a tilted ellipse, against four million draws."""
    angles = np.arange(10) * np.pi / 5
    radius = np.where(np.arange(10) % 2, 1.0, 2.5)
    star = list(zip(radius * np.cos(angles), radius * np.sin(angles), strict=True))
    covariance = np.array([[2.0, 0.8], [0.8, 0.7]])
    draws = np.random.default_rng(7).multivariate_normal([0.4, -0.2], covariance, 4_000_000)
    import shapely

    share = shapely.contains_xy(shapely.Polygon(star), draws[:, 0], draws[:, 1]).mean()
    assert mass(star, mean=(0.4, -0.2), covariance=covariance[None]) == pytest.approx(share, abs=1e-3)


def test_degenerate_covariance_is_refused():
    """A covariance of rank one is no error statement."""
    with pytest.raises(EstimatorError, match="not positive definite"):
        mass([(0, 0), (1, 0), (1, 1)], covariance=np.array([[[1.0, 1.0], [1.0, 1.0]]]))
