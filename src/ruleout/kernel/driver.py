"""The queue of rows and the lanes they run in: compiled once, cached on disk.

A row (or group of rows) is taken from the queue into a slot of lanes, stepped by the emitted
functions, and looked at again only when it reaches an output time or break point, or is in
trouble. The slot is then refilled at once. No lane's arithmetic depends on another's.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from ruleout.kernel.pointers import compiled, entry_point, invoke, read, read_int, write, write_int
from ruleout.kernel.steps import STEP_FUNCTIONS, Control
from ruleout.kernel.types import Status

_START = STEP_FUNCTIONS.index("start")
_EXPLICIT = STEP_FUNCTIONS.index("explicit")
_IMPLICIT = STEP_FUNCTIONS.index("implicit")
_COMMIT_EXPLICIT = STEP_FUNCTIONS.index("commit_explicit")
_COMMIT_IMPLICIT = STEP_FUNCTIONS.index("commit_implicit")
_NEWTON = STEP_FUNCTIONS.index("newton")

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
_SIZE = int(Control.SIZE)
_FLOOR = int(Control.FLOOR)
_SETTLING = int(Control.SETTLING)

_OK = int(Status.OK)
_TOO_MANY_STEPS = int(Status.TOO_MANY_STEPS)
_STEP_TOO_SMALL = int(Status.STEP_TOO_SMALL)
_BAD_START = int(Status.BAD_START)
_BLOW_UP = int(Status.BLOW_UP)
_NO_STEADY_STATE = int(Status.NO_STEADY_STATE)
RUNNING = -1
_HAND_OVER = -2

EXPLICIT, IMPLICIT, SETTLE = 0, 1, 2
"""Modes: Tsit5 until stiff, Rodas5P, and Rodas5P without end until the state is steady."""

_STIFF_STEPS = 6.0
_EXPLICIT_BUDGET = 400.0
_EXPLICIT_PATIENCE = 8000.0
_PROGRESS_EVERY = 1000.0
_BLOW_UP_RATIO = 1e8

STEADY_RTOL = 1e-4
STEADY_FLOOR = 1e-6
"""States below this part of the largest one count as zero while the flow is followed."""
_STEADY_STEPS = 3000.0
_STEADY_FIRST_TRY = 4.0
_NEWTON_ITERATIONS = 12
_NEWTON_NEAR = 1e-5
_NEWTON_SETTLED = 1e-10
_NEWTON_EXACT = 1e-14


class _Places(NamedTuple):
    """Addresses and sizes of everything the driver touches."""

    # Lanes
    y: int
    q: int
    control: int
    blocks: int
    newton_y: int
    newton_start: int
    newton_control: int
    newton_blocks: int
    holds: int
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


@compiled
def _address(array: Any) -> int:
    return np.int64(array.ctypes.data)  # type: ignore[return-value]


@compiled
def _control(at: _Places, lane: int, entry: int) -> float:
    v, w = lane // at.width, lane % at.width
    return read(at.control, (v * _CONTROLS + entry) * at.width + w)


@compiled
def _set_control(at: _Places, lane: int, entry: int, value: float) -> None:
    v, w = lane // at.width, lane % at.width
    write(at.control, (v * _CONTROLS + entry) * at.width + w, value)


@compiled
def _in_y(at: _Places, lane: int) -> int:
    """Return the address of the first state in ``lane``; the next are ``width`` apart."""
    v, w = lane // at.width, lane % at.width
    return at.y + 8 * (v * 2 * at.n * at.width + w)


@compiled
def _is_finite(at: _Places, lane: int, count: int) -> bool:
    y = _in_y(at, lane)
    total = 0.0
    for i in range(count):
        total += read(y, i * at.width) * 0.0
    return total == 0.0


@compiled
def _largest(at: _Places, lane: int) -> float:
    y = _in_y(at, lane)
    size = 0.0
    for i in range(at.n):
        size = max(size, abs(read(y, i * at.width)))
    return size


@compiled
def _load_parameters(at: _Places, lane: int, b: int, s: int) -> None:
    v, w = lane // at.width, lane % at.width
    for i in range(at.p):
        factor, shift = read(at.factor, s * at.p + i), read(at.shift, s * at.p + i)
        value = factor * read(at.row_p, b * at.p + i) + shift
        write(at.q, (v * at.p + i) * at.width + w, value)


@compiled
def _next_stop(at: _Places, k: int, s: int, o: int) -> float:
    """Return the next time to stop at; infinity if protocol ``k`` is over."""
    break_follows = s + 1 < read_int(at.segment_at, k + 1)
    following = read(at.breaks, s + 1) if break_follows else np.inf
    if o < read_int(at.time_at, k + 1):
        return min(read(at.times, o), following)
    return following if read_int(at.endless, k) else np.inf


@compiled
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


@compiled
def _enter(at: _Places, mode: int, slot: int, g: int, limit: float) -> bool:
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
    size = _largest(at, slot * at.group)
    if mode == EXPLICIT:
        write(at.started, g, size)
        return _arrive(at, slot, g)
    s = read_int(at.segment, g)
    stop = _next_stop(at, read_int(at.which, g), s, read_int(at.output, g))
    for j in range(at.group):
        lane = slot * at.group + j
        _load_parameters(at, lane, g * at.group + j, s)
        _set_control(at, lane, _STOP, stop)
        if mode == SETTLE:
            _set_control(at, lane, _FLOOR, STEADY_RTOL * (STEADY_FLOOR * size + 1e-12))
            _set_control(at, lane, _FRESH, 1.0)
            write(at.started, g, size)
    return False


@compiled
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


@compiled
def _is_lost(at: _Places, lane: int) -> bool:
    """Whether steps have become too small to move the time."""
    t, h = _control(at, lane, _TIME), _control(at, lane, _STEP)
    return t + 0.01 * h == t or not h >= 1e-100


@compiled
def _has_grown(at: _Places, lane: int, g: int) -> bool:
    return _largest(at, lane) > _BLOW_UP_RATIO * (1.0 + read(at.started, g))


@compiled
def _verdict(at: _Places, mode: int, slot: int, g: int, most: float) -> int:
    """What a group that has not arrived needs: go on, hand over, or fail with a status."""
    lead = slot * at.group
    t, steps = _control(at, lead, _TIME), _control(at, lead, _STEPS)
    stiff = _control(at, lead, _STIFF_COUNT)
    if mode == SETTLE:
        if _is_lost(at, lead) or steps >= _STEADY_STEPS:
            return _BLOW_UP if _has_grown(at, lead, g) else _NO_STEADY_STATE
        return RUNNING
    if _is_lost(at, lead):
        return _BLOW_UP if _has_grown(at, lead, g) else _STEP_TOO_SMALL
    if steps >= most:
        return _TOO_MANY_STEPS
    if mode == EXPLICIT and stiff >= _STIFF_STEPS:
        return _HAND_OVER
    if steps < _control(at, lead, _STEP_LIMIT):
        return RUNNING
    k = read_int(at.which, g)
    begin = read(at.breaks, read_int(at.segment_at, k))
    end = read(at.breaks, read_int(at.segment_at, k + 1) - 1)
    if not read_int(at.endless, k):
        end = read(at.times, read_int(at.time_at, k + 1) - 1)
    if mode == IMPLICIT:
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


@compiled
def _polish(at: _Places, newton: int, bits: int) -> None:
    """Try Newton's method in the lanes of ``bits`` that are near a steady state.

    Those whose first step is small and that converge are written out, with status OK.
    """
    near = 0
    for lane in range(at.width):
        _set_newton_control(at, lane, _STEP, _control(at, lane, _STEP))
        _set_newton_control(at, lane, _FLOOR, _control(at, lane, _FLOOR) / STEADY_RTOL)
        _set_newton_control(at, lane, _SIZE, np.inf)
        g = read_int(at.holds, lane)
        for i in range(at.n):
            place = i * at.width + lane
            write(at.newton_y, place, read(at.y, place))
            write(at.newton_start, place, read(at.row_y, g * at.n + i) if g >= 0 else 0.0)
        settled = _control(at, lane, _SETTLING) < 1.0
        if (bits >> lane) & 1 and settled and _control(at, lane, _STEPS) >= _STEADY_FIRST_TRY:
            near |= 1 << lane
    for iteration in range(_NEWTON_ITERATIONS):
        if near == 0:
            return
        invoke(newton, at.newton_blocks, at.n)
        for lane in range(at.width):
            if (near >> lane) & 1 == 0:
                continue
            moved = read(at.newton_control, _SETTLING * at.width + lane)
            before = read(at.newton_control, _SIZE * at.width + lane)
            _set_newton_control(at, lane, _SIZE, moved)
            if iteration == 0 and not moved < _NEWTON_NEAR:
                near &= ~(1 << lane)
            elif moved < _NEWTON_EXACT or (moved < _NEWTON_SETTLED and not moved < 0.5 * before):
                near &= ~(1 << lane)
                g = read_int(at.holds, lane)
                write_int(at.status, g, _OK)
                for i in range(at.recorded):
                    value = read(at.newton_y, i * at.width + lane)
                    write(at.states, g * at.outputs * at.recorded + i, value)


@compiled
def _set_newton_control(at: _Places, lane: int, entry: int, value: float) -> None:
    write(at.newton_control, entry * at.width + lane, value)


@compiled
def _share_step(at: _Places, slots: int) -> None:
    """Let every lane of a group take the step that its leader found."""
    for slot in range(slots):
        lead = slot * at.group
        step = _control(at, lead, _STEP)
        for lane in range(lead + 1, lead + at.group):
            _set_control(at, lane, _STEP, step)


@compiled
def _share_worst(at: _Places, slots: int) -> None:
    """Let every lane of a group have its largest error, and its stiffness where any lane has it.

    The leader's alone would not do: at a fixed point it has no error, and explicit steps grow until
    the deviation of the other lanes explodes. A lane that is NaN counts only if it leads.
    """
    for slot in range(slots):
        lead = slot * at.group
        for entry in range(_ERROR, _STIFFNESS + 1):
            worst = _control(at, lead, entry)
            for lane in range(lead + 1, lead + at.group):
                other = _control(at, lane, entry)
                if other > worst:
                    worst = other
            for lane in range(lead, lead + at.group):
                _set_control(at, lane, entry, worst)


@compiled
def _prepare(at: _Places, start: int, vectors: int, slots: int) -> int:
    """Make lanes that were filled or changed ready to step; how many groups cannot start."""
    for v in range(vectors):
        invoke(start, at.blocks + 64 * v, at.n)
    if at.group > 1:
        _share_step(at, slots)
    bad = 0
    for slot in range(slots):
        g = read_int(at.holds, slot)
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
            write_int(at.holds, slot, -1)
            bad += 1
    return bad


@entry_point
def integrate(
    mode: int,
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
    mode : int
        EXPLICIT, IMPLICIT or SETTLE (in which groups are single rows).
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
        _address(lanes.newton_y),
        _address(lanes.newton_start),
        _address(lanes.newton_control),
        _address(lanes.newton_blocks),
        _address(lanes.holds),
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
    attempt = lanes.steps[_EXPLICIT if mode == EXPLICIT else _IMPLICIT]
    commit = lanes.steps[_COMMIT_EXPLICIT if mode == EXPLICIT else _COMMIT_IMPLICIT]
    limit = _EXPLICIT_BUDGET if mode == EXPLICIT else _PROGRESS_EVERY
    limit = _STEADY_STEPS if mode == SETTLE else min(limit, most)
    lanes.control[:] = 0.0
    lanes.holds[:] = -1
    following, left, busy = 0, 0, 0
    refill, changed = True, False
    flagged_lanes = np.zeros(vectors, dtype=np.int64)
    while True:
        while refill or changed:
            if refill:
                for slot in range(slots):
                    while read_int(at.holds, slot) < 0 and following < len(queue):
                        g = queue[following]
                        following += 1
                        if _enter(at, mode, slot, g, limit):
                            _leave(at, slot, g, _OK)
                        else:
                            write_int(at.holds, slot, g)
                            busy += 1
            bad = _prepare(at, start, vectors, slots)
            busy -= bad
            refill, changed = bad > 0, False
        if busy == 0:
            return left
        for v in range(vectors):
            invoke(attempt, at.blocks + 64 * v, at.n)
        if group > 1:
            _share_worst(at, slots)
        # A group may reach into the next vector, so all of them step before any is looked at.
        for v in range(vectors):
            flagged_lanes[v] = invoke(commit, at.blocks + 64 * v, at.n)
        for v in range(vectors):
            bits = flagged_lanes[v]
            if mode == SETTLE and bits:
                _polish(at, lanes.steps[_NEWTON], bits)
            w = -1
            while bits:
                w += 1
                flagged = bits & 1
                bits >>= 1
                lane = v * at.width + w
                slot = lane // group
                if not flagged or lane != slot * group:
                    continue
                g = read_int(at.holds, slot)
                if mode == SETTLE and read_int(at.status, g) == _OK:
                    verdict = _OK
                elif _control(at, lane, _TIME) == _control(at, lane, _STOP):
                    if not _arrive(at, slot, g):
                        changed |= _control(at, lane, _FRESH) > 0.0
                        continue
                    verdict = _OK
                else:
                    verdict = _verdict(at, mode, slot, g, most)
                    if verdict == RUNNING:
                        continue
                    if verdict == _HAND_OVER:
                        verdict = RUNNING
                        handed_over[left] = g
                        left += 1
                _leave(at, slot, g, verdict)
                write_int(at.holds, slot, -1)
                busy -= 1
                refill = True
