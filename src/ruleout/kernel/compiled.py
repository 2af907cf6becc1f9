"""Compiled implementation: emitted code in SIMD lanes, driven from a queue."""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from ruleout.kernel.controls import Setting
from ruleout.kernel.engine import SystemCode
from ruleout.kernel.lowering import Lowered
from ruleout.kernel.memory import Lanes, Rows
from ruleout.kernel.reference import Tape
from ruleout.kernel.schedule import Integers, Schedule, addresses, pack
from ruleout.kernel.types import Array, Protocol, Status

Flags = NDArray[np.int8]
_ROWS_PER_TASK = 512
_PATIENCE = 1000.0
"""Steps at rtol 1e-6 in which the implicit method must have made progress."""


class CompiledBackend:
    """Solves and steady states of one lowered system, by machine code."""

    def __init__(self, lowered: Lowered, totals: Array, pivots: tuple[int, ...]) -> None:
        self._n, self._p = len(lowered.states), len(lowered.parameters)
        self._outputs = self._n - lowered.forced
        self._lowered = lowered
        self._code = SystemCode(lowered, totals, pivots)
        self._spare: dict[int, list[Lanes]] = {}

    @cached_property
    def _jacobian(self) -> Tape:
        entries = [entry for row in self._lowered.jacobian for entry in row]
        return Tape(entries, (*self._lowered.states, *self._lowered.parameters))

    def jacobian(self, y: Array, q: Array) -> Array:
        """Return the (R, N, N) Jacobians at states y (R, N) and parameters q (R, P)."""
        return self._jacobian.run([*y.T, *q.T]).reshape(len(y), self._n, self._n)

    def solve(
        self,
        y0: Array,
        p: Array,
        schedule: Schedule,
        which: Integers,
        *,
        rtol: float,
        atol: Array,
        group: int,
        max_steps: int,
    ) -> tuple[Array, Flags, NDArray[np.int32]]:
        """Return states (B, M, N), status and steps; see :meth:`Program.solve`."""
        from ruleout.kernel.driver import EXPLICIT, IMPLICIT, STIFF_STEPS, integrate

        plan = schedule.plan
        # The driver reads it behind its address, so it must not be a strided view.
        leads = np.ascontiguousarray(which[::group])
        begin = plan.segment_at[leads]
        shape = (len(y0), schedule.outputs, self._outputs)
        started = plan.breaks[begin]
        rows = Rows(y0.copy(), p, shape, leads, begin - 1, plan.time_at[leads], started)
        vectors = _vectors(group, self._code.width)
        most = float(max_steps)
        patience = _PATIENCE * max(1.0, (1e-6 / rtol) ** 0.2)

        def run(groups: Integers) -> None:
            lanes = self._borrow(vectors)
            lanes.tolerance[: len(Setting)] = rtol, STIFF_STEPS, 0.0, 0.0
            lanes.tolerance[len(Setting) :] = atol
            stiff = np.empty(len(groups), dtype=np.int64)
            directory = lanes.directory(schedule, rows, group)
            (at,) = addresses(directory)
            left = integrate(EXPLICIT, at, groups, most, patience, stiff)
            if left:
                lanes.tolerance[Setting.STIFF_LIMIT] = np.inf
                integrate(IMPLICIT, at, stiff[:left], most, patience, stiff[:0])
            self._give_back(lanes)

        _in_parallel(run, np.arange(len(leads)), _ROWS_PER_TASK // group + 1)
        if schedule.ends_at_rest:
            self._end(rows, p, schedule, which)
        return rows.states, rows.status.astype(np.int8), rows.steps.astype(np.int32)

    def steady(self, y0: Array, q: Array) -> tuple[Array, Flags]:
        """Return the states (R, N) that the flow from y0 settles at, and their status."""
        return self._settle(y0, q, self._unchanged, np.zeros(len(y0), dtype=np.int64))

    @cached_property
    def _unchanged(self) -> Schedule:
        """The schedule in which parameters are as given and nothing is asked for but rest."""
        protocol = Protocol(
            breaks=np.zeros(1),
            factor=np.ones((1, self._p)),
            shift=np.zeros((1, self._p)),
            keep=np.ones((1, self._n)),
            add=np.zeros((1, self._n)),
            times=np.array([np.inf]),
        )
        return pack([protocol], self._n, self._p, forced=False)

    def _settle(
        self, y: Array, p: Array, schedule: Schedule, which: Integers
    ) -> tuple[Array, Flags]:
        """Return the steady states under the last segment of each row's protocol."""
        from ruleout.kernel.driver import SETTLE, STEADY_FLOOR, integrate
        from ruleout.kernel.newton import STEADY_RTOL

        last, output = schedule.plan.segment_at[which + 1] - 1, schedule.plan.time_at[which + 1]
        rows = Rows(y.copy(), p, (len(y), 1, self._n), which, last, output, 0.0)

        def run(part: Integers) -> None:
            lanes = self._borrow(1)
            lanes.tolerance[:] = 0.0
            lanes.tolerance[Setting.RTOL] = STEADY_RTOL
            lanes.tolerance[Setting.STIFF_LIMIT] = np.inf
            lanes.tolerance[Setting.SETTLE_LIMIT] = 1.0
            lanes.tolerance[Setting.FLOOR_FACTOR] = STEADY_RTOL * STEADY_FLOOR
            directory = lanes.directory(schedule, rows, 1)
            (at,) = addresses(directory)
            integrate(SETTLE, at, part, np.inf, np.inf, part[:0])
            self._give_back(lanes)

        _in_parallel(run, np.arange(len(y)), _ROWS_PER_TASK)
        return rows.states[:, 0], rows.status.astype(np.int8)

    def _end(self, rows: Rows, p: Array, schedule: Schedule, which: Integers) -> None:
        """Carry rows whose protocol ends in a steady state there."""
        plan = schedule.plan
        at = np.flatnonzero((plan.endless[which] == 1) & (rows.status == Status.OK))
        if self._lowered.forced:
            rows.status[at] = Status.NO_STEADY_STATE
            return
        k = which[at]
        y, status = self._settle(rows.y[at], p[at], schedule, k)
        rows.states[at, plan.time_at[k + 1] - plan.time_at[k]] = y[:, : self._outputs]
        rows.status[at] = status

    def _borrow(self, vectors: int) -> Lanes:
        # List operations are atomic, so threads can share the spare ones without a lock.
        spare = self._spare.setdefault(vectors, [])
        try:
            return spare.pop()
        except IndexError:
            return Lanes(vectors, self._n, self._p, self._code)

    def _give_back(self, lanes: Lanes) -> None:
        self._spare[len(lanes.control)].append(lanes)


def _vectors(group: int, width: int) -> int:
    """Return the number of vectors that groups of this size fill best."""
    fewest = -(-group // width)

    def waste(vectors: int) -> float:
        lanes = vectors * width
        return (lanes % group) / lanes

    return min(range(fewest, fewest + 4), key=waste)


def _usable_cores() -> int:
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity else os.cpu_count() or 1


_threads = _usable_cores()
_pool: ThreadPoolExecutor | None = None
_pool_lock = threading.Lock()


def _forget_pool() -> None:
    """A forked process has the pool but not its threads."""
    global _pool, _pool_lock
    _pool, _pool_lock = None, threading.Lock()


if hasattr(os, "register_at_fork"):
    os.register_at_fork(after_in_child=_forget_pool)


def set_threads(count: int) -> None:
    """Use ``count`` threads for big batches from now on; answers do not depend on it."""
    global _threads, _pool
    with _pool_lock:
        if count != _threads and _pool is not None:
            _pool.shutdown(wait=False)
            _pool = None
        _threads = count


def _in_parallel(run: Callable[[Integers], None], items: Integers, size: int) -> None:
    """Call ``run`` on parts of ``items`` of about ``size``, in threads if there are several."""
    global _pool
    parts = len(items) // size
    if _threads == 1 or parts < 2:
        run(items)
        return
    with _pool_lock:
        if _pool is None:
            _pool = ThreadPoolExecutor(_threads, thread_name_prefix="kernel")
        pool = _pool
    pieces: Sequence[Integers] = np.array_split(items, parts)
    for _ in pool.map(run, pieces):
        pass
