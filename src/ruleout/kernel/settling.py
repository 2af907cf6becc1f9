"""The flow to a steady state: implicit steps of growing length, then Newton's method.

The first increment of a Rosenbrock step of length h is a step of pseudo-transient continuation
with time scale gamma h (Kelley and Keyes, SIAM J. Numer. Anal. 35 (1998) 508-523,
doi:10.1137/S0036142996304796). Here the whole step is taken under error control instead, so that
the flow is followed into its own basin; only when that increment has become small, and Newton's
step with it, does Newton's method finish the work.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from ruleout.kernel.pointers import invoke
from ruleout.kernel.steps import STEP_FUNCTIONS, Control
from ruleout.kernel.types import Status

STEADY_RTOL = 1e-4
STEADY_STEPS = 3000
"""Steps after which a flow counts as not settling."""
_NEAR = 1e-5
_SETTLED = 1e-10
_EXACT = 1e-14
_ITERATIONS = 12
_FIRST_TRY = 4.0

_START = STEP_FUNCTIONS.index("start")
_IMPLICIT = STEP_FUNCTIONS.index("implicit")
_COMMIT = STEP_FUNCTIONS.index("commit_implicit")
_NEWTON = STEP_FUNCTIONS.index("newton")

_TIME = int(Control.TIME)
_STEP = int(Control.STEP)
_STOP = int(Control.STOP)
_STEPS = int(Control.STEPS)
_STEP_LIMIT = int(Control.STEP_LIMIT)
_LIVE = int(Control.LIVE)
_SIZE = int(Control.SIZE)
_FLOOR = int(Control.FLOOR)
_SETTLING = int(Control.SETTLING)
_FRESH = int(Control.FRESH)

_OK = int(Status.OK)
_BAD_START = int(Status.BAD_START)
_BLOW_UP = int(Status.BLOW_UP)
_NO_STEADY_STATE = int(Status.NO_STEADY_STATE)
_BLOW_UP_RATIO = 1e8


@njit(cache=True, nogil=True, error_model="numpy")
def settle(
    first: int, last: int, lanes: Any, trial: Any, y0: Any, q: Any, result: Any, status: Any
) -> None:
    """Find the steady states of rows ``first`` to ``last - 1``.

    ``trial`` is memory of one vector for Newton's method; it shares scratch with ``lanes``.
    """
    width = lanes.control.shape[2]
    n = y0.shape[1]
    holds = np.full(width, -1, dtype=np.int64)
    started = np.zeros(width)
    control = lanes.control[0]
    blocks = np.int64(lanes.blocks.ctypes.data)
    control[:] = 0.0
    control[_STOP] = np.inf
    following, busy = first, 0
    look = True
    while True:
        while look:
            look = False
            for w in range(width):
                if holds[w] >= 0:
                    continue
                control[_LIVE, w] = 0.0
                if following == last:
                    continue
                b = following
                following += 1
                holds[w] = b
                busy += 1
                look = True
                for i in range(n):
                    lanes.y[0, i, w] = y0[b, i]
                for i in range(q.shape[1]):
                    lanes.q[0, i, w] = q[b, i]
                started[w] = np.abs(y0[b]).max()
                control[:, w] = 0.0
                control[_STOP, w] = np.inf
                control[_STEP_LIMIT, w] = STEADY_STEPS
                control[_LIVE, w] = 1.0
                control[_FLOOR, w] = STEADY_RTOL * (1e-6 * started[w] + 1e-12)
                control[_FRESH, w] = 1.0
            if not look:
                break
            invoke(lanes.steps[_START], blocks, n)
            look = False
            for w in range(width):
                if control[_FRESH, w] > 0.0:
                    control[_FRESH, w] = 0.0
                    if not np.isfinite(lanes.y[0, :, w]).all():
                        status[holds[w]] = _BAD_START
                        holds[w] = -1
                        busy -= 1
                        look = True
        if busy == 0:
            return
        invoke(lanes.steps[_IMPLICIT], blocks, n)
        bits = invoke(lanes.steps[_COMMIT], blocks, n)
        if bits == 0:
            continue
        near = _near(bits, lanes)
        if near:
            _polish(near, lanes, trial, y0, holds, result, status)
        for w in range(width):
            if (bits >> w) & 1 == 0:
                continue
            if status[holds[w]] != _OK:
                t, h = control[_TIME, w], control[_STEP, w]
                lost = t + 0.01 * h == t or not h >= 1e-100
                lost |= control[_STEPS, w] >= control[_STEP_LIMIT, w]
                if not lost:
                    continue
                if control[_SIZE, w] > _BLOW_UP_RATIO * (1.0 + started[w]):
                    status[holds[w]] = _BLOW_UP
            holds[w] = -1
            busy -= 1
            look = True


@njit(cache=True, error_model="numpy")
def _near(bits: int, lanes: Any) -> int:
    """Return the bits of the lanes whose last increment was within the tolerance."""
    near = 0
    for w in range(lanes.control.shape[2]):
        settling = lanes.control[0, _SETTLING, w] < 1.0
        if (bits >> w) & 1 and settling and lanes.control[0, _STEPS, w] >= _FIRST_TRY:
            near |= 1 << w
    return near


@njit(cache=True, error_model="numpy")
def _polish(
    near: int, lanes: Any, trial: Any, y0: Any, holds: Any, result: Any, status: Any
) -> None:
    """Newton's method in the lanes of ``near``; those that stay near and settle are done."""
    width = lanes.control.shape[2]
    n = y0.shape[1]
    trial.q[0] = lanes.q[0]
    trial.rest[0][0] = lanes.rest[0][0]
    trial.y[0] = lanes.y[0]
    trial.control[0] = lanes.control[0]
    moved = np.full(width, np.inf)
    for w in range(width):
        trial.control[0, _FLOOR, w] /= STEADY_RTOL
        if holds[w] >= 0:
            for i in range(n):
                trial.new[0, i, w] = y0[holds[w], i]
    for iteration in range(_ITERATIONS):
        if near == 0:
            return
        invoke(lanes.steps[_NEWTON], np.int64(trial.blocks.ctypes.data), n)
        for w in range(width):
            if (near >> w) & 1 == 0:
                continue
            now = trial.control[0, _SETTLING, w]
            if iteration == 0 and not now < _NEAR:
                near &= ~(1 << w)
            elif now < _EXACT or (now < _SETTLED and not now < 0.5 * moved[w]):
                near &= ~(1 << w)
                status[holds[w]] = _OK
                for i in range(n):
                    result[holds[w], i] = trial.y[0, i, w]
            moved[w] = now
