"""How the invented experiments are measured: a true curve, Gaussian noise, four digits.

Independent of the package: the curves come from SciPy and a right-hand side written by hand.
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Iterable, Mapping, Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

Array = NDArray[np.float64]
Curves = Mapping[tuple[str, str], Array]
SEED = 1


def integrate(
    rates: Callable[[Array, float], Sequence[float]],
    start: Sequence[float],
    course: Sequence[tuple[float, float]],
    times: Array,
) -> Array:
    """Return the states at ``times``, shape (number of states, number of times).

    ``rates(y, level)`` is dy/dt at an input level; ``course`` holds (time, level from then on),
    and the integration is restarted at each of its times.
    """
    state = np.asarray(start, dtype=float)
    pieces = []
    ends = [begin for begin, _ in course[1:]] + [float(times[-1])]
    for (begin, level), end in zip(course, ends, strict=True):
        last = end == times[-1]
        inside = times[(times >= begin) & ((times < end) | last)]
        solved = solve_ivp(
            lambda _, y, level=level: rates(y, level),
            (begin, end),
            state,
            method="LSODA",
            t_eval=np.union1d(inside, [end]),
            rtol=1e-10,
            atol=1e-12,
        )
        pieces.append(solved.y[:, np.isin(solved.t, inside)])
        state = solved.y[:, -1]
    return np.concatenate(pieces, axis=1)


def measure(
    curves: Curves, times: Array, noise: float, seed: int = SEED
) -> list[tuple[str, float, str, float]]:
    """Return rows of condition, time, readout and value.

    The sd of a readout is ``noise`` times the range of its true curves over all conditions.
    """
    draw = np.random.default_rng(seed)
    sd = {
        readout: noise
        * float(np.ptp([curve for key, curve in curves.items() if key[1] == readout]))
        for readout in dict.fromkeys(readout for _, readout in curves)
    }
    return [
        (condition, float(time), readout, float(f"{value:.4g}"))
        for (condition, readout), curve in curves.items()
        for time, value in zip(
            times, curve + sd[readout] * draw.standard_normal(len(curve)), strict=True
        )
    ]


def write(rows: Iterable[tuple[str, float, str, float]], path: Path) -> None:
    """Write ``rows`` as a case's ``data.csv``."""
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(("condition", "time", "readout", "value"))
        writer.writerows((c, f"{t:g}", r, f"{v:g}") for c, t, r, v in rows)
