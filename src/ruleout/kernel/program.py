"""The front door: a system, compiled, and what it can be asked."""

from __future__ import annotations

import os
import threading
import warnings
from collections import OrderedDict
from collections.abc import Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ruleout.kernel.compiled import CompiledBackend
from ruleout.kernel.conservation import conserved_totals
from ruleout.kernel.lowering import Lowered, lower
from ruleout.kernel.reference import ReferenceBackend
from ruleout.kernel.schedule import Schedule, pack
from ruleout.kernel.stability import are_stable
from ruleout.kernel.types import Array, Protocol, Solution, Status, SteadyStates, System

_compiling = threading.Lock()


def compile_system(system: System) -> Program:
    """Return the program of ``system``, kept for the next call with an equal system.

    Raises
    ------
    ValueError
        If a right-hand side uses a symbol that is no state, parameter or ``time``.
    """
    with _compiling:
        return _compiled(system)


@lru_cache(maxsize=1024)
def _compiled(system: System) -> Program:
    return Program(system)


def _backend(
    lowered: Lowered, totals: Array, pivots: tuple[int, ...]
) -> CompiledBackend | ReferenceBackend:
    if lowered.states and os.environ.get("RULEOUT_KERNEL") != "reference":
        try:
            return CompiledBackend(lowered, totals, pivots)
        except (ImportError, OSError, RuntimeError) as error:
            warnings.warn(
                f"no machine code can be made here ({error}): the kernel is interpreted, slowly",
                RuntimeWarning,
                stacklevel=2,
            )
    return ReferenceBackend(lowered, totals, pivots)


class Program:
    """One system, ready to be solved in batches. Made by :func:`compile_system`.

    Attributes
    ----------
    system : System
    """

    def __init__(self, system: System) -> None:
        self.system = system
        self._lowered = lower(system)
        self._totals, self._pivots = conserved_totals(self._lowered)
        self._backend = _backend(self._lowered, self._totals, self._pivots)
        self._schedules: OrderedDict[tuple[int, ...], tuple[Sequence[Protocol], Schedule]] = (
            OrderedDict()
        )

    def solve(
        self,
        y0: ArrayLike,
        p: ArrayLike,
        protocols: Sequence[Protocol],
        which: ArrayLike | None = None,
        *,
        rtol: float = 1e-6,
        atol: ArrayLike = 1e-9,
        group: int = 1,
        max_steps: int = 100_000,
    ) -> Solution:
        """Integrate B rows, each along its own protocol.

        Parameters
        ----------
        y0 : (B, N) array_like
            States before the first break point's change.
        p : (B, P) array_like
        protocols : sequence of Protocol
        which : (B,) array_like of int, optional
            Row b follows ``protocols[which[b]]``; the first one if not given.

        Other Parameters
        ----------------
        rtol : float
        atol : float or (N,) array_like
            Local error is kept below ``atol + rtol * |y|`` in every state.
        group : int
            Rows come in consecutive groups of this size; a group shares its protocol and one step
            sequence, controlled by the largest error among them. The difference of two rows of a
            group is then a smooth function of the difference of their parameters.
        max_steps : int
            Attempted steps per row, at most.

        Returns
        -------
        Solution

        Raises
        ------
        ValueError
            If shapes do not fit. A row that cannot be solved is a status, never an exception.
        """
        y, q = self._check_rows(y0, p, group)
        rows = len(y)
        index = np.zeros(rows, dtype=np.int64) if which is None else np.asarray(which, np.int64)
        if index.shape != (rows,):
            raise ValueError(f"which has shape {index.shape}, not ({rows},)")
        if rows and (index.min() < 0 or index.max() >= len(protocols)):
            raise ValueError(f"which must lie in 0..{len(protocols) - 1}")
        schedule = self._schedule(protocols)
        n = len(self.system.states)
        if n == 0:
            steps = np.zeros(rows, dtype=np.int32)
            return Solution(np.empty((rows, schedule.outputs, 0)), _all_ok(rows), steps)
        tolerance = np.full(len(self._lowered.states), np.inf)
        tolerance[:n] = atol
        if not (rtol > 0.0 and np.all(tolerance > 0.0)):
            raise ValueError(f"tolerances must be positive, not rtol={rtol!r} and atol={atol!r}")
        states, status, steps = self._backend.solve(
            y,
            q,
            schedule,
            index,
            rtol=rtol,
            atol=tolerance,
            group=group,
            max_steps=max_steps,
        )
        return Solution(states[:, :, :n], status, steps)

    def steady(
        self, y0: ArrayLike, p: ArrayLike, *, group: int = 1, stability: bool = True
    ) -> SteadyStates:
        """Find the steady state that the flow from each row's start settles at.

        Parameters
        ----------
        y0 : (B, N) array_like
        p : (B, P) array_like

        Other Parameters
        ----------------
        group : int
            As in :meth:`solve`. Steady states are found to rounding error, so that differences
            between rows of a group are accurate without shared steps.
        stability : bool
            Whether to judge stability; ``stable`` is all False if not.

        Returns
        -------
        SteadyStates
            A flow that does not settle has status ``NO_STEADY_STATE`` and NaN states.
        """
        y, q = self._check_rows(y0, p, group)
        rows, n = len(y), len(self.system.states)
        if n == 0:
            return SteadyStates(y, np.ones(rows, dtype=bool), _all_ok(rows))
        if self._lowered.forced:
            status = np.full(rows, Status.NO_STEADY_STATE, dtype=np.int8)
            return SteadyStates(np.full((rows, n), np.nan), np.zeros(rows, dtype=bool), status)
        states, status = self._backend.steady(y, q)
        stable = np.zeros(rows, dtype=bool)
        if stability:
            found = np.flatnonzero(status == Status.OK)
            jacobians = self._backend.jacobian(states[found], q[found])
            stable[found] = are_stable(jacobians, self._totals)
        return SteadyStates(states, stable, status)

    def _check_rows(self, y0: ArrayLike, p: ArrayLike, group: int) -> tuple[Array, Array]:
        y = np.ascontiguousarray(y0, dtype=float)
        q = np.ascontiguousarray(p, dtype=float)
        n, m = len(self.system.states), len(self.system.parameters)
        if y.ndim != 2 or y.shape[1] != n:
            raise ValueError(f"y0 has shape {y.shape}, not (B, {n})")
        if q.shape != (len(y), m):
            raise ValueError(f"p has shape {q.shape}, not ({len(y)}, {m})")
        if group < 1 or len(y) % group:
            raise ValueError(f"{len(y)} rows cannot come in groups of {group}")
        if self._lowered.forced:
            y = np.hstack([y, np.zeros((len(y), 1))])
        return y, q

    def _schedule(self, protocols: Sequence[Protocol]) -> Schedule:
        # The protocols are kept with their schedule, so an identity cannot be taken over by
        # another protocol while the entry lives.
        key = tuple(map(id, protocols))
        known = self._schedules.get(key)
        if known is None:
            n, m = len(self.system.states), len(self.system.parameters)
            known = (tuple(protocols), pack(protocols, n, m, self._lowered.forced))
            self._schedules[key] = known
            while len(self._schedules) > 64:
                self._schedules.popitem(last=False)
        return known[1]


def _all_ok(rows: int) -> NDArray[np.int8]:
    """Return the outcome of a system without states: every node removed or clamped."""
    return np.full(rows, Status.OK, dtype=np.int8)
