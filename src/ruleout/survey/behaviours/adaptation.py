"""Adaptation: the output answers a step of the input and returns to where it was.

Ma, Trusina, El-Samad, Lim and Tang, 'Defining network topologies that can achieve biochemical
adaptation', Cell 138 (2009) 760-773, doi:10.1016/j.cell.2009.06.013: with the output at O1 before
the step from I1 to I2, at O2 after it and farthest from O1 at O_peak,

    sensitivity = |(O_peak - O1) / O1| / |(I2 - I1) / I1|
    precision   = (|(O2 - O1) / O1| / |(I2 - I1) / I1|)^-1
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np

from ruleout.survey.behaviours.base import Array, Score, Subject, course, rest, unknown
from ruleout.survey.behaviours.traces import Trace, step_trace

TIMES: Final = np.concatenate([[0.0], np.geomspace(1e-3, 1e4, 57)])
"""Eight output times per decade; the top is then found on the parabola through three of them."""


@dataclass(frozen=True, slots=True)
class Adaptation:
    """Answers a step and returns.

    Attributes
    ----------
    sensitivity, precision : float
        Both must be exceeded.
    before, after : float
        Level of the input before and after the step.
    floor : float
        An output below this before the step is silent: relative changes of it mean nothing.
    """

    sensitivity: float = 1.0
    precision: float = 10.0
    before: float = 0.5
    after: float = 0.6
    floor: float = 1e-6
    name: ClassVar[str] = "adaptation"
    verb: ClassVar[str] = "adapts"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "sensitivity"
    measured: ClassVar[tuple[str, ...]] = ("sensitivity", "precision")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares.

        Measures are ``sensitivity`` and ``precision``; the course is computed, and the sensitivity
        known, only where the precision suffices.
        """
        count = len(subject.p)
        step = abs(self.after - self.before) / self.before
        first, settled, stable = rest(subject, subject.at_input(self.before))
        judged = settled.copy()
        rows = np.flatnonzero(settled & stable & (first[:, subject.output] > self.floor))
        risen = subject.at_input(self.after)
        second = np.full_like(first, np.nan)
        second[rows], settled, _ = rest(subject, risen[rows], first[rows])
        judged[rows[~settled]] = False
        start, end = first[:, subject.output], second[:, subject.output]
        precision, sensitivity = unknown(count), unknown(count)
        with np.errstate(divide="ignore"):
            precision[rows] = step / np.abs(end[rows] / start[rows] - 1.0)
        exact = np.flatnonzero(precision > self.precision)
        states, solved = course(subject, first[exact], risen[exact], TIMES)
        judged[exact[~solved]] = False
        departure = np.abs(states[:, :, subject.output] / start[exact, None] - 1.0)
        sensitivity[exact[solved]] = top_of(departure[solved]) / step
        shown = judged & (precision > self.precision) & (sensitivity > self.sensitivity)
        return Score(judged, shown, {"sensitivity": sensitivity, "precision": precision})

    def trace(self, subject: Subject) -> Trace:
        """Return the output around the step, for a subject of one parameter set."""
        return step_trace(subject, self.before, self.after)


def top_of(values: Array) -> Array:
    """Return the largest value of each row, on the parabola through the three highest samples."""
    k = np.clip(np.argmax(values, axis=1), 1, values.shape[1] - 2)
    rows = np.arange(len(values))
    left, top, right = values[rows, k - 1], values[rows, k], values[rows, k + 1]
    bend = left - 2.0 * top + right
    with np.errstate(all="ignore"):
        gain = -((right - left) ** 2) / (8.0 * bend)
    inside = (bend < 0.0) & (top >= left) & (top >= right)
    return np.asarray(np.where(inside, top + gain, values.max(axis=1, initial=0.0)))
