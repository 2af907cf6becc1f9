"""Resembles these data: the output follows a measured time course, up to a scale.

The courses are compared after the best scale in least squares; what is left, as a root mean square
share of the data's range, is the distance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from ruleout.kernel import Protocol
from ruleout.survey.behaviours.base import Array, Score, Subject, rest, solve, unknown
from ruleout.survey.behaviours.traces import POINTS, Trace


@dataclass(frozen=True, slots=True)
class Resemblance:
    """Follows data.

    Attributes
    ----------
    times, values : tuple of float, length K
        The data, means of replicates, times increasing from 0 or later.
    resting : float
        Level of the input before time 0.
    steps : tuple of (float, float)
        Level of the input from each time on.
    closeness : float
        Largest distance.
    pace : float
        Time units of the family in one of the data.
    """

    times: tuple[float, ...]
    values: tuple[float, ...]
    resting: float
    steps: tuple[tuple[float, float], ...]
    closeness: float = 0.1
    pace: float = 1.0
    name: ClassVar[str] = "resemblance"
    verb: ClassVar[str] = "can follow the data"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "-distance"
    measured: ClassVar[tuple[str, ...]] = ("distance", "scale")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares; measures are ``distance`` and ``scale``."""
        output, judged = self._output(subject, np.array(self.times))
        data = np.array(self.values)
        distance, scale = unknown(len(output)), unknown(len(output))
        good = output[judged]
        with np.errstate(all="ignore"):
            best = np.maximum(good @ data, 0.0) / (good**2).sum(axis=1)
            best = np.where(np.isfinite(best), best, 0.0)
        left = data - best[:, None] * good
        distance[judged] = np.sqrt((left**2).mean(axis=1)) / np.ptp(data)
        scale[judged] = best
        shown = judged & (distance <= self.closeness)
        return Score(judged, shown, {"distance": distance, "scale": scale})

    def trace(self, subject: Subject) -> Trace:
        """Return the output at its best scale and the data, for one parameter set."""
        scale = self.score(subject).measures["scale"][0]
        times = np.linspace(0.0, self.times[-1], POINTS)
        output, _ = self._output(subject, times)
        data = np.interp(times, self.times, self.values)
        return Trace("time", np.tile(times, (2, 1)), np.array([scale * output[0], data]))

    def _output(self, subject: Subject, times: Array) -> tuple[Array, np.ndarray]:
        """Return the output (M, K) at ``times`` of the data, and which rows were solved."""
        first, settled, _ = rest(subject, subject.at_input(self.resting))
        rows = np.flatnonzero(settled)
        output = np.full((len(first), len(times)), np.nan)
        states, solved = solve(
            subject, first[rows], subject.p[rows], [self._course(subject, times)]
        )
        output[rows[solved]] = states[solved][:, :, subject.output]
        return output, np.isfinite(output).all(axis=1)

    def _course(self, subject: Subject, times: Array) -> Protocol:
        steps = self.steps if self.steps[0][0] == 0.0 else ((0.0, self.resting), *self.steps)
        n, m = len(subject.start), subject.p.shape[1]
        factor, shift = np.ones((len(steps), m)), np.zeros((len(steps), m))
        factor[:, subject.source] = 0.0
        shift[:, subject.source] = [level for _, level in steps]
        return Protocol(
            breaks=self.pace * np.array([time for time, _ in steps]),
            factor=factor,
            shift=shift,
            keep=np.ones((len(steps), n)),
            add=np.zeros((len(steps), n)),
            times=self.pace * times,
        )
