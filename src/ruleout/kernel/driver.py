"""The queue of rows and the lanes they run in: compiled once, cached on disk.

A row (or group of rows) is taken from the queue into a slot of lanes, stepped by the emitted
functions, and looked at again only when it reaches an output time or break point, or is in
trouble. The slot is then refilled at once. No lane's arithmetic depends on another's.

Steady states are found by the implicit method with growing steps. The first increment of a
Rosenbrock step of length h is a step of pseudo-transient continuation with time scale gamma h
(Kelley and Keyes, SIAM J. Numer. Anal. 35 (1998) 508-523, doi:10.1137/S0036142996304796). Here the
whole step is taken under error control, so that the flow is followed into its own basin; only
when that increment has become small, and Newton's step with it, does Newton's method finish.

``at`` is the address of a directory of addresses and sizes, see
:class:`~ruleout.kernel.memory.Place`.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from ruleout.kernel.controls import CONTROLS, Control
from ruleout.kernel.lanes import control, in_vectors, in_y, is_finite, largest, set_control
from ruleout.kernel.memory import RUNNING, Place
from ruleout.kernel.newton import STEADY_RTOL, polish
from ruleout.kernel.pointers import (
    compiled,
    entry_point,
    invoke,
    number,
    read,
    read_int,
    set_number,
    set_whole,
    whole,
    write,
)
from ruleout.kernel.steps import STEP_FUNCTIONS
from ruleout.kernel.types import Status

_START = STEP_FUNCTIONS.index("start")
_EXPLICIT = STEP_FUNCTIONS.index("explicit")
_IMPLICIT = STEP_FUNCTIONS.index("implicit")
_COMMIT_EXPLICIT = STEP_FUNCTIONS.index("commit_explicit")
_COMMIT_IMPLICIT = STEP_FUNCTIONS.index("commit_implicit")

_HAND_OVER = -2

EXPLICIT, IMPLICIT, SETTLE = 0, 1, 2
"""Modes: Tsit5 until stiff, Rodas5P, and Rodas5P without end until the state is steady."""

STIFF_STEPS = 6.0
_EXPLICIT_BUDGET = 400.0
_EXPLICIT_PATIENCE = 8000.0
_BLOW_UP_RATIO = 1e8

STEADY_FLOOR = 1e-6
"""States below this part of the largest one count as zero while the flow is followed."""
_STEADY_STEPS = 3000.0


@compiled
def _load_parameters(at: int, lane: int, b: int, s: int) -> None:
    width, p = read_int(at, Place.WIDTH), read_int(at, Place.P)
    first = in_vectors(at, lane, p)
    for i in range(p):
        value = number(at, Place.FACTOR, s * p + i) * number(at, Place.ROW_P, b * p + i)
        set_number(at, Place.Q, first + i * width, value + number(at, Place.SHIFT, s * p + i))


@compiled
def _next_stop(at: int, k: int, s: int, o: int) -> float:
    """Return the next time to stop at; infinity if protocol ``k`` is over."""
    following = np.inf
    if s + 1 < whole(at, Place.SEGMENT_AT, k + 1):
        following = number(at, Place.BREAKS, s + 1)
    if o < whole(at, Place.TIME_AT, k + 1):
        return min(number(at, Place.TIMES, o), following)
    return following if whole(at, Place.ENDLESS, k) else np.inf


@compiled
def _change(at: int, lane: int, s: int) -> None:
    """Change the states as on entering segment ``s``."""
    y, width, n = in_y(at, lane), read_int(at, Place.WIDTH), read_int(at, Place.N)
    for i in range(n):
        kept = number(at, Place.KEEP, s * n + i) * read(y, i * width)
        write(y, i * width, kept + number(at, Place.ADD, s * n + i))


@compiled
def _arrive(at: int, slot: int, g: int) -> bool:
    """Enter segments and note outputs due now; whether the group has finished."""
    group, width, n = read_int(at, Place.GROUP), read_int(at, Place.WIDTH), read_int(at, Place.N)
    recorded = read_int(at, Place.RECORDED)
    lead = slot * group
    t = control(at, lead, Control.TIME)
    k = whole(at, Place.WHICH, g)
    first_output, end = whole(at, Place.TIME_AT, k), whole(at, Place.TIME_AT, k + 1)
    last = whole(at, Place.SEGMENT_AT, k + 1)
    before = whole(at, Place.SEGMENT, g)
    s = before
    while s + 1 < last and number(at, Place.BREAKS, s + 1) <= t:
        s += 1
        for lane in range(lead, lead + group):
            _change(at, lane, s)
    due = whole(at, Place.OUTPUT, g)
    o = due
    while o < end and number(at, Place.TIMES, o) <= t:
        o += 1
    stop = _next_stop(at, k, s, o)
    for j in range(group):
        lane, b = lead + j, g * group + j
        set_control(at, lane, Control.STOP, stop)
        if s != before:
            _load_parameters(at, lane, b, s)
            set_control(at, lane, Control.FRESH, 1.0)
            set_control(at, lane, Control.STIFF_COUNT, 0.0)
            set_control(at, lane, Control.REJECTED, 0.0)
        if o == due or whole(at, Place.STATUS, b) != RUNNING:
            continue
        if not is_finite(at, lane, n):
            set_whole(at, Place.STATUS, b, Status.BAD_START if s != before else Status.BLOW_UP)
            continue
        y = in_y(at, lane)
        for m in range(due - first_output, o - first_output):
            place = (b * read_int(at, Place.OUTPUTS) + m) * recorded
            for i in range(recorded):
                set_number(at, Place.STATES, place + i, read(y, i * width))
    set_whole(at, Place.SEGMENT, g, s)
    set_whole(at, Place.OUTPUT, g, o)
    return stop == np.inf


@compiled
def _enter(at: int, mode: int, slot: int, g: int, limit: float) -> bool:
    """Put a group into its lanes as it stands; whether it has finished already."""
    group, width, n = read_int(at, Place.GROUP), read_int(at, Place.WIDTH), read_int(at, Place.N)
    lead = slot * group
    t = number(at, Place.ROW_TIME, g)
    set_number(at, Place.MARK, g, t)
    for j in range(group):
        lane, b = lead + j, g * group + j
        y = in_y(at, lane)
        for i in range(n):
            write(y, i * width, number(at, Place.ROW_Y, b * n + i))
        for entry in range(CONTROLS):
            set_control(at, lane, entry, 0.0)
        steps = float(whole(at, Place.ROW_STEPS, b))
        set_control(at, lane, Control.TIME, t)
        set_control(at, lane, Control.STEP, number(at, Place.ROW_STEP, g))
        set_control(at, lane, Control.STEPS, steps)
        set_control(at, lane, Control.STEP_LIMIT, steps + limit)
        set_control(at, lane, Control.LIVE, 1.0)
    size = largest(at, lead)
    if mode == EXPLICIT:
        set_number(at, Place.STARTED, g, size)
        return _arrive(at, slot, g)
    s = whole(at, Place.SEGMENT, g)
    stop = _next_stop(at, whole(at, Place.WHICH, g), s, whole(at, Place.OUTPUT, g))
    for j in range(group):
        _load_parameters(at, lead + j, g * group + j, s)
        set_control(at, lead + j, Control.STOP, stop)
    if mode == SETTLE:
        set_number(at, Place.STARTED, g, size)
        set_control(at, lead, Control.FLOOR, STEADY_RTOL * (STEADY_FLOOR * size + 1e-12))
        set_control(at, lead, Control.FRESH, 1.0)
    return False


@compiled
def _leave(at: int, slot: int, g: int, status: int) -> None:
    """Take a group out of its lanes; rows that still ran get ``status``."""
    group, width, n = read_int(at, Place.GROUP), read_int(at, Place.WIDTH), read_int(at, Place.N)
    lead = slot * group
    for j in range(group):
        lane, b = lead + j, g * group + j
        if whole(at, Place.STATUS, b) == RUNNING:
            set_whole(at, Place.STATUS, b, status)
        set_whole(at, Place.ROW_STEPS, b, int(control(at, lane, Control.STEPS)))
        set_control(at, lane, Control.LIVE, 0.0)
        y = in_y(at, lane)
        for i in range(n):
            set_number(at, Place.ROW_Y, b * n + i, read(y, i * width))
    set_number(at, Place.ROW_TIME, g, control(at, lead, Control.TIME))
    set_number(at, Place.ROW_STEP, g, control(at, lead, Control.STEP))
    set_whole(at, Place.HOLDS, slot, -1)


@compiled
def _verdict(at: int, mode: int, slot: int, g: int, most: float, patience: float) -> int:
    """What a group that has not arrived needs: go on, hand over, or fail with a status."""
    group = read_int(at, Place.GROUP)
    lead = slot * group
    t, h = control(at, lead, Control.TIME), control(at, lead, Control.STEP)
    steps, stiff = control(at, lead, Control.STEPS), control(at, lead, Control.STIFF_COUNT)
    lost = t + 0.01 * h == t or not h >= 1e-100
    if lost or (mode == SETTLE and steps >= _STEADY_STEPS):
        if largest(at, lead) > _BLOW_UP_RATIO * (1.0 + number(at, Place.STARTED, g)):
            return Status.BLOW_UP
        return Status.NO_STEADY_STATE if mode == SETTLE else Status.STEP_TOO_SMALL
    if mode == SETTLE:
        return RUNNING
    if steps >= most:
        return Status.TOO_MANY_STEPS
    if mode == EXPLICIT and stiff >= STIFF_STEPS:
        return _HAND_OVER
    if steps < control(at, lead, Control.STEP_LIMIT):
        return RUNNING
    k = whole(at, Place.WHICH, g)
    begin = number(at, Place.BREAKS, whole(at, Place.SEGMENT_AT, k))
    end = number(at, Place.BREAKS, whole(at, Place.SEGMENT_AT, k + 1) - 1)
    if not whole(at, Place.ENDLESS, k):
        end = number(at, Place.TIMES, whole(at, Place.TIME_AT, k + 1) - 1)
    if mode == IMPLICIT:
        mark = number(at, Place.MARK, g)
        if t - mark < min(0.005 * (end - mark), 0.5 * (mark - begin)):
            return Status.TOO_MANY_STEPS
        set_number(at, Place.MARK, g, t)
    elif stiff >= 1.0 or steps * (end - begin) > _EXPLICIT_PATIENCE * (t - begin):
        return _HAND_OVER
    for lane in range(lead, lead + group):
        set_control(at, lane, Control.STEP_LIMIT, min(steps + patience, most))
    return RUNNING


@compiled
def _share_step(at: int, slots: int) -> None:
    """Let every lane of a group take the step that its leader found."""
    group = read_int(at, Place.GROUP)
    for slot in range(slots):
        lead = slot * group
        step = control(at, lead, Control.STEP)
        for lane in range(lead + 1, lead + group):
            set_control(at, lane, Control.STEP, step)


@compiled
def _share_worst(at: int, slots: int) -> None:
    """Let every lane of a group have its largest error, and its stiffness where any lane has it.

    The leader's alone would not do: at a fixed point it has no error, and explicit steps grow until
    the deviation of the other lanes explodes. A lane that is NaN counts only if it leads.
    """
    group = read_int(at, Place.GROUP)
    for slot in range(slots):
        lead = slot * group
        for entry in range(Control.ERROR, Control.STIFFNESS + 1):
            worst = control(at, lead, entry)
            for lane in range(lead + 1, lead + group):
                other = control(at, lane, entry)
                if other > worst:
                    worst = other
            for lane in range(lead, lead + group):
                set_control(at, lane, entry, worst)


@compiled
def _prepare(at: int, slots: int) -> int:
    """Make lanes that were filled or changed ready to step; how many groups cannot start."""
    group, n = read_int(at, Place.GROUP), read_int(at, Place.N)
    for v in range(read_int(at, Place.VECTORS)):
        invoke(whole(at, Place.STEP_CODE, _START), read_int(at, Place.BLOCKS) + 64 * v, n)
    if group > 1:
        _share_step(at, slots)
    bad = 0
    for slot in range(slots):
        g, lead = whole(at, Place.HOLDS, slot), slot * group
        if g < 0 or control(at, lead, Control.FRESH) == 0.0:
            continue
        for j in range(group):
            b = g * group + j
            set_control(at, lead + j, Control.FRESH, 0.0)
            if whole(at, Place.STATUS, b) == RUNNING and not is_finite(at, lead + j, 2 * n):
                set_whole(at, Place.STATUS, b, Status.BAD_START)
        if whole(at, Place.STATUS, g * group) == Status.BAD_START:
            _leave(at, slot, g, Status.BAD_START)
            bad += 1
    return bad


@entry_point
def integrate(
    mode: int, at: int, queue: Any, most: float, patience: float, handed_over: Any
) -> int:
    """Run the groups in ``queue``; return how many were written to ``handed_over``.

    Parameters
    ----------
    mode : int
        EXPLICIT, IMPLICIT or SETTLE (in which groups are single rows).
    at : int
        Address of the directory.
    queue, handed_over : int64 arrays
        Numbers of groups. The explicit method hands over what it finds stiff.
    most : float
        Steps a row may take.
    patience : float
        Steps after which the implicit method must have made progress.
    """
    group, width, vectors = (
        read_int(at, Place.GROUP),
        read_int(at, Place.WIDTH),
        read_int(at, Place.VECTORS),
    )
    n, blocks = read_int(at, Place.N), read_int(at, Place.BLOCKS)
    slots = vectors * width // group
    attempt = whole(at, Place.STEP_CODE, _EXPLICIT if mode == EXPLICIT else _IMPLICIT)
    commit = whole(at, Place.STEP_CODE, _COMMIT_EXPLICIT if mode == EXPLICIT else _COMMIT_IMPLICIT)
    if mode == EXPLICIT:
        patience = _EXPLICIT_BUDGET
    limit = _STEADY_STEPS if mode == SETTLE else min(patience, most)
    for lane in range(vectors * width):
        for entry in range(CONTROLS):
            set_control(at, lane, entry, 0.0)
        set_whole(at, Place.HOLDS, lane, -1)
    following, left, busy = 0, 0, 0
    refill, changed = True, False
    while True:
        while refill or changed:
            if refill:
                for slot in range(slots):
                    while whole(at, Place.HOLDS, slot) < 0 and following < len(queue):
                        g = queue[following]
                        following += 1
                        if _enter(at, mode, slot, g, limit):
                            _leave(at, slot, g, Status.OK)
                        else:
                            set_whole(at, Place.HOLDS, slot, g)
                            busy += 1
            bad = _prepare(at, slots)
            busy -= bad
            refill, changed = bad > 0, False
        if busy == 0:
            return left
        for v in range(vectors):
            invoke(attempt, blocks + 64 * v, n)
        if group > 1:
            _share_worst(at, slots)
        # A group may span vectors, so all of them are committed before any is looked at.
        for v in range(vectors):
            set_whole(at, Place.BITS, v, invoke(commit, blocks + 64 * v, n))
        for v in range(vectors):
            bits = whole(at, Place.BITS, v)
            if bits == 0:
                continue
            if mode == SETTLE:
                polish(at, bits)
            for w in range(width):
                lane = v * width + w
                if (bits >> w) & 1 == 0 or lane % group:
                    continue
                slot = lane // group
                g = whole(at, Place.HOLDS, slot)
                verdict = whole(at, Place.STATUS, g * group)
                arrived = control(at, lane, Control.TIME) == control(at, lane, Control.STOP)
                if verdict != RUNNING:
                    pass
                elif arrived and mode != SETTLE:
                    if _arrive(at, slot, g):
                        verdict = Status.OK
                    elif control(at, lane, Control.FRESH) > 0.0:
                        changed = True
                else:
                    verdict = _verdict(at, mode, slot, g, most, patience)
                if verdict == RUNNING:
                    continue
                if verdict == _HAND_OVER:
                    handed_over[left] = g
                    left += 1
                    verdict = RUNNING
                _leave(at, slot, g, verdict)
                busy -= 1
                refill = True
