"""Courses to look at: what one parameter set does when it shows a behaviour."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from ruleout.survey.behaviours.base import Array, Subject, course, rest
from ruleout.survey.behaviours.doses import sweep

POINTS: Final = 161
_LOG_TIMES: Final = np.concatenate([[0.0], np.geomspace(1e-3, 1e4, 113)])


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """Lines to draw, for one parameter set.

    Attributes
    ----------
    axis : {"time", "input"}
    x, output : (L, K) arrays
        L lines of K points; an input axis is best drawn in the logarithm.
    """

    axis: Literal["time", "input"]
    x: Array
    output: Array


def step_trace(subject: Subject, before: float, after: float) -> Trace:
    """Return the output from shortly before a step of the input until it has settled again."""
    first, _, _ = rest(subject, subject.at_input(before))
    p = subject.at_input(after)
    coarse = course(subject, first, p, _LOG_TIMES)[0][0, :, subject.output]
    away = np.abs(coarse - coarse[-1])
    moving = np.flatnonzero(away > 0.02 * max(away.max(), 1e-12))
    end = 1.5 * _LOG_TIMES[min(int(moving[-1]) + 1 if len(moving) else 1, len(_LOG_TIMES) - 1)]
    times = np.linspace(0.0, end, POINTS)
    values = course(subject, first, p, times)[0][0, :, subject.output]
    x = np.concatenate([[-0.15 * end, 0.0], times])
    return Trace("time", x[None], np.concatenate([[values[0]] * 2, values])[None])


def dose_trace(subject: Subject, low: float, high: float, *, down: bool = False) -> Trace:
    """Return the steady output along the rising input and, if asked for, on the way back."""
    levels = np.geomspace(low, high, POINTS)
    up, _ = sweep(subject, levels)
    x, lines = [levels], [up[0, :, subject.output]]
    if down:
        back, _ = sweep(subject, levels[::-1], up[:, -1])
        x.append(levels)
        lines.append(back[0, ::-1, subject.output])
    return Trace("input", np.array(x), np.array(lines))


def flow_trace(subject: Subject, p: Array, starts: Array, length: float) -> Trace:
    """Return the output from each of ``starts`` (L, N) on, for ``length`` time units."""
    times = np.linspace(0.0, length, 2 * POINTS)
    states, _ = course(subject, starts, np.repeat(p, len(starts), axis=0), times)
    return Trace("time", np.tile(times, (len(starts), 1)), states[:, :, subject.output])
