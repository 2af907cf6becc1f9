"""Newton's method on the last stretch to a steady state."""

from __future__ import annotations

import numpy as np

from ruleout.kernel.controls import Control
from ruleout.kernel.lanes import control
from ruleout.kernel.memory import Place
from ruleout.kernel.pointers import compiled, invoke, number, read_int, set_number, set_whole, whole
from ruleout.kernel.steps import STEP_FUNCTIONS
from ruleout.kernel.types import Status

_NEWTON = STEP_FUNCTIONS.index("newton")

STEADY_RTOL = 1e-4
_STEADY_FIRST_TRY = 4.0
_NEWTON_ITERATIONS = 12
_NEWTON_NEAR = 1e-5
_NEWTON_SETTLED = 1e-10
_NEWTON_EXACT = 1e-14


@compiled
def _set_newton(at: int, lane: int, entry: int, value: float) -> None:
    set_number(at, Place.NEWTON_CONTROL, entry * read_int(at, Place.WIDTH) + lane, value)


@compiled
def polish(at: int, bits: int) -> None:
    """Try Newton's method in the lanes of ``bits`` that are near a steady state.

    Those whose first step is small and that converge are written out, with status OK.
    """
    width, n = read_int(at, Place.WIDTH), read_int(at, Place.N)
    near = 0
    for lane in range(width):
        _set_newton(at, lane, Control.STEP, control(at, lane, Control.STEP))
        _set_newton(at, lane, Control.FLOOR, control(at, lane, Control.FLOOR) / STEADY_RTOL)
        _set_newton(at, lane, Control.SIZE, np.inf)
        g = max(whole(at, Place.HOLDS, lane), 0)
        for i in range(n):
            place = i * width + lane
            set_number(at, Place.NEWTON_Y, place, number(at, Place.Y, place))
            set_number(at, Place.NEWTON_START, place, number(at, Place.ROW_Y, g * n + i))
        settled = control(at, lane, Control.SETTLING) < 1.0
        if (bits >> lane) & 1 and settled and control(at, lane, Control.STEPS) >= _STEADY_FIRST_TRY:
            near |= 1 << lane
    for iteration in range(_NEWTON_ITERATIONS):
        if near == 0:
            return
        invoke(whole(at, Place.STEP_CODE, _NEWTON), read_int(at, Place.NEWTON_BLOCKS), n)
        for lane in range(width):
            if (near >> lane) & 1 == 0:
                continue
            moved = number(at, Place.NEWTON_CONTROL, Control.SETTLING * width + lane)
            before = number(at, Place.NEWTON_CONTROL, Control.SIZE * width + lane)
            _set_newton(at, lane, Control.SIZE, moved)
            if iteration == 0 and not moved < _NEWTON_NEAR:
                near &= ~(1 << lane)
            elif moved < _NEWTON_EXACT or (moved < _NEWTON_SETTLED and not moved < 0.5 * before):
                near &= ~(1 << lane)
                g = whole(at, Place.HOLDS, lane)
                set_whole(at, Place.STATUS, g, Status.OK)
                for i in range(n):
                    set_number(
                        at, Place.STATES, g * n + i, number(at, Place.NEWTON_Y, i * width + lane)
                    )
