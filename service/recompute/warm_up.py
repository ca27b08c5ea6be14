"""A first, tiny computation, so that no animal waits for compiled code to be loaded."""

from __future__ import annotations

import json

import numpy as np

from estimators import ZoneUseOptions
from service.recompute.task import AnimalInput, ZoneInput, compute_animal

_SQUARE = {"type": "Polygon", "coordinates": [[[0.0, 0.0], [0.02, 0.0], [0.02, 0.02], [0.0, 0.02], [0.0, 0.0]]]}


def warm_up() -> None:
    """Compute an animal that walks across the edge of a square zone, with every movement model."""
    fixes = 12
    for estimator in ("random_walk", "brownian_bridge"):
        compute_animal(
            AnimalInput(
                np.zeros(fixes, dtype=np.int64),
                ("",),
                np.arange(fixes, dtype=np.int64) * 3_600_000,
                np.linspace(-0.02, 0.05, fixes),
                np.linspace(0.005, 0.015, fixes),
                np.tile([100.0, 0.0, 100.0], (fixes, 1)),
                {"estimator": estimator},
                30.0,
                ZoneUseOptions(),
                (ZoneInput("warm-up", 1, json.dumps(_SQUARE), "straight", None, None, None),),
                fixes * 3_600_000,
            )
        )
