"""Make the data of the waking spore: ``python -m mechanisms_demo.spore_wake.make_data``."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from mechanisms_demo.measuring import Array, Curves, integrate, measure, write

TIMES = np.array([2.0, 4, 7, 10, 14, 18, 23, 28, 35, 45, 60])
NOISE = 0.04

NUTRIENT_STRENGTH, RECEPTOR_LOSS = 0.08, 0.06
RECEPTOR_STRENGTH, PROTEASE_LOSS = 0.4, 0.25
PROTEASE_STRENGTH, DEBRIS_LOSS = 0.6, 0.08
LIGHT_PER_PROTEASE = 400.0

COURSES = {
    "feast": [(0.0, 1.0)],
    "glimpse": [(0.0, 1.0), (14.0, 0.0)],
    "crumbs": [(0.0, 0.2)],
}


def rates(y: Array, nutrient: float) -> Sequence[float]:
    """Return the true right-hand side: a plain chain."""
    receptor, protease, debris = y
    return (
        NUTRIENT_STRENGTH * nutrient * (1.0 - receptor) - RECEPTOR_LOSS * receptor,
        RECEPTOR_STRENGTH * receptor * (1.0 - protease) - PROTEASE_LOSS * protease,
        PROTEASE_STRENGTH * protease - DEBRIS_LOSS * debris,
    )


def curves() -> Curves:
    """Return the true value of every readout in each condition."""
    true = {}
    for condition, course in COURSES.items():
        _, protease, debris = integrate(rates, (0.0, 0.0, 0.0), course, TIMES)
        true[condition, "protease_activity"] = LIGHT_PER_PROTEASE * protease
        true[condition, "debris"] = debris
    return true


if __name__ == "__main__":
    write(measure(curves(), TIMES, NOISE), Path(__file__).with_name("data.csv"))
