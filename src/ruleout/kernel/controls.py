"""What lanes and steps tell each other: the rows of the control and tolerance blocks."""

from __future__ import annotations

from enum import IntEnum


class Control(IntEnum):
    """What each lane knows about itself."""

    TIME = 0
    STEP = 1
    TRIAL = 2
    STOP = 3
    ERROR = 4
    STIFFNESS = 5
    STIFF_COUNT = 6
    STEPS = 7
    STEP_LIMIT = 8
    LIVE = 9
    REJECTED = 10
    SIZE = 11
    FLOOR = 12
    SETTLING = 13
    FRESH = 14


CONTROLS = len(Control)


class Setting(IntEnum):
    """What all lanes share."""

    RTOL = 0
    STIFF_LIMIT = 1
    SETTLE_LIMIT = 2
    FLOOR_FACTOR = 3
