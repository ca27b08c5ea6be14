"""Each statement of location error becomes its covariance by the documented rule."""

import math

import numpy as np
import pytest

from estimators import (
    LocationErrorStatementError,
    covariance_from_argos_class,
    covariance_from_ellipse,
    covariance_from_radius,
    covariance_from_satellites,
)


@pytest.mark.parametrize(
    ("kind", "ratio"),
    [("sd_m", 1.0), ("radius50_m", 1.177410), ("radius68_m", 1.509592), ("radius95_m", 2.447747)],
)
def test_radius_over_standard_deviation(kind, ratio):
    """R50, R68, R95 of a circular normal (derived: √(-2 ln(1 - p)); 1.177 in Bowditch's tables)."""
    found = covariance_from_radius(kind, np.array([100.0 * ratio]))
    assert np.sqrt(found[0, 0]) == pytest.approx(100.0, abs=1e-3)
    assert found[0, 1] == 0.0


def test_argos_ellipse():
    """M = 1000, m = 400, c = 30 degrees (derived; convention of McClintock et al. 2015, from memory)."""
    east, cross, north = covariance_from_ellipse(np.array([1000.0]), np.array([400.0]), np.array([30.0]))[0]
    assert (east, north) == (pytest.approx(185000.0), pytest.approx(395000.0))
    assert cross == pytest.approx(181865.33, abs=0.01)
    assert math.sqrt(math.sqrt(east * north - cross**2) * 2) == pytest.approx(632.456, abs=1e-3)


@pytest.mark.parametrize(
    ("name", "sd_km"), [("3", 0.325), ("2", 0.669), ("1", 0.795), ("0", 2.769), ("A", 4.100), ("B", 6.810)]
)
def test_argos_classes(name, sd_km):
    """Per-axis standard deviations from the 68 % radii of Costa et al. 2010 (abstract)."""
    assert math.sqrt(covariance_from_argos_class([name])[0, 0]) / 1000 == pytest.approx(sd_km, abs=6e-4)


@pytest.mark.parametrize(("name", "code"), [("Z", "invalid_argos_position"), ("9", "unknown_argos_class")])
def test_bad_argos_classes_are_refused(name, code):
    """Z is no position, others are unknown."""
    with pytest.raises(LocationErrorStatementError) as refusal:
        covariance_from_argos_class([name])
    assert refusal.value.code == code


def test_satellites():
    """95 % radius by satellites; more than ten count as ten; fewer than four are refused."""
    found = covariance_from_satellites(np.array([4, 10, 14]))
    assert np.sqrt(found[:, 0]) == pytest.approx(np.array([630.0, 31.0, 31.0]) / 2.447747, rel=1e-5)
    with pytest.raises(LocationErrorStatementError, match="fewer than 4"):
        covariance_from_satellites(np.array([3]))


@pytest.mark.parametrize("value", [0.0, -1.0, math.nan, math.inf])
def test_errors_must_be_positive_numbers(value):
    """Zero, negative, NaN and infinity are refused."""
    with pytest.raises(LocationErrorStatementError):
        covariance_from_radius("sd_m", np.array([value]))
