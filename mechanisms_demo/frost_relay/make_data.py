"""Make the data of the frost relay: ``python -m mechanisms_demo.frost_relay.make_data``."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np

from mechanisms_demo.measuring import Array, Curves, integrate, measure, write

TIMES = np.array([1.0, 2, 4, 6, 9, 12, 16, 20, 26, 33, 42, 55])
NOISE = 0.04

COLD_STRENGTH, SENSOR_LOSS = 0.3, 0.12
SENSOR_STRENGTH, KINASE_LOSS = 0.9, 0.6
KINASE_STRENGTH, PROTECTANT_LOSS = 0.5, 0.05
BRAKE_HALF, BRAKE_HILL = 0.5, 2.0

COURSES = {
    "step": [(0.0, 1.0)],
    "pulse": [(0.0, 1.0), (12.0, 0.0)],
    "no_protectant": [(0.0, 1.0)],
    "low_dose": [(0.0, 0.2)],
}


def rates(made: float) -> Callable[[Array, float], Sequence[float]]:
    """Return the true right-hand side; ``made`` is 0 in the knockout of the protectant."""

    def right_hand_side(y: Array, cold: float) -> Sequence[float]:
        sensor, kinase, protectant = y
        brake = 1.0 / (1.0 + (protectant / BRAKE_HALF) ** BRAKE_HILL)
        return (
            COLD_STRENGTH * cold * brake * (1.0 - sensor) - SENSOR_LOSS * sensor,
            SENSOR_STRENGTH * sensor * (1.0 - kinase) - KINASE_LOSS * kinase,
            made * KINASE_STRENGTH * kinase - PROTECTANT_LOSS * protectant,
        )

    return right_hand_side


def curves() -> Curves:
    """Return the true value of every readout that is measured in each condition."""
    true = {}
    for condition, course in COURSES.items():
        made = 0.0 if condition == "no_protectant" else 1.0
        _, kinase, protectant = integrate(rates(made), (0.0, 0.0, 0.0), course, TIMES)
        true[condition, "active_kinase"] = kinase
        if made:
            true[condition, "protectant"] = protectant
    return true


if __name__ == "__main__":
    write(measure(curves(), TIMES, NOISE), Path(__file__).with_name("data.csv"))
