"""How fast the output answers: acceleration and sign-sensitive delay against simple regulation.

The response time is that to the middle between the old and the new steady output. Under simple
regulation, an unregulated gain switched on or off, it is ln 2 / alpha with alpha the loss rate
(Rosenfeld, Elowitz and Alon, J. Mol. Biol. 323 (2002) 785-793, doi:10.1016/S0022-2836(02)00994-4).
The coherent feed-forward loop with an AND gate delays the one direction only (Mangan and Alon,
PNAS 100 (2003) 11980-11985, doi:10.1073/pnas.2133841100).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np

from ruleout.survey.behaviours.base import (
    Array,
    Flags,
    Score,
    Subject,
    course,
    first_crossing,
    plain_course,
    rest,
    solve,
    unknown,
)
from ruleout.survey.behaviours.traces import Trace, step_trace

_COARSE: Final = np.concatenate([[0.0], np.geomspace(1e-4, 1e4, 65)])
_FINE: Final = 33


def response_times(
    subject: Subject, before: float, after: float, change: float
) -> tuple[Array, Flags]:
    """Return the time to the middle of the output's way (M,), and which rows were solved.

    NaN where the output changes by less than ``change`` of its larger level.
    """
    count = len(subject.p)
    times = unknown(count)
    first, judged, stable = rest(subject, subject.at_input(before))
    judged &= stable
    rows = np.flatnonzero(judged)
    p = subject.at_input(after)[rows]
    last, settled, _ = rest(subject, p, first[rows])
    judged[rows[~settled]] = False
    out = subject.output
    start, end = first[rows, out], last[:, out]
    with np.errstate(invalid="ignore"):
        moves = np.abs(end - start) > change * np.maximum(np.abs(start), np.abs(end))
    keep = settled & moves
    rows, p, middle = rows[keep], p[keep], 0.5 * (start + end)[keep]
    states, solved = course(subject, first[rows], p, _COARSE)
    judged[rows[~solved]] = False
    rows, p, middle, states = rows[solved], p[solved], middle[solved], states[solved]
    coarse = first_crossing(np.arange(len(_COARSE), dtype=float), states[:, :, out], middle)
    hit = np.isfinite(coarse)
    rows, p, middle = rows[hit], p[hit], middle[hit]
    k = np.floor(coarse[hit]).astype(np.int64)
    here = states[hit][np.arange(len(rows)), k]
    spans = [np.linspace(0.0, length, _FINE) for length in np.diff(_COARSE)]
    if len(rows):
        fine_states, solved = solve(subject, here, p, [plain_course(subject, s) for s in spans], k)
        fine = first_crossing(np.arange(_FINE, dtype=float), fine_states[:, :, out], middle)
        times[rows] = _COARSE[k] + np.diff(_COARSE)[k] * fine / (_FINE - 1)
        judged[rows[~solved]] = False
    return times, judged


def _loss(subject: Subject) -> Array:
    assert subject.loss is not None, "checked when the family is read"
    return np.asarray(subject.p[:, subject.loss])


@dataclass(frozen=True, slots=True)
class Acceleration:
    """Reaches the middle of its way sooner than simple regulation with the same loss rate.

    Attributes
    ----------
    ratio : float
        Largest response time, as a share of ln 2 / loss rate.
    before, after : float
        Level of the input before and after the step.
    change : float
        Least change of the output, as a share of its larger level.
    """

    ratio: float = 0.5
    before: float = 0.0
    after: float = 1.0
    change: float = 0.1
    name: ClassVar[str] = "acceleration"
    verb: ClassVar[str] = "answers faster than simple regulation"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = True
    rank: ClassVar[str] = "-response_ratio"
    measured: ClassVar[tuple[str, ...]] = ("response_ratio",)

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares; the measure is ``response_ratio``."""
        times, judged = response_times(subject, self.before, self.after, self.change)
        ratio = times * _loss(subject) / np.log(2.0)
        return Score(judged, judged & (ratio < self.ratio), {"response_ratio": ratio})

    def trace(self, subject: Subject) -> Trace:
        """Return the output around the step, for a subject of one parameter set."""
        return step_trace(subject, self.before, self.after)


@dataclass(frozen=True, slots=True)
class Delay:
    """Answers one direction of the step later than simple regulation, and later than the other.

    Attributes
    ----------
    delay : float
        Least difference between the delays of the two directions, times the loss rate.
    before, after : float
        The two levels of the input.
    change : float
        Least change of the output, as a share of its larger level.
    """

    delay: float = 0.2
    before: float = 0.0
    after: float = 1.0
    change: float = 0.1
    name: ClassVar[str] = "delay"
    verb: ClassVar[str] = "delays one direction of a step"
    needs_input: ClassVar[bool] = True
    needs_expressed: ClassVar[bool] = True
    rank: ClassVar[str] = "delay"
    measured: ClassVar[tuple[str, ...]] = ("delay", "delay_on", "delay_off")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares.

        Measures, in units of 1 / loss rate: ``delay_on`` and ``delay_off`` (response time less
        that of simple regulation) and ``delay``, their distance.
        """
        on, one = response_times(subject, self.before, self.after, self.change)
        off, other = response_times(subject, self.after, self.before, self.change)
        judged = one & other
        loss = _loss(subject)
        delay_on, delay_off = on * loss - np.log(2.0), off * loss - np.log(2.0)
        apart = np.abs(delay_on - delay_off)
        longer = np.maximum(delay_on, delay_off)
        shown = judged & (apart > self.delay) & (longer > self.delay)
        return Score(judged, shown, {"delay": apart, "delay_on": delay_on, "delay_off": delay_off})

    def trace(self, subject: Subject) -> Trace:
        """Return the output around the step, for a subject of one parameter set."""
        return step_trace(subject, self.before, self.after)
