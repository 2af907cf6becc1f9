"""The queue of rows and the lanes they run in: compiled once, cached on disk.

A row (or group of rows) is taken from the queue into a slot of lanes, stepped by the emitted
functions, and looked at again only when it reaches an output time or break point, or is in
trouble. The slot is then refilled at once. No lane's arithmetic depends on another's.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numba import njit

from ruleout.kernel.pointers import invoke, read, read_int, write, write_int
from ruleout.kernel.steps import STEP_FUNCTIONS, Control
from ruleout.kernel.types import Status

_START = STEP_FUNCTIONS.index("start")
_EXPLICIT = STEP_FUNCTIONS.index("explicit")
_IMPLICIT = STEP_FUNCTIONS.index("implicit")
_COMMIT_EXPLICIT = STEP_FUNCTIONS.index("commit_explicit")
_COMMIT_IMPLICIT = STEP_FUNCTIONS.index("commit_implicit")

_CONTROLS = len(Control)
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
_HAND_OVER = -2

_STIFF_STEPS = 6.0
_EXPLICIT_BUDGET = 400.0
_EXPLICIT_PATIENCE = 8000.0
_PROGRESS_EVERY = 1000.0
_BLOW_UP_RATIO = 1e8


class _Places(NamedTuple):
    """Addresses and sizes of everything the driver touches."""

    # Lanes
    y: int
    q: int
    control: int
    blocks: int
    # Plan
    segment_at: int
    time_at: int
    breaks: int
    factor: int
    shift: int
    keep: int
    add: int
    times: int
    endless: int
    # Rows
    row_y: int
    row_p: int
    states: int
    status: int
    steps: int
    which: int
    segment: int
    output: int
    t: int
    h: int
    mark: int
    started: int
    # Sizes
    width: int
    n: int
    p: int
    recorded: int
    outputs: int
    group: int


@njit(error_model="numpy")
def _address(array: Any) -> int:
    return np.int64(array.ctypes.data)


@njit(error_model="numpy")
def _control(at: _Places, lane: int, entry: int) -> float:
    v, w = lane // at.width, lane % at.width
    return read(at.control, (v * _CONTROLS + entry) * at.width + w)


@njit(error_model="numpy")
def _set_control(at: _Places, lane: int, entry: int, value: float) -> None:
    v, w = lane // at.width, lane % at.width
    write(at.control, (v * _CONTROLS + entry) * at.width + w, value)


@njit(error_model="numpy")
def _in_y(at: _Places, lane: int) -> int:
    """Return the address of the first state in ``lane``; the next are ``width`` apart."""
    v, w = lane // at.width, lane % at.width
    return at.y + 8 * (v * 2 * at.n * at.width + w)


@njit(error_model="numpy")
def _is_finite(at: _Places, lane: int, count: int) -> bool:
    y = _in_y(at, lane)
    total = 0.0
    for i in range(count):
        total += read(y, i * at.width) * 0.0
    return total == 0.0


@njit(error_model="numpy")
def _largest(at: _Places, lane: int) -> float:
    y = _in_y(at, lane)
    size = 0.0
    for i in range(at.n):
        size = max(size, abs(read(y, i * at.width)))
    return size


@njit(error_model="numpy")
def _load_parameters(at: _Places, lane: int, b: int, s: int) -> None:
    v, w = lane // at.width, lane % at.width
    for i in range(at.p):
        factor, shift = read(at.factor, s * at.p + i), read(at.shift, s * at.p + i)
        value = factor * read(at.row_p, b * at.p + i) + shift
        write(at.q, (v * at.p + i) * at.width + w, value)


@njit(error_model="numpy")
def _next_stop(at: _Places, k: int, s: int, o: int) -> float:
    """Return the next time to stop at; infinity if protocol ``k`` is over."""
    break_follows = s + 1 < read_int(at.segment_at, k + 1)
    following = read(at.breaks, s + 1) if break_follows else np.inf
    if o < read_int(at.time_at, k + 1):
        return min(read(at.times, o), following)
    return following if read_int(at.endless, k) else np.inf


@njit(error_model="numpy")
def _arrive(at: _Places, slot: int, g: int) -> bool:
    """Enter segments and note outputs due now; whether the group has finished."""
    lead = slot * at.group
    t = _control(at, lead, _TIME)
    k = read_int(at.which, g)
    first_output = read_int(at.time_at, k)
    last, end = read_int(at.segment_at, k + 1), read_int(at.time_at, k + 1)
    s = read_int(at.segment, g)
    entered = False
    while s + 1 < last and read(at.breaks, s + 1) <= t:
        s += 1
        entered = True
        for j in range(at.group):
            y = _in_y(at, lead + j)
            for i in range(at.n):
                keep, add = read(at.keep, s * at.n + i), read(at.add, s * at.n + i)
                write(y, i * at.width, keep * read(y, i * at.width) + add)
    due = read_int(at.output, g)
    o = due
    while o < end and read(at.times, o) <= t:
        o += 1
    stop = _next_stop(at, k, s, o)
    for j in range(at.group):
        lane, b = lead + j, g * at.group + j
        _set_control(at, lane, _STOP, stop)
        if entered:
            _load_parameters(at, lane, b, s)
            _set_control(at, lane, _FRESH, 1.0)
            _set_control(at, lane, _STIFF_COUNT, 0.0)
            _set_control(at, lane, _REJECTED, 0.0)
        if o == due or read_int(at.status, b) != RUNNING:
            continue
        if not _is_finite(at, lane, at.n):
            write_int(at.status, b, _BAD_START if entered else _BLOW_UP)
            continue
        y = _in_y(at, lane)
        for m in range(due - first_output, o - first_output):
            for i in range(at.recorded):
                place = (b * at.outputs + m) * at.recorded + i
                write(at.states, place, read(y, i * at.width))
    write_int(at.segment, g, s)
    write_int(at.output, g, o)
    return stop == np.inf


@njit(error_model="numpy")
def _enter(at: _Places, slot: int, g: int, limit: float) -> bool:
    """Put a group into its lanes as it stands; whether it has finished already."""
    for j in range(at.group):
        lane, b = slot * at.group + j, g * at.group + j
        y = _in_y(at, lane)
        for i in range(at.n):
            write(y, i * at.width, read(at.row_y, b * at.n + i))
        for entry in range(_CONTROLS):
            _set_control(at, lane, entry, 0.0)
        steps = float(read_int(at.steps, b))
        _set_control(at, lane, _TIME, read(at.t, g))
        _set_control(at, lane, _STEP, read(at.h, g))
        _set_control(at, lane, _STEPS, steps)
        _set_control(at, lane, _STEP_LIMIT, steps + limit)
        _set_control(at, lane, _LIVE, 1.0)
    write(at.mark, g, read(at.t, g))
    if read(at.h, g) == 0.0:
        write(at.started, g, _largest(at, slot * at.group))
        return _arrive(at, slot, g)
    s = read_int(at.segment, g)
    stop = _next_stop(at, read_int(at.which, g), s, read_int(at.output, g))
    for j in range(at.group):
        lane = slot * at.group + j
        _load_parameters(at, lane, g * at.group + j, s)
        _set_control(at, lane, _STOP, stop)
    return False


@njit(error_model="numpy")
def _leave(at: _Places, slot: int, g: int, status: int) -> None:
    """Take a group out of its lanes; rows that still ran get ``status``."""
    for j in range(at.group):
        lane, b = slot * at.group + j, g * at.group + j
        if read_int(at.status, b) == RUNNING:
            write_int(at.status, b, status)
        write_int(at.steps, b, int(_control(at, lane, _STEPS)))
        _set_control(at, lane, _LIVE, 0.0)
        y = _in_y(at, lane)
        for i in range(at.n):
            write(at.row_y, b * at.n + i, read(y, i * at.width))
    write(at.t, g, _control(at, slot * at.group, _TIME))
    write(at.h, g, _control(at, slot * at.group, _STEP))


@njit(error_model="numpy")
def _verdict(at: _Places, implicit: bool, slot: int, g: int, most: float) -> int:
    """What a group that has not arrived needs: go on, hand over, or fail with a status."""
    lead = slot * at.group
    t, h, steps = _control(at, lead, _TIME), _control(at, lead, _STEP), _control(at, lead, _STEPS)
    stiff = _control(at, lead, _STIFF_COUNT)
    if t + 0.01 * h == t or not h >= 1e-100:
        grown = _largest(at, lead) > _BLOW_UP_RATIO * (1.0 + read(at.started, g))
        return _BLOW_UP if grown else _STEP_TOO_SMALL
    if steps >= most:
        return _TOO_MANY_STEPS
    if not implicit and stiff >= _STIFF_STEPS:
        return _HAND_OVER
    if steps < _control(at, lead, _STEP_LIMIT):
        return RUNNING
    k = read_int(at.which, g)
    begin = read(at.breaks, read_int(at.segment_at, k))
    end = read(at.breaks, read_int(at.segment_at, k + 1) - 1)
    if not read_int(at.endless, k):
        end = read(at.times, read_int(at.time_at, k + 1) - 1)
    if implicit:
        mark = read(at.mark, g)
        if t - mark < min(0.005 * (end - mark), 0.5 * (mark - begin)):
            return _TOO_MANY_STEPS
        write(at.mark, g, t)
        steps += _PROGRESS_EVERY
    else:
        if stiff >= 1.0 or steps * (end - begin) > _EXPLICIT_PATIENCE * (t - begin):
            return _HAND_OVER
        steps += _EXPLICIT_BUDGET
    for j in range(at.group):
        _set_control(at, lead + j, _STEP_LIMIT, min(steps, most))
    return RUNNING


@njit(error_model="numpy")
def _share(at: _Places, slots: int, first: int, last: int) -> None:
    """Let every lane of a group have what its leader found, for control entries first..last."""
    for slot in range(slots):
        lead = slot * at.group
        for entry in range(first, last + 1):
            value = _control(at, lead, entry)
            for lane in range(lead + 1, lead + at.group):
                _set_control(at, lane, entry, value)


@njit(error_model="numpy")
def _prepare(at: _Places, start: int, vectors: int, slots: int, holds: int) -> int:
    """Make lanes that were filled or changed ready to step; how many groups cannot start."""
    for v in range(vectors):
        invoke(start, at.blocks + 64 * v, at.n)
    if at.group > 1:
        _share(at, slots, _STEP, _STEP)
    bad = 0
    for slot in range(slots):
        g = read_int(holds, slot)
        lead = slot * at.group
        if g < 0 or _control(at, lead, _FRESH) == 0.0:
            continue
        for j in range(at.group):
            lane, b = lead + j, g * at.group + j
            _set_control(at, lane, _FRESH, 0.0)
            if read_int(at.status, b) == RUNNING and not _is_finite(at, lane, 2 * at.n):
                write_int(at.status, b, _BAD_START)
        if read_int(at.status, g * at.group) == _BAD_START:
            _leave(at, slot, g, _BAD_START)
            write_int(holds, slot, -1)
            bad += 1
    return bad


@njit(cache=True, nogil=True, error_model="numpy")
def integrate(
    implicit: bool,
    queue: Any,
    group: int,
    lanes: Any,
    plan: Any,
    rows: Any,
    most: float,
    handed_over: Any,
) -> int:
    """Run the groups in ``queue``; return how many were written to ``handed_over``.

    Parameters
    ----------
    implicit : bool
        Which of the two methods.
    queue, handed_over : int64 arrays
        Numbers of groups of ``group`` rows. The explicit method hands over what it finds stiff.
    lanes : Lanes
    plan : Plan
    rows : Rows
    most : float
        Steps a row may take.
    """
    at = _Places(
        _address(lanes.y),
        _address(lanes.q),
        _address(lanes.control),
        _address(lanes.blocks),
        _address(plan.segment_at),
        _address(plan.time_at),
        _address(plan.breaks),
        _address(plan.factor),
        _address(plan.shift),
        _address(plan.keep),
        _address(plan.add),
        _address(plan.times),
        _address(plan.endless),
        _address(rows.y),
        _address(rows.p),
        _address(rows.states),
        _address(rows.status),
        _address(rows.steps),
        _address(rows.which),
        _address(rows.segment),
        _address(rows.output),
        _address(rows.t),
        _address(rows.h),
        _address(rows.mark),
        _address(rows.started),
        lanes.control.shape[2],
        rows.y.shape[1],
        rows.p.shape[1],
        rows.states.shape[2],
        rows.states.shape[1],
        group,
    )
    vectors = lanes.control.shape[0]
    slots = vectors * at.width // group
    start = lanes.steps[_START]
    attempt = lanes.steps[_IMPLICIT if implicit else _EXPLICIT]
    commit = lanes.steps[_COMMIT_IMPLICIT if implicit else _COMMIT_EXPLICIT]
    limit = min(_PROGRESS_EVERY if implicit else _EXPLICIT_BUDGET, most)
    lanes.control[:] = 0.0
    lanes.holds[:] = -1
    holds = _address(lanes.holds)
    following, left, busy = 0, 0, 0
    refill, changed = True, False
    while True:
        while refill or changed:
            if refill:
                for slot in range(slots):
                    while read_int(holds, slot) < 0 and following < len(queue):
                        g = queue[following]
                        following += 1
                        if _enter(at, slot, g, limit):
                            _leave(at, slot, g, _OK)
                        else:
                            write_int(holds, slot, g)
                            busy += 1
            bad = _prepare(at, start, vectors, slots, holds)
            busy -= bad
            refill, changed = bad > 0, False
        if busy == 0:
            return left
        for v in range(vectors):
            invoke(attempt, at.blocks + 64 * v, at.n)
        if group > 1:
            _share(at, slots, _ERROR, _STIFFNESS)
        for v in range(vectors):
            bits = invoke(commit, at.blocks + 64 * v, at.n)
            w = -1
            while bits:
                w += 1
                flagged = bits & 1
                bits >>= 1
                lane = v * at.width + w
                slot = lane // group
                if not flagged or lane != slot * group:
                    continue
                g = read_int(holds, slot)
                if _control(at, lane, _TIME) == _control(at, lane, _STOP):
                    if not _arrive(at, slot, g):
                        changed |= _control(at, lane, _FRESH) > 0.0
                        continue
                    verdict = _OK
                else:
                    verdict = _verdict(at, implicit, slot, g, most)
                    if verdict == RUNNING:
                        continue
                    if verdict == _HAND_OVER:
                        verdict = RUNNING
                        handed_over[left] = g
                        left += 1
                _leave(at, slot, g, verdict)
                write_int(holds, slot, -1)
                busy -= 1
                refill = True
