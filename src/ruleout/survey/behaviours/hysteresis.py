"""Hysteresis: over a range of inputs the output remembers where it came from.

The steady output is followed as the input rises and as it falls again; a bistable switch jumps at
different inputs on the two ways (Ferrell, Curr. Opin. Cell Biol. 14 (2002) 140-148,
doi:10.1016/S0955-0674(02)00314-9).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from ruleout.survey.behaviours.base import Score, Subject, unknown
from ruleout.survey.behaviours.doses import sweep
from ruleout.survey.behaviours.traces import Trace, dose_trace


@dataclass(frozen=True, slots=True)
class Hysteresis:
    """Has two branches over the input.

    Attributes
    ----------
    low, high : float
        Range of the input.
    points : int
        Inputs on the way, evenly spaced in the logarithm.
    apart : float
        Least difference of the two outputs at one input, as a share of the larger.
    """

    low: float = 0.01
    high: float = 100.0
    points: int = 33
    apart: float = 0.1
    name: ClassVar[str] = "hysteresis"
    verb: ClassVar[str] = "shows hysteresis"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "width"
    measured: ClassVar[tuple[str, ...]] = ("width", "gap")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares.

        Measures are ``width`` (the fold of input over which the branches lie apart, at the
        resolution of the grid) and ``gap`` (the largest difference as a share of the larger).
        """
        levels = np.geomspace(self.low, self.high, self.points)
        up, rose = sweep(subject, levels)
        down, fell = sweep(subject, levels[::-1], up[:, -1])
        judged = rose & fell
        one = up[:, :, subject.output]
        other = down[:, ::-1, subject.output]
        with np.errstate(invalid="ignore"):
            larger = np.maximum(np.maximum(np.abs(one), np.abs(other)), 1e-9)
            gap = np.abs(one - other) / larger
            open_ = gap > self.apart
        shown = judged & open_.any(axis=1)
        width = unknown(len(judged))
        width[shown] = (levels[1] / levels[0]) ** open_.sum(axis=1)[shown]
        size = np.where(judged, np.max(np.where(np.isnan(gap), 0.0, gap), axis=1), np.nan)
        return Score(judged, shown, {"width": width, "gap": size})

    def trace(self, subject: Subject) -> Trace:
        """Return the steady output over the input, for a subject of one parameter set."""
        return dose_trace(subject, self.low, self.high, down=True)
