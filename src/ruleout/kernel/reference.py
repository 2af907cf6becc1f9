"""Reference implementation: arrays interpreted operation by operation, Rodas5P throughout.

Slow and plain. It is the oracle of the compiled kernel, and takes its place where no code can be
emitted or ``RULEOUT_KERNEL=reference`` is set.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ruleout.expressions import FUNCTIONS, Expr, ordered
from ruleout.kernel.coefficients import RODAS_A, RODAS_C, RODAS_GAMMA
from ruleout.kernel.lowering import Lowered
from ruleout.kernel.schedule import Schedule
from ruleout.kernel.types import Array, Status

Flags = NDArray[np.int8]

_RUNNING = -1
_STEADY_RTOL = 1e-4
_STEADY_STEPS = 3000
_SMALLEST_STEP = 1e-100


class Tape:
    """An expression graph as a list of array operations.

    Parameters
    ----------
    roots : sequence of Expr
    inputs : sequence of str
        Names of the symbols, in the order in which ``run`` receives their values.
    """

    def __init__(self, roots: Sequence[Expr], inputs: Sequence[str]) -> None:
        slot: dict[Expr, int] = {}
        place = {name: i for i, name in enumerate(inputs)}
        self._memory: list[Any] = [None] * len(inputs)
        self._operations: list[tuple[Callable[..., Any], int, tuple[int, ...]]] = []
        for node in ordered(roots):
            if node.op == "sym":
                slot[node] = place[node.name]
                continue
            slot[node] = len(self._memory)
            self._memory.append(node.value if node.op == "const" else None)
            if node.op != "const":
                arguments = tuple(slot[a] for a in node.args)
                self._operations.append((FUNCTIONS[node.op], slot[node], arguments))
        self._roots = [slot[root] for root in roots]

    def run(self, values: Sequence[Array]) -> Array:
        """Return the (R, roots) values for inputs of shape (R,)."""
        memory = list(self._memory)
        memory[: len(values)] = values
        for function, target, arguments in self._operations:
            memory[target] = function(*(memory[a] for a in arguments))
        result = np.empty((len(values[0]) if values else 0, len(self._roots)))
        for i, root in enumerate(self._roots):
            result[:, i] = memory[root]
        return result


class ReferenceBackend:
    """Solves and steady states of one lowered system, by interpretation."""

    def __init__(self, lowered: Lowered, totals: Array, pivots: tuple[int, ...]) -> None:
        names = (*lowered.states, *lowered.parameters)
        self._n = len(lowered.states)
        self._forced = lowered.forced
        self._rhs = Tape(lowered.rhs, names)
        self._jacobian = Tape([entry for row in lowered.jacobian for entry in row], names)
        self._totals = totals
        self._pivots = np.array(pivots, dtype=int)

    def slopes(self, y: Array, q: Array) -> Array:
        """Return the (R, N) right-hand sides at states y (R, N) and parameters q (R, P)."""
        return self._rhs.run([*y.T, *q.T])

    def jacobian(self, y: Array, q: Array) -> Array:
        """Return the (R, N, N) Jacobians."""
        return self._jacobian.run([*y.T, *q.T]).reshape(len(y), self._n, self._n)

    def solve(
        self,
        y0: Array,
        p: Array,
        schedule: Schedule,
        which: NDArray[np.int64],
        *,
        rtol: float,
        atol: Array,
        group: int,
        max_steps: int,
    ) -> tuple[Array, Flags, NDArray[np.int32]]:
        """Return states (B, M, N), status and steps; see :meth:`Program.solve`."""
        with np.errstate(all="ignore"):
            run = _Run(self, y0, p, schedule, which, group)
            run.integrate(rtol, atol, max_steps)
            plan = schedule.plan
            ending = np.flatnonzero((plan.endless[which] == 1) & (run.status == Status.OK))
            if self._forced:
                run.status[ending] = Status.NO_STEADY_STATE
            elif len(ending):
                last = plan.time_at[which[ending] + 1] - plan.time_at[which[ending]]
                y, status = self.steady(run.y[ending], run.q[ending])
                run.states[ending, last] = y
                run.status[ending] = status
        return run.states, run.status, run.steps

    def steady(self, y0: Array, q: Array) -> tuple[Array, Flags]:
        """Return the states (R, N) that the flow from y0 settles at, and their status."""
        with np.errstate(all="ignore"):
            return self._steady(y0, q)

    def attempt(self, y: Array, q: Array, h: Array) -> tuple[Array, Array, Array]:
        """Return one Rodas5P step: the new states, their error and the first increment."""
        matrix = np.eye(self._n) / (h * RODAS_GAMMA)[:, None, None] - self.jacobian(y, q)
        inverse = _inverse(matrix)
        ks: list[Array] = []
        u = y
        for stage in range(8):
            u = y + _combine(RODAS_A[stage], ks) if stage < 6 else u + ks[-1]
            right = self.slopes(u, q) + _combine(RODAS_C[stage], ks) / h[:, None]
            ks.append(np.sum(inverse * right[:, None, :], axis=2))
        return u + ks[7], ks[7], ks[0]

    def _steady(self, y0: Array, q0: Array) -> tuple[Array, Flags]:
        rows = len(y0)
        result = np.full((rows, self._n), np.nan)
        status = np.full(rows, Status.NO_STEADY_STATE, dtype=np.int8)
        live = np.arange(rows)
        y, q = y0.copy(), q0
        f = self.slopes(y, q)
        bad = ~(np.isfinite(f) & np.isfinite(y)).all(axis=1)
        status[bad] = Status.BAD_START
        live, y, q = live[~bad], y[~bad], q[~bad]
        h = self._first_step(y, q, _STEADY_RTOL, self._floor(y))
        largest = np.abs(y).max(axis=1, initial=0.0)
        for step in range(_STEADY_STEPS):
            if not len(live):
                break
            new, error, first = self.attempt(y, q, h)
            floor = self._floor(np.maximum(np.abs(y), largest[:, None]))
            scale = floor + _STEADY_RTOL * np.maximum(np.abs(y), np.abs(new))
            size = np.max(np.abs(error) / scale, axis=1)
            accepted = size <= 1.0
            near = accepted & (np.max(np.abs(first) / scale, axis=1) <= 1.0) & (step >= 3)
            y = np.where(accepted[:, None], new, y)
            largest = np.maximum(largest, np.abs(y).max(axis=1))
            done = np.zeros(len(live), dtype=bool)
            if near.any():
                at = np.flatnonzero(near)
                found, good = self._polish(y[at], q[at], h[at], y0[live[at]])
                result[live[at[good]]] = found[good]
                status[live[at[good]]] = Status.OK
                done[at[good]] = True
            h = h * _growth(size)
            lost = (h < _SMALLEST_STEP) | ~(largest < 1e200)
            grown = largest > 1e8 * (1.0 + np.abs(y0[live]).max(axis=1, initial=0.0))
            status[live[lost & grown]] = Status.BLOW_UP
            done |= lost
            live, y, q, h, largest = live[~done], y[~done], q[~done], h[~done], largest[~done]
        return result, status

    def _polish(self, y: Array, q: Array, h: Array, y0: Array) -> tuple[Array, NDArray[np.bool_]]:
        """Newton iteration within the conserved totals of y0; whether it stayed near."""
        inertia = np.eye(self._n)
        inertia[self._pivots] = 0.0
        x = y.copy()
        good = np.ones(len(y), dtype=bool)
        for iteration in range(8):
            matrix = inertia / (1e8 * h)[:, None, None] - self.jacobian(x, q)
            right = self.slopes(x, q)
            if len(self._pivots):
                matrix[:, self._pivots] = self._totals
                right[:, self._pivots] = (y0 - x) @ self._totals.T
            dx = np.sum(_inverse(matrix) * right[:, None, :], axis=2)
            x = x + dx
            moved = np.max(np.abs(dx) / (np.abs(x) + self._floor(x) / _STEADY_RTOL), axis=1)
            if iteration == 0:
                good &= moved < 1e-5
        return x, good & (moved < 1e-10)

    def _floor(self, y: Array) -> Array:
        largest: Array = np.abs(y).max(axis=1, keepdims=True, initial=0.0)
        return _STEADY_RTOL * (1e-6 * largest + 1e-12)

    def _first_step(self, y: Array, q: Array, rtol: float, atol: Array) -> Array:
        """Hairer's estimate of a first step (Hairer, Norsett & Wanner I, section II.4)."""
        f = self.slopes(y, q)
        scale = atol + rtol * np.abs(y)
        size = np.max(np.abs(y) / scale, axis=1)
        slope = np.max(np.abs(f) / scale, axis=1)
        h = np.where((size < 1e-5) | (slope < 1e-5), 1e-6, 0.01 * size / slope)
        bend = np.max(np.abs(self.slopes(y + h[:, None] * f, q) - f) / scale, axis=1) / h
        steepest = np.maximum(slope, np.where(np.isfinite(bend), bend, 0.0))
        guess = np.where(steepest <= 1e-15, np.maximum(1e-6, 1e-3 * h), (0.01 / steepest) ** 0.2)
        return np.minimum(100.0 * h, guess)


class _Run:
    """One batch under way."""

    def __init__(
        self,
        backend: ReferenceBackend,
        y0: Array,
        p: Array,
        schedule: Schedule,
        which: NDArray[np.int64],
        group: int,
    ) -> None:
        rows, n = y0.shape
        plan = schedule.plan
        self.backend, self.plan, self.which, self.p = backend, plan, which, p
        self.y, self.q = y0.copy(), p.copy()
        self.leader = np.arange(rows) // group * group
        self.states = np.full((rows, schedule.outputs, n), np.nan)
        self.status = np.full(rows, _RUNNING, dtype=np.int8)
        self.steps = np.zeros(rows, dtype=np.int32)
        self.segment = plan.segment_at[which] - 1
        self.output = plan.time_at[which]
        self.t = plan.breaks[plan.segment_at[which]].copy()
        self.stop = np.empty(rows)
        self.h = np.zeros(rows)

    def integrate(self, rtol: float, atol: Array, max_steps: int) -> None:
        """Run every row to its last finite output (or its last break, if it ends in rest)."""
        rows = np.arange(len(self.y))
        self._arrive(rows, rtol, atol)
        started = np.abs(self.y).max(axis=1, initial=0.0)
        while True:
            live = np.flatnonzero(self.status == _RUNNING)
            if not len(live):
                return
            h = np.minimum(self.h, self.stop - self.t)[live]
            h = np.where(
                self.h[live] * 1.01 >= (self.stop - self.t)[live], self.stop[live] - self.t[live], h
            )
            y, lead = self.y[live], np.searchsorted(live, self.leader[live])
            new, error, _ = self.backend.attempt(y, self.q[live], h)
            scale = atol + rtol * np.maximum(np.abs(y), np.abs(new))
            size = _worst(np.max(np.abs(error) / scale, axis=1), lead)
            self.steps[live] += 1
            accepted = size <= 1.0
            moved = live[accepted]
            self.y[moved] = new[accepted]
            arrived = accepted & (self.t[live] + h >= self.stop[live])
            self.t[moved] = np.where(arrived, self.stop[live], self.t[live] + h)[accepted]
            # A step cut short by an output time says little about the next one.
            self.h[live] = np.where(
                arrived, np.maximum(self.h[live], h * _growth(size)), h * _growth(size)
            )
            self._fail(live, started, max_steps)
            self._arrive(live[arrived & (self.status[live] == _RUNNING)], rtol, atol)

    def _arrive(self, rows: NDArray[np.intp], rtol: float, atol: Array) -> None:
        """Enter segments and note outputs due at the rows' present times."""
        plan = self.plan
        entered = []
        for b in rows:
            k = self.which[b]
            t = self.t[b]
            last, end = plan.segment_at[k + 1], plan.time_at[k + 1]
            s = self.segment[b]
            while s + 1 < last and plan.breaks[s + 1] <= t:
                s += 1
                self.y[b] = plan.keep[s] * self.y[b] + plan.add[s]
                self.q[b] = plan.factor[s] * self.p[b] + plan.shift[s]
            if s != self.segment[b]:
                self.segment[b] = s
                entered.append(b)
            o = self.output[b]
            while o < end and plan.times[o] <= t:
                self.states[b, o - plan.time_at[k]] = self.y[b]
                o += 1
            self.output[b] = o
            following = plan.breaks[s + 1] if s + 1 < last else np.inf
            if o < end:
                self.stop[b] = min(plan.times[o], following)
            elif plan.endless[k] and s + 1 < last:
                self.stop[b] = following
            else:
                self.status[b] = Status.OK
        if entered:
            at = np.array(entered)
            backend = self.backend
            finite = np.isfinite(backend.slopes(self.y[at], self.q[at])).all(axis=1)
            finite &= np.isfinite(self.y[at]).all(axis=1)
            self.status[at[~finite]] = Status.BAD_START
            lead = self.leader[at]
            self.status[at[self.status[lead] == Status.BAD_START]] = Status.BAD_START
            self.h[at] = backend._first_step(self.y[lead], self.q[lead], rtol, atol)

    def _fail(self, live: NDArray[np.intp], started: Array, max_steps: int) -> None:
        lead = self.leader[live]
        grown = np.abs(self.y[lead]).max(axis=1) > 1e8 * (1.0 + started[lead])
        stuck = self.t[lead] + self.h[lead] * 0.01 == self.t[lead]
        stuck |= self.h[lead] < _SMALLEST_STEP
        status = np.where(stuck & grown, Status.BLOW_UP, _RUNNING)
        status = np.where(stuck & ~grown, Status.STEP_TOO_SMALL, status)
        status = np.where(~stuck & (self.steps[live] >= max_steps), Status.TOO_MANY_STEPS, status)
        lost = ~(np.isfinite(self.y[live]) & np.isfinite(self.y[lead])).all(axis=1)
        self.status[live] = np.where(lost, Status.BLOW_UP, status)


def _combine(weights: Sequence[float], ks: Sequence[Array]) -> Any:
    total: Any = 0.0
    for weight, k in zip(weights, ks, strict=True):
        total = total + weight * k
    return total


def _worst(size: Array, lead: NDArray[np.intp]) -> Array:
    """Return the largest error in each row's group; rows that are NaN count only if they lead."""
    worst = size.copy()
    np.fmax.at(worst, lead, size)
    return np.where(np.isnan(size[lead]), np.nan, worst[lead])


def _growth(size: Array) -> Array:
    """Elementary controller: the next step as a multiple of this one."""
    factor: Array = np.clip(0.9 * np.maximum(size, 1e-12) ** -0.2, 0.2, 6.0)
    factor = np.where(size <= 1.0, factor, np.minimum(factor, 0.9))
    return np.where(np.isfinite(size), factor, 0.1)


def _inverse(matrices: Array) -> Array:
    try:
        return np.asarray(np.linalg.inv(matrices))
    except np.linalg.LinAlgError:
        inverses = np.full_like(matrices, np.nan)
        for i, matrix in enumerate(matrices):
            if np.linalg.matrix_rank(matrix) == len(matrix):
                inverses[i] = np.linalg.inv(matrix)
        return inverses
