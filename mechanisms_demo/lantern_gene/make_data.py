"""Make the data of the lantern gene: ``python -m mechanisms_demo.lantern_gene.make_data``."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from mechanisms_demo.measuring import Array, Curves, integrate, measure, write

TIMES = np.array([0.0, 0.25, 0.5, 0.75, 1.0, 1.5, 2.0, 2.75, 3.5, 4.5, 6.0, 8.0])
NOISE = 0.04

BASAL, SUGAR_STRENGTH, ACTIVATOR_LOSS = 2.0, 40.0, 1.2
ACTIVATOR_STRENGTH, LAMP_LOSS = 0.8, 0.5
BRAKE_HALF, BRAKE_HILL = 4.0, 2.0
LIGHT_PER_LAMP = 25.0

COURSES = {
    "induced": [(0.0, 1.0)],
    "faintly_induced": [(0.0, 0.15)],
    "washed": [(0.0, 1.0), (2.0, 0.0)],
}


def rates(y: Array, sugar: float) -> Sequence[float]:
    """Return the true right-hand side."""
    activator, lamp = y
    brake = 1.0 / (1.0 + (lamp / BRAKE_HALF) ** BRAKE_HILL)
    return (
        (BASAL + SUGAR_STRENGTH * sugar) * brake - ACTIVATOR_LOSS * activator,
        ACTIVATOR_STRENGTH * activator - LAMP_LOSS * lamp,
    )


def curves() -> Curves:
    """Return the true value of every readout in each condition, started at rest without sugar."""
    rest = integrate(rates, (0.0, 0.0), [(0.0, 0.0)], np.array([0.0, 200.0]))[:, -1]
    true = {}
    for condition, course in COURSES.items():
        activator, lamp = integrate(rates, tuple(rest), course, TIMES)
        true[condition, "activator"] = activator
        true[condition, "light"] = LIGHT_PER_LAMP * lamp
    return true


if __name__ == "__main__":
    write(measure(curves(), TIMES, NOISE), Path(__file__).with_name("data.csv"))
