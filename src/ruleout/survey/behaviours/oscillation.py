"""Sustained oscillation: a swing of constant size after the transient, not a slow spiral.

The output oscillates if it swings about its mean by a given share and keeps that swing over many
periods (see Novak and Tyson, 'Design principles of biochemical oscillators', Nat. Rev. Mol. Cell
Biol. 9 (2008) 981-991, doi:10.1038/nrm2530, for what makes networks do so).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.behaviours.base import (
    Array,
    Score,
    Subject,
    plain_course,
    rest,
    solve,
    unknown,
)
from ruleout.survey.behaviours.traces import Trace, flow_trace

SAMPLES: Final = 385
"""Output times of a window."""
FEWEST_PERIODS: Final = 16
MOST_PERIODS: Final = 64
"""Periods that a window must hold to be looked at: enough for a drift to show, few enough that
each has six samples."""
SHORTEST: Final = 8.0
LENGTHS: Final = 18
"""Windows last 8, 16, ... time units."""
ROUNDS: Final = 40


@dataclass(frozen=True, slots=True)
class Oscillation:
    """Goes on swinging.

    Attributes
    ----------
    amplitude : float
        Smallest swing (highest minus lowest) as a share of the mean.
    drift : float
        Largest relative change of the swing between the first and the last third of a window of
        16 to 64 periods.
    level : float
        Of the input, where there is one.
    """

    amplitude: float = 0.05
    drift: float = 0.01
    level: float = 0.5
    name: ClassVar[str] = "oscillation"
    verb: ClassVar[str] = "oscillates"
    needs_input: ClassVar[bool] = False
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "amplitude"
    measured: ClassVar[tuple[str, ...]] = ("amplitude", "period")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares, from the subject's own start.

        Measures are ``amplitude`` (swing / mean) and ``period``, of sustained oscillations.
        """
        p = subject.p if subject.source is None else subject.at_input(self.level)
        count = len(p)
        _, settled, stable = rest(subject, p)
        judged = settled & stable
        shown = np.zeros(count, dtype=bool)
        amplitude, period = unknown(count), unknown(count)
        live = np.flatnonzero(~judged)
        y = np.tile(_uneven(subject), (count, 1))
        length = np.zeros(count, dtype=np.int64)
        times = [np.linspace(0.0, SHORTEST * 2.0**k, SAMPLES) for k in range(LENGTHS)]
        courses = [plain_course(subject, t) for t in times]
        for _ in range(ROUNDS):
            if not len(live):
                break
            states, solved = solve(subject, y[live], p[live], courses, length[live])
            live, states = live[solved], states[solved]
            y[live] = states[:, -1]
            window = look_at(states[:, :, subject.output])
            fits = (window.periods >= FEWEST_PERIODS) & (window.periods <= MOST_PERIODS)
            steady_swing = np.abs(window.last / window.first - 1.0) <= self.drift
            sustained = fits & steady_swing & (window.last >= self.amplitude)
            # Small and steady, small and shrinking, or gone: no oscillation, or a spiral.
            flat = fits & (window.last < self.amplitude)
            flat &= steady_swing | (window.last < 0.9 * window.first)
            flat |= window.last < 1e-4 * self.amplitude
            at = live[sustained]
            shown[at] = True
            amplitude[at] = window.last[sustained]
            period[at] = SHORTEST * 2.0 ** length[at] * window.spacing[sustained] / (SAMPLES - 1)
            judged[live[sustained | flat]] = True
            too_short = window.periods < FEWEST_PERIODS
            too_long = window.periods > MOST_PERIODS
            length[live] += too_short.astype(int) - too_long
            going = ~(sustained | flat) & (length[live] >= 0) & (length[live] < LENGTHS)
            live = live[going]
        return Score(judged, shown, {"amplitude": amplitude, "period": period})

    def trace(self, subject: Subject) -> Trace:
        """Return twelve periods from the start on, for a subject of one parameter set."""
        p = subject.p if subject.source is None else subject.at_input(self.level)
        period = self.score(subject).measures["period"][0]
        return flow_trace(subject, p, _uneven(subject)[None], 12.0 * period)


def _uneven(subject: Subject) -> Array:
    """Return the start with its nodes set apart.

    Nodes started alike may lie on a line that leads into an unstable state.
    """
    return np.asarray(subject.start * (1.0 + 0.1 * np.arange(len(subject.start))))


@dataclass(frozen=True, slots=True, eq=False)
class _Window:
    """What a window shows of R rows.

    Attributes
    ----------
    periods : (R,) int array
        Upward crossings of the mean, less one.
    spacing : (R,) array
        Mean distance of crossings, in samples.
    first, last : (R,) arrays
        Swing over mean in the first and in the last third.
    """

    periods: NDArray[np.int64]
    spacing: Array
    first: Array
    last: Array


def look_at(values: Array) -> _Window:
    """Return periods and swings of courses (R, K) sampled at equal distances."""
    high, low = values.max(axis=1), values.min(axis=1)
    middle = 0.5 * (high + low)
    above = values > middle[:, None]
    up = ~above[:, :-1] & above[:, 1:]
    crossings = up.sum(axis=1)
    rows = np.arange(len(values))
    first_at = np.argmax(up, axis=1)
    last_at = up.shape[1] - 1 - np.argmax(up[:, ::-1], axis=1)

    def place(at: NDArray[np.intp]) -> Array:
        before, after = values[rows, at], values[rows, at + 1]
        with np.errstate(all="ignore"):
            return np.asarray(at + (middle - before) / (after - before))

    spacing = (place(last_at) - place(first_at)) / np.maximum(crossings - 1, 1)
    third = values.shape[1] // 3
    with np.errstate(all="ignore"):
        swings = [
            np.ptp(v, axis=1) / v.mean(axis=1) for v in (values[:, :third], values[:, -third:])
        ]
    return _Window(np.maximum(crossings - 1, 0), spacing, swings[0], swings[1])
