"""Make the data of the salt sense: ``python -m mechanisms_demo.salt_sense.make_data``."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from mechanisms_demo.measuring import Array, Curves, integrate, measure, write

TIMES = np.array([0.5, 1.0, 2, 3, 4.5, 6, 8, 10, 13, 16, 20, 26])
NOISE = 0.04

SALT_STRENGTH, CHANNEL_LOSS = 0.8, 0.4
TIRING, RECOVERY = 0.6, 0.04
CHANNEL_STRENGTH, PUMP_LOSS = 1.2, 0.3

COURSES = {
    "brine": [(0.0, 1.0)],
    "two_splashes": [(0.0, 1.0), (3.0, 0.0), (10.0, 1.0), (13.0, 0.0)],
    "brackish": [(0.0, 0.3)],
}


def rates(y: Array, salt: float) -> Sequence[float]:
    """Return the true right-hand side: an open channel tires and recovers slowly."""
    channel, tired, pump = y
    opening = SALT_STRENGTH * salt * (1.0 - channel - tired)
    return (
        opening - CHANNEL_LOSS * channel - TIRING * channel,
        TIRING * channel - RECOVERY * tired,
        CHANNEL_STRENGTH * channel - PUMP_LOSS * pump,
    )


def curves() -> Curves:
    """Return the true value of every readout in each condition."""
    true = {}
    for condition, course in COURSES.items():
        channel, _, pump = integrate(rates, (0.0, 0.0, 0.0), course, TIMES)
        true[condition, "open_channels"] = channel
        true[condition, "pump"] = pump
    return true


if __name__ == "__main__":
    write(measure(curves(), TIMES, NOISE), Path(__file__).with_name("data.csv"))
