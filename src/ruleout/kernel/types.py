"""What the kernel takes and gives: systems, protocols, solutions."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from ruleout.expressions import Expr

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class System:
    """dy/dt = rhs(y, p, t), symbolically.

    Attributes
    ----------
    states : tuple of str, length N
    parameters : tuple of str, length P
    rhs : tuple of Expr, length N
        Over the symbols in ``states``, ``parameters`` and ``time``.
    """

    states: tuple[str, ...]
    parameters: tuple[str, ...]
    rhs: tuple[Expr, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Protocol:
    """Break points and output times of one experiment.

    Attributes
    ----------
    breaks : (S,) array
        Start time of each segment, increasing; ``breaks[0]`` is where integration starts.
    factor, shift : (S, P) arrays
        In segment s the parameters in force are ``factor[s] * p + shift[s]``.
    keep, add : (S, N) arrays
        On entering segment s the state becomes ``keep[s] * y + add[s]`` (segment 0 included).
    times : (M,) array
        Sorted output times, none before ``breaks[0]``; the last may be ``inf``: the steady state
        reached from the end of the other outputs under the last segment's parameters. An output at
        a break is the state after the change.
    """

    breaks: Array
    factor: Array
    shift: Array
    keep: Array
    add: Array
    times: Array


class Status(IntEnum):
    """Outcome of one solve. Failed rows are NaN from the failure on: data, never an exception."""

    OK = 0
    TOO_MANY_STEPS = 1
    STEP_TOO_SMALL = 2
    BAD_START = 3
    BLOW_UP = 4
    NO_STEADY_STATE = 5


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """States of B rows at the output times of their protocols.

    Attributes
    ----------
    states : (B, M, N) array
        M is the largest number of output times; NaN beyond a row's own and where it failed.
    status : (B,) int8 array of :class:`Status`
    steps : (B,) int32 array
        Accepted and rejected steps.
    """

    states: Array
    status: NDArray[np.int8]
    steps: NDArray[np.int32]


@dataclass(frozen=True, slots=True, eq=False)
class SteadyStates:
    """Steady states of B rows.

    Attributes
    ----------
    states : (B, N) array
    stable : (B,) bool array
        All eigenvalues of the Jacobian (restricted to directions not conserved) have negative
        real part.
    status : (B,) int8 array of :class:`Status`
    """

    states: Array
    stable: NDArray[np.bool_]
    status: NDArray[np.int8]
