"""What every behaviour is given and gives, and the ways to ask the kernel."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar, Protocol

import numpy as np
from numpy.typing import NDArray

from ruleout.kernel import Program, Status
from ruleout.kernel import Protocol as Course

if TYPE_CHECKING:
    from ruleout.survey.behaviours.traces import Trace

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

RTOL = 1e-5
ATOL = 1e-10
BELOW_ZERO = -1e-8
"""Amounts below this are a numerical accident, in which nothing is judged: a node that raises only
itself can grow on either side of zero, and rounding decides which once it has come near."""


@dataclass(frozen=True, slots=True, eq=False)
class Subject:
    """One wiring with its parameter sets.

    Attributes
    ----------
    program : Program
        N states, P parameters.
    p : (M, P) array
    start : (N,) array
        Where the flow to rest begins.
    ceiling : (M, N) array
        Levels that the states do not exceed for long: the scale of scattered starts.
    output : int
        Index of the output among the states.
    source : int or None
        Index of the input's level among the parameters.
    loss : int or None
        Index of the output's loss rate among the parameters, where it has one.
    """

    program: Program
    p: Array
    start: Array
    ceiling: Array
    output: int
    source: int | None = None
    loss: int | None = None

    def at_input(self, level: float | Array) -> Array:
        """Return the parameter sets with the input at ``level``."""
        assert self.source is not None, "checked when the family is read"
        p = self.p.copy()
        p[:, self.source] = level
        return p


@dataclass(frozen=True, slots=True, eq=False)
class Score:
    """How M parameter sets fared.

    Attributes
    ----------
    judged : (M,) bool array
        False where a solve failed: no evidence either way.
    shown : (M,) bool array
        True where the behaviour is shown; never where it is not judged.
    measures : mapping of str to (M,) array
        What the decision rests on; NaN where it was not needed or not judged.
    """

    judged: Flags
    shown: Flags
    measures: Mapping[str, Array]


class Behaviour(Protocol):
    """A behaviour with its thresholds, as a frozen dataclass of numbers.

    Attributes
    ----------
    name : str
    verb : str
        What a network that shows it does, such as ``adapts``.
    needs_input, needs_expressed : bool
        Whether it needs an input, and an output with a loss rate.
    rank : str
        The measure by which showing sets are ranked, best first; with ``-`` in front the smallest
        is best.
    measured : tuple of str
        Names of its measures, in order.
    """

    name: ClassVar[str]
    verb: ClassVar[str]
    needs_input: ClassVar[bool]
    needs_expressed: ClassVar[bool]
    rank: ClassVar[str]
    measured: ClassVar[tuple[str, ...]]

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares."""
        ...

    def trace(self, subject: Subject) -> Trace:
        """Return what to look at, for a subject of one parameter set."""
        ...


def rest(subject: Subject, p: Array, start: Array | None = None) -> tuple[Array, Flags, Flags]:
    """Return the states (M, N) that the flow settles at, whether it does, and whether stably.

    Parameters
    ----------
    p : (M, P) array
    start : (M, N) array, optional
        The subject's own start if not given.
    """
    y0 = np.broadcast_to(subject.start, (len(p), len(subject.start))) if start is None else start
    found = subject.program.steady(y0, p)
    settled = (found.status == Status.OK) & (found.states >= BELOW_ZERO).all(axis=1)
    return found.states, settled, found.stable


def plain_course(subject: Subject, times: Array) -> Course:
    """Return the protocol that changes nothing and puts out at ``times``."""
    n, m = len(subject.start), subject.p.shape[1]
    return Course(
        breaks=np.array([times[0]]),
        factor=np.ones((1, m)),
        shift=np.zeros((1, m)),
        keep=np.ones((1, n)),
        add=np.zeros((1, n)),
        times=times,
    )


def course(subject: Subject, y0: Array, p: Array, times: Array) -> tuple[Array, Flags]:
    """Return the states (M, K, N) at ``times`` from ``y0`` (M, N) on, and whether all went well."""
    return solve(subject, y0, p, [plain_course(subject, times)])


def solve(
    subject: Subject,
    y0: Array,
    p: Array,
    courses: Sequence[Course],
    which: NDArray[np.int64] | None = None,
) -> tuple[Array, Flags]:
    """Return states along each row's own course, and whether all went well."""
    found = subject.program.solve(y0, p, courses, which, rtol=RTOL, atol=ATOL)
    sound = (found.states >= BELOW_ZERO) | np.isnan(found.states)
    return found.states, (found.status == Status.OK) & sound.all(axis=(1, 2))


def unknown(count: int) -> Array:
    """Return ``count`` NaN."""
    return np.full(count, np.nan)


def first_crossing(times: Array, values: Array, level: Array) -> Array:
    """Return when each row of ``values`` (M, K) first passes ``level`` (M,), by interpolation.

    NaN where it does not. Between output times the course is taken as straight.
    """
    above = values >= level[:, None]
    rising = ~above[:, :1]
    passed = np.where(rising, above, ~above)
    at = np.argmax(passed, axis=1)
    found = passed[np.arange(len(values)), at] & (at > 0)
    i = np.maximum(at, 1)
    rows = np.arange(len(values))
    before, after = values[rows, i - 1], values[rows, i]
    with np.errstate(all="ignore"):
        share = (level - before) / (after - before)
        when = times[i - 1] + share * (times[i] - times[i - 1])
    return np.where(found, when, np.nan)
