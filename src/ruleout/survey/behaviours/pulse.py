"""Pulse: after a step of the input the output rises and falls back part of the way.

As in the pulse generator of Basu, Mehreja, Thiberge, Chen and Weiss (PNAS 101 (2004) 6355-6360,
doi:10.1073/pnas.0307571101) and the incoherent feed-forward loop of Mangan and Alon (PNAS 100
(2003) 11980-11985, doi:10.1073/pnas.2133841100). Adaptation asks for an exact return, a pulse only
for a clear one.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from ruleout.survey.behaviours.adaptation import TIMES, top_of
from ruleout.survey.behaviours.base import Score, Subject, course, rest, unknown
from ruleout.survey.behaviours.traces import Trace, step_trace


@dataclass(frozen=True, slots=True)
class Pulse:
    """Rises and falls back.

    Attributes
    ----------
    height : float
        Least rise to the top, as a share of the output before the step (or of ``floor``).
    back : float
        Least share of the rise that is lost again.
    before, after : float
        Level of the input before and after the step.
    floor : float
        Outputs below this count as this where they divide.
    """

    height: float = 0.5
    back: float = 0.5
    before: float = 0.1
    after: float = 1.0
    floor: float = 1e-3
    name: ClassVar[str] = "pulse"
    verb: ClassVar[str] = "answers with a pulse"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "height"
    measured: ClassVar[tuple[str, ...]] = ("height", "back")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares; measures are ``height`` and ``back``."""
        count = len(subject.p)
        first, settled, stable = rest(subject, subject.at_input(self.before))
        judged = settled.copy()
        rows = np.flatnonzero(settled & stable)
        after = subject.at_input(self.after)[rows]
        last, settled, _ = rest(subject, after, first[rows])
        states, solved = course(subject, first[rows], after, TIMES)
        judged[rows[~(settled & solved)]] = False
        output = states[:, :, subject.output]
        start = first[rows, subject.output]
        rise = top_of(output - start[:, None])
        height, back = unknown(count), unknown(count)
        height[rows] = rise / np.maximum(start, self.floor)
        with np.errstate(all="ignore"):
            back[rows] = (rise - (last[:, subject.output] - start)) / rise
        shown = judged & (height >= self.height) & (back >= self.back)
        return Score(judged, shown, {"height": height, "back": back})

    def trace(self, subject: Subject) -> Trace:
        """Return the output around the step, for a subject of one parameter set."""
        return step_trace(subject, self.before, self.after)
