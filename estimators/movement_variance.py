"""The movement variance, integrated over its posterior instead of plugged in.

The prior is log-normal (`MOVEMENT_VARIANCE_PRIOR_MEDIAN_M2_PER_S`, `MOVEMENT_VARIANCE_PRIOR_LOG_SD`). The posterior
of ln σ² is laid out on a grid and condensed to the few nodes of its own Gauss rule (Golub and Welsch 1969).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from estimators.defaults import MOVEMENT_VARIANCE_PRIOR_LOG_SD, MOVEMENT_VARIANCE_PRIOR_MEDIAN_M2_PER_S

FloatArray = NDArray[np.float64]
LogLikelihood = Callable[[float], float]

ONE_NODE_SD: Final = 0.05
THREE_NODE_SD: Final = 0.3
"""Posterior standard deviations of ln σ² below which one node, or three, stand for the posterior.

A mass changes with ln σ² by second differences below about 0.1, so one node errs by at most 0.1·0.05²/2 ≈ 1e-4
at a moment and far less over a month.
"""
_CUT_OFF: Final = 18.0
_MOST_NODES: Final = 2000
_LOG_MEDIAN: Final = math.log(MOVEMENT_VARIANCE_PRIOR_MEDIAN_M2_PER_S)


@dataclass(frozen=True)
class VariancePosterior:
    """Posterior of the movement variance as a few weighted values.

    Attributes
    ----------
    variance_m2_per_s, weight : tuple of float, weights sum to 1
    median_m2_per_s, log_sd : float, summary of the posterior of the logarithm
    """

    variance_m2_per_s: tuple[float, ...]
    weight: tuple[float, ...]
    median_m2_per_s: float
    log_sd: float


def variance_posterior(log_likelihood: LogLikelihood) -> VariancePosterior:
    """Posterior of the movement variance under the named prior.

    Parameters
    ----------
    log_likelihood : callable
        Log-likelihood at a movement variance in m²/s.
    """

    def log_posterior(log_variance: float) -> float:
        prior = -0.5 * ((log_variance - _LOG_MEDIAN) / MOVEMENT_VARIANCE_PRIOR_LOG_SD) ** 2
        return log_likelihood(math.exp(log_variance)) + prior

    mode, sd = _mode_and_sd(log_posterior)
    grid, weights = _posterior_grid(log_posterior, mode, sd)
    mean = float(weights @ grid)
    spread = float(np.sqrt(weights @ (grid - mean) ** 2))
    if spread < ONE_NODE_SD:
        # Rounded to a lattice, so that one more fix seldom changes the rows of months it does not touch.
        lattice = 2.0 ** math.floor(math.log2(spread / 2.0))
        nodes, shares = np.array([round(mean / lattice) * lattice]), np.ones(1)
    else:
        nodes, shares = _gauss_rule(grid, weights, 3 if spread < THREE_NODE_SD else 7)
    return VariancePosterior(
        tuple(float(v) for v in np.exp(nodes)), tuple(float(v) for v in shares), math.exp(mean), spread
    )


def _mode_and_sd(log_posterior: LogLikelihood) -> tuple[float, float]:
    """Mode by a coarse scan and golden sections, and the width that its curvature suggests."""
    scan = _LOG_MEDIAN + MOVEMENT_VARIANCE_PRIOR_LOG_SD * np.linspace(-4.5, 4.5, 28)
    values = [log_posterior(float(v)) for v in scan]
    best = int(np.argmax(values))
    low, high = float(scan[max(best - 1, 0)]), float(scan[min(best + 1, len(scan) - 1)])
    ratio = 0.5 * (math.sqrt(5.0) - 1.0)
    inner = [high - ratio * (high - low), low + ratio * (high - low)]
    at = [log_posterior(v) for v in inner]
    while high - low > 1e-4:
        if at[0] >= at[1]:
            high, inner[1], at[1] = inner[1], inner[0], at[0]
            inner[0] = high - ratio * (high - low)
            at[0] = log_posterior(inner[0])
        else:
            low, inner[0], at[0] = inner[0], inner[1], at[1]
            inner[1] = low + ratio * (high - low)
            at[1] = log_posterior(inner[1])
    mode = 0.5 * (low + high)
    step = 0.01
    curvature = (log_posterior(mode + step) - 2.0 * log_posterior(mode) + log_posterior(mode - step)) / step**2
    return mode, 1.0 / math.sqrt(max(-curvature, 1.0 / MOVEMENT_VARIANCE_PRIOR_LOG_SD**2))


def _posterior_grid(log_posterior: LogLikelihood, mode: float, sd: float) -> tuple[FloatArray, FloatArray]:
    """Trapezoid rule over all of the posterior above exp(-18) of its height."""
    step = 0.5 * sd
    top = log_posterior(mode)
    places, heights = [mode], [top]
    for direction in (-1.0, 1.0):
        for count in range(1, _MOST_NODES):
            height = log_posterior(mode + direction * count * step)
            if not height >= top - _CUT_OFF:
                break
            places.append(mode + direction * count * step)
            heights.append(height)
    order = np.argsort(places)
    grid, logs = np.array(places)[order], np.array(heights)[order]
    weights = np.exp(logs - logs.max())
    return grid, weights / weights.sum()


def _gauss_rule(grid: FloatArray, weights: FloatArray, count: int) -> tuple[FloatArray, FloatArray]:
    """Gauss rule of a discrete measure: Stieltjes recurrence, then Golub-Welsch."""
    count = min(count, len(grid))
    diagonal, off = [], []
    before, now, norm_before = np.zeros_like(grid), np.ones_like(grid), 1.0
    for k in range(count):
        norm = float(weights @ now**2)
        a = float(weights @ (grid * now**2)) / norm
        b = norm / norm_before if k else 0.0
        diagonal.append(a)
        off.append(math.sqrt(b))
        before, now, norm_before = now, (grid - a) * now - b * before, norm
    matrix = np.diag(diagonal) + np.diag(off[1:], 1) + np.diag(off[1:], -1)
    nodes, vectors = np.linalg.eigh(matrix)
    return nodes, vectors[0] ** 2
