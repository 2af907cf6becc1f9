"""Switch-like response: the effective Hill coefficient of the steady output over the input.

Goldbeter and Koshland (PNAS 78 (1981) 6840-6844, doi:10.1073/pnas.78.11.6840): with EC10 and EC90
the inputs at which the output has gone 10 % and 90 % of its way,

    n_H = ln 81 / ln(EC90 / EC10)
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from ruleout.survey.behaviours.base import Array, Score, Subject, first_crossing, unknown
from ruleout.survey.behaviours.doses import sweep
from ruleout.survey.behaviours.traces import Trace, dose_trace

_FINE = 33


@dataclass(frozen=True, slots=True)
class Switch:
    """Answers the input more steeply than a hyperbola.

    Attributes
    ----------
    hill : float
        Least effective Hill coefficient.
    swing : float
        Least change of the output over the range, as a share of its largest value.
    low, high : float
        Range of the input. It should hold the whole response: the way is measured from the output
        at ``low`` to that at ``high``.
    points : int
        Inputs on the way, evenly spaced in the logarithm; around EC10 and EC90 the grid is
        refined.
    """

    hill: float = 2.0
    swing: float = 0.5
    low: float = 1e-3
    high: float = 1e3
    points: int = 37
    name: ClassVar[str] = "switch"
    verb: ClassVar[str] = "answers like a switch"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "hill_coefficient"
    measured: ClassVar[tuple[str, ...]] = ("hill_coefficient", "ec50", "swing")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares, on the way up.

        Measures are ``hill_coefficient``, ``ec50`` and ``swing``.
        """
        count = len(subject.p)
        levels = np.geomspace(self.low, self.high, self.points)
        states, judged = sweep(subject, levels)
        output = states[:, :, subject.output]
        with np.errstate(all="ignore"):
            change = output[:, -1] - output[:, 0]
            swing = np.abs(change) / np.abs(output).max(axis=1)
            way = (output - output[:, :1]) / change[:, None]
        steep, middle = unknown(count), unknown(count)
        rows = np.flatnonzero(judged & (swing >= self.swing))
        if len(rows):
            part = replace(subject, p=subject.p[rows], ceiling=subject.ceiling[rows])
            ec = [
                self._dose(part, states[rows], way[rows], output[rows, 0], change[rows], share)
                for share in (0.1, 0.5, 0.9)
            ]
            with np.errstate(all="ignore"):
                steep[rows] = np.log(81.0) / np.log(ec[2] / ec[0])
            middle[rows] = ec[1]
        shown = judged & (steep > self.hill)
        return Score(judged, shown, {"hill_coefficient": steep, "ec50": middle, "swing": swing})

    def trace(self, subject: Subject) -> Trace:
        """Return the steady output over the input, for a subject of one parameter set."""
        return dose_trace(subject, self.low, self.high)

    def _dose(
        self, subject: Subject, states: Array, way: Array, base: Array, change: Array, share: float
    ) -> Array:
        """Return the input at which the output has first gone ``share`` of its way."""
        count = len(subject.p)
        grid = np.geomspace(self.low, self.high, self.points)
        k = np.clip(np.argmax(way >= share, axis=1) - 1, 0, self.points - 2)
        # A little beyond the two neighbours, as the crossing may fall on one of them.
        places = np.linspace(-0.05, 1.05, _FINE)
        fine = grid[k][:, None] * (grid[1] / grid[0]) ** places
        inner, _ = sweep(subject, fine, states[np.arange(count), k])
        gone = (inner[:, :, subject.output] - base[:, None]) / change[:, None]
        place = first_crossing(places, gone, np.full(count, share))
        return np.asarray(grid[k] * (grid[1] / grid[0]) ** place)
