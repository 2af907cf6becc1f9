"""The queue of rows and the lanes they run in: compiled once, cached on disk.

A row (or group of rows) is taken from the queue into a slot of lanes, stepped by the emitted
functions, and looked at again only when it reaches an output time or break point, or is in
trouble. The slot is then refilled at once. No lane's arithmetic depends on another's.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, types
from numba.core import cgutils
from numba.extending import intrinsic

from ruleout.kernel.steps import Control
from ruleout.kernel.types import Status

_START, _EXPLICIT, _IMPLICIT, _COMMIT_EXPLICIT, _COMMIT_IMPLICIT = range(5)

_TIME = int(Control.TIME)
_STEP = int(Control.STEP)
_STOP = int(Control.STOP)
_ERROR = int(Control.ERROR)
_STIFFNESS = int(Control.STIFFNESS)
_STIFF_COUNT = int(Control.STIFF_COUNT)
_STEPS = int(Control.STEPS)
_STEP_LIMIT = int(Control.STEP_LIMIT)
_LIVE = int(Control.LIVE)
_REJECTED = int(Control.REJECTED)
_FRESH = int(Control.FRESH)

_OK = int(Status.OK)
_TOO_MANY_STEPS = int(Status.TOO_MANY_STEPS)
_STEP_TOO_SMALL = int(Status.STEP_TOO_SMALL)
_BAD_START = int(Status.BAD_START)
_BLOW_UP = int(Status.BLOW_UP)
RUNNING = -1

_STIFF_STEPS = 6.0
_EXPLICIT_BUDGET = 400.0
_EXPLICIT_PATIENCE = 8000.0
_PROGRESS_EVERY = 1000.0
_BLOW_UP_RATIO = 1e8


@intrinsic
def invoke(typing: Any, function: Any, blocks: Any, n: Any) -> Any:  # noqa: ARG001
    """Call an emitted function with the addresses in ``blocks`` and the number of states."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        from llvmlite import ir

        address, addresses, states = arguments
        word = ir.IntType(64)
        values = cgutils.unpack_tuple(builder, addresses, len(signature.args[1]))
        kind = ir.FunctionType(word, [word] * (len(values) + 1))
        callee = builder.inttoptr(address, kind.as_pointer())
        return builder.call(callee, [*values, states])

    return types.int64(types.int64, blocks, types.int64), generate


@njit(cache=True, error_model="numpy")
def addresses(lanes: Any, v: int) -> Any:
    """Return where the blocks of vector ``v`` are, in the order the emitted functions expect."""
    return (
        np.int64(lanes.y.ctypes.data) + v * lanes.y.strides[0],
        np.int64(lanes.new.ctypes.data) + v * lanes.new.strides[0],
        np.int64(lanes.q.ctypes.data) + v * lanes.q.strides[0],
        np.int64(lanes.c.ctypes.data) + v * lanes.c.strides[0],
        np.int64(lanes.control.ctypes.data) + v * lanes.control.strides[0],
        np.int64(lanes.tolerance.ctypes.data),
        np.int64(lanes.scratch.ctypes.data),
        np.int64(lanes.functions.ctypes.data),
    )


@njit(cache=True, error_model="numpy")
def is_stuck(t: float, h: float) -> bool:
    """Whether a step ``h`` would no longer move the time."""
    return t + 0.01 * h == t or not h >= 1e-100


@njit(cache=True, error_model="numpy")
def is_finite(block: Any, n: int, w: int) -> bool:
    """Whether the first ``n`` numbers in lane ``w`` are finite."""
    for i in range(n):
        if not np.isfinite(block[i, w]):
            return False
    return True


@njit(cache=True, error_model="numpy")
def largest(block: Any, n: int, w: int) -> float:
    """Return the largest magnitude of the first ``n`` numbers in lane ``w``."""
    size = 0.0
    for i in range(n):
        size = max(size, abs(block[i, w]))
    return size


@njit(cache=True, error_model="numpy")
def _end(plan: Any, k: int) -> float:
    """Return when protocol ``k`` is over."""
    last = plan.breaks[plan.segment_at[k + 1] - 1]
    if plan.endless[k]:
        return last
    return plan.times[plan.time_at[k + 1] - 1]


@njit(cache=True, error_model="numpy")
def _arrive(slot: int, g: int, group: int, lanes: Any, plan: Any, rows: Any, stale: Any) -> bool:
    """Enter segments and note outputs due now; whether the group has finished."""
    width = lanes.control.shape[2]
    n = rows.y.shape[1]
    lead = slot * group
    t = lanes.control[lead // width, _TIME, lead % width]
    k = rows.which[g * group]
    last, end = plan.segment_at[k + 1], plan.time_at[k + 1]
    s = rows.segment[g]
    entered = False
    while s + 1 < last and plan.breaks[s + 1] <= t:
        s += 1
        entered = True
        for j in range(group):
            v, w = (lead + j) // width, (lead + j) % width
            for i in range(n):
                lanes.y[v, i, w] = plan.keep[s, i] * lanes.y[v, i, w] + plan.add[s, i]
    o = rows.output[g]
    first = o
    while o < end and plan.times[o] <= t:
        o += 1
    for j in range(group):
        v, w = (lead + j) // width, (lead + j) % width
        b = g * group + j
        if entered:
            for i in range(rows.p.shape[1]):
                lanes.q[v, i, w] = plan.factor[s, i] * rows.p[b, i] + plan.shift[s, i]
            lanes.control[v, _FRESH, w] = 1.0
            lanes.control[v, _STIFF_COUNT, w] = 0.0
            lanes.control[v, _REJECTED, w] = 0.0
            stale[v] = True
        if rows.status[b] != RUNNING:
            continue
        if o > first and not is_finite(lanes.y[v], n, w):
            rows.status[b] = _BAD_START if entered else _BLOW_UP
            continue
        for at in range(first, o):
            for i in range(rows.states.shape[2]):
                rows.states[b, at - plan.time_at[k], i] = lanes.y[v, i, w]
    rows.segment[g] = s
    rows.output[g] = o
    following = plan.breaks[s + 1] if s + 1 < last else np.inf
    if o < end:
        stop = min(plan.times[o], following)
    elif plan.endless[k] and s + 1 < last:
        stop = following
    else:
        return True
    for j in range(group):
        v, w = (lead + j) // width, (lead + j) % width
        lanes.control[v, _STOP, w] = stop
    return False


@njit(cache=True, error_model="numpy")
def _leave(slot: int, g: int, group: int, status: int, lanes: Any, rows: Any) -> None:
    """Take a group out of its lanes; rows that still ran get ``status``."""
    width = lanes.control.shape[2]
    for j in range(group):
        v, w = (slot * group + j) // width, (slot * group + j) % width
        b = g * group + j
        if rows.status[b] == RUNNING:
            rows.status[b] = status
        rows.steps[b] = int(lanes.control[v, _STEPS, w])
        for i in range(rows.y.shape[1]):
            rows.y[b, i] = lanes.y[v, i, w]
    v, w = slot * group // width, slot * group % width
    rows.t[g] = lanes.control[v, _TIME, w]
    rows.h[g] = lanes.control[v, _STEP, w]


@njit(cache=True, error_model="numpy")
def _enter(slot: int, g: int, group: int, limit: float, lanes: Any, rows: Any) -> None:
    """Put a group into its lanes as it stands."""
    width = lanes.control.shape[2]
    for j in range(group):
        v, w = (slot * group + j) // width, (slot * group + j) % width
        b = g * group + j
        for i in range(rows.y.shape[1]):
            lanes.y[v, i, w] = rows.y[b, i]
        control = lanes.control[v]
        control[:, w] = 0.0
        control[_TIME, w] = rows.t[g]
        control[_STEP, w] = rows.h[g]
        control[_STEPS, w] = rows.steps[b]
        control[_STEP_LIMIT, w] = rows.steps[b] + limit
        control[_LIVE, w] = 1.0
    rows.mark[g] = rows.t[g]
    v, w = slot * group // width, slot * group % width
    if rows.steps[g * group] == 0:
        rows.started[g] = largest(lanes.y[v], rows.y.shape[1], w)


@njit(cache=True, error_model="numpy")
def _resume(slot: int, g: int, group: int, lanes: Any, plan: Any, rows: Any, stale: Any) -> None:
    """Put the parameters in force and the next stop of a group under way into its lanes."""
    width = lanes.control.shape[2]
    k = rows.which[g * group]
    s, o = rows.segment[g], rows.output[g]
    stop = plan.breaks[s + 1] if s + 1 < plan.segment_at[k + 1] else np.inf
    if o < plan.time_at[k + 1]:
        stop = min(stop, plan.times[o])
    for j in range(group):
        v, w = (slot * group + j) // width, (slot * group + j) % width
        for i in range(rows.p.shape[1]):
            p = rows.p[g * group + j, i]
            lanes.q[v, i, w] = plan.factor[s, i] * p + plan.shift[s, i]
        lanes.control[v, _STOP, w] = stop
        stale[v] = True


@njit(cache=True, error_model="numpy")
def _verdict(
    implicit: bool, slot: int, g: int, group: int, lanes: Any, plan: Any, rows: Any, most: int
) -> int:
    """What a group that has not arrived needs: go on (-1), hand over (-2) or fail (a status)."""
    width = lanes.control.shape[2]
    v, w = slot * group // width, slot * group % width
    control = lanes.control[v]
    t = control[_TIME, w]
    if is_stuck(t, control[_STEP, w]):
        grown = largest(lanes.y[v], rows.y.shape[1], w) > _BLOW_UP_RATIO * (1.0 + rows.started[g])
        return _BLOW_UP if grown else _STEP_TOO_SMALL
    steps = control[_STEPS, w]
    if steps >= most:
        return _TOO_MANY_STEPS
    if not implicit and control[_STIFF_COUNT, w] >= _STIFF_STEPS:
        return -2
    if steps < control[_STEP_LIMIT, w]:
        return RUNNING
    k = rows.which[g * group]
    begin, end = plan.breaks[plan.segment_at[k]], _end(plan, k)
    if implicit:
        gained = t - rows.mark[g]
        if gained < 0.005 * (end - rows.mark[g]) and gained < 0.5 * (rows.mark[g] - begin):
            return _TOO_MANY_STEPS
        rows.mark[g] = t
        extra = _PROGRESS_EVERY
    else:
        projected = steps * (end - begin)
        if control[_STIFF_COUNT, w] >= 1.0 or projected > _EXPLICIT_PATIENCE * (t - begin):
            return -2
        extra = _EXPLICIT_BUDGET
    for j in range(group):
        v, w = (slot * group + j) // width, (slot * group + j) % width
        lanes.control[v, _STEP_LIMIT, w] = min(steps + extra, float(most))
    return RUNNING


@njit(cache=True, error_model="numpy")
def _share(group: int, slots: int, lanes: Any, first: int, last: int) -> None:
    """Let every lane of a group have what its leader found, for control entries first..last."""
    width = lanes.control.shape[2]
    for slot in range(slots):
        lead = slot * group
        for entry in range(first, last + 1):
            value = lanes.control[lead // width, entry, lead % width]
            for lane in range(lead + 1, lead + group):
                lanes.control[lane // width, entry, lane % width] = value


@njit(cache=True, nogil=True, error_model="numpy")
def integrate(
    implicit: bool,
    queue: Any,
    group: int,
    lanes: Any,
    plan: Any,
    rows: Any,
    most: int,
    handed_over: Any,
) -> int:
    """Run the groups in ``queue``; return how many were written to ``handed_over``."""
    vectors, width = lanes.control.shape[0], lanes.control.shape[2]
    slots = vectors * width // group
    n = rows.y.shape[1]
    attempt = lanes.steps[_IMPLICIT if implicit else _EXPLICIT]
    commit = lanes.steps[_COMMIT_IMPLICIT if implicit else _COMMIT_EXPLICIT]
    limit = min(_PROGRESS_EVERY if implicit else _EXPLICIT_BUDGET, float(most))
    holds = np.full(slots, -1, dtype=np.int64)
    vacant = np.ones(slots, dtype=np.bool_)
    stale = np.zeros(vectors, dtype=np.bool_)
    lanes.control[:] = 0.0
    lanes.control[:, _STOP] = np.inf
    following, left, busy = 0, 0, 0
    look = True
    while True:
        while look:
            look = False
            for slot in range(slots):
                while vacant[slot] and following < len(queue):
                    g = queue[following]
                    following += 1
                    _enter(slot, g, group, limit, lanes, rows)
                    if rows.h[g] > 0.0:
                        _resume(slot, g, group, lanes, plan, rows, stale)
                        vacant[slot] = False
                    else:
                        vacant[slot] = _arrive(slot, g, group, lanes, plan, rows, stale)
                    if vacant[slot]:
                        _leave(slot, g, group, _OK, lanes, rows)
                    else:
                        holds[slot] = g
                        busy += 1
                if vacant[slot]:
                    for lane in range(slot * group, (slot + 1) * group):
                        lanes.control[lane // width, _LIVE, lane % width] = 0.0
            for v in range(vectors):
                if stale[v]:
                    invoke(lanes.steps[_START], addresses(lanes, v), n)
            if group > 1:
                _share(group, slots, lanes, _STEP, _STEP)
            for slot in range(slots):
                lead = slot * group
                if vacant[slot] or lanes.control[lead // width, _FRESH, lead % width] == 0.0:
                    continue
                for lane in range(lead, lead + group):
                    v, w = lane // width, lane % width
                    lanes.control[v, _FRESH, w] = 0.0
                    b = holds[slot] * group + lane - lead
                    if rows.status[b] == RUNNING and not is_finite(lanes.y[v], 2 * n, w):
                        rows.status[b] = _BAD_START
                if rows.status[holds[slot] * group] == _BAD_START:
                    _leave(slot, holds[slot], group, _BAD_START, lanes, rows)
                    vacant[slot] = True
                    holds[slot] = -1
                    busy -= 1
                    look = True
            stale[:] = False
        if busy == 0:
            return left
        for v in range(vectors):
            invoke(attempt, addresses(lanes, v), n)
        if group > 1:
            _share(group, slots, lanes, _ERROR, _STIFFNESS)
        for v in range(vectors):
            bits = invoke(commit, addresses(lanes, v), n)
            while bits:
                w = 0
                while not (bits >> w) & 1:
                    w += 1
                bits &= bits - 1
                lane = v * width + w
                slot = lane // group
                if lane % group or slot >= slots:
                    continue
                look |= _attend(
                    implicit, slot, group, lanes, plan, rows, stale, most, holds, vacant
                )
        if look:
            for slot in range(slots):
                if vacant[slot] and holds[slot] >= 0:
                    g = holds[slot]
                    holds[slot] = -1
                    busy -= 1
                    if rows.status[g * group] == RUNNING:
                        handed_over[left] = g
                        left += 1


@njit(cache=True, error_model="numpy")
def _attend(
    implicit: bool,
    slot: int,
    group: int,
    lanes: Any,
    plan: Any,
    rows: Any,
    stale: Any,
    most: int,
    holds: Any,
    vacant: Any,
) -> bool:
    """See to a group that asked for it; whether a slot became free or must be prepared anew."""
    width = lanes.control.shape[2]
    g = holds[slot]
    v, w = slot * group // width, slot * group % width
    if lanes.control[v, _TIME, w] == lanes.control[v, _STOP, w]:
        if _arrive(slot, g, group, lanes, plan, rows, stale):
            _leave(slot, g, group, _OK, lanes, rows)
            vacant[slot] = True
            return True
        return lanes.control[v, _FRESH, w] > 0.0
    verdict = _verdict(implicit, slot, g, group, lanes, plan, rows, most)
    if verdict == RUNNING:
        return False
    _leave(slot, g, group, RUNNING if verdict == -2 else verdict, lanes, rows)
    vacant[slot] = True
    return True
