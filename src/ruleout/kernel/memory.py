"""The arrays that the driver works on, and the same as addresses."""

from __future__ import annotations

from enum import IntEnum

import numpy as np

from ruleout.kernel.assembly import ALIGNMENT
from ruleout.kernel.controls import Control, Setting
from ruleout.kernel.engine import SystemCode
from ruleout.kernel.schedule import Integers, Schedule, addresses
from ruleout.kernel.types import Array

RUNNING = -1
"""Status of a row under way."""


class Place(IntEnum):
    """Entries of the directory: where the arrays are, and how large.

    N, P, W and V are the numbers of states, parameters, lanes in a vector and vectors; W is two
    to the power WIDTH_BITS. B rows come in groups.
    """

    WIDTH = 0
    WIDTH_BITS = 1
    VECTORS = 2
    N = 3
    P = 4
    # Lanes: (V, 2 N, W), (V, P, W), (V, len(Control), W) doubles; per vector the addresses that
    # emitted functions take; the group in each slot, the lanes of each vector that need care;
    # addresses of the step functions.
    Y = 5
    Q = 6
    CONTROL = 7
    BLOCKS = 8
    HOLDS = 9
    BITS = 10
    STEP_CODE = 11
    # One more vector, for Newton's method on the first one's parameters.
    NEWTON_Y = 12
    NEWTON_START = 13
    NEWTON_CONTROL = 14
    NEWTON_BLOCKS = 15
    # The arrays of a Plan.
    SEGMENT_AT = 16
    TIME_AT = 17
    BREAKS = 18
    FACTOR = 19
    SHIFT = 20
    KEEP = 21
    ADD = 22
    TIMES = 23
    ENDLESS = 24
    # Rows: states, parameters, outputs, status and steps of each; protocol, segment, next output,
    # time, step, time at the last look at progress and largest state at the start of each group.
    ROW_Y = 25
    ROW_P = 26
    STATES = 27
    STATUS = 28
    ROW_STEPS = 29
    WHICH = 30
    SEGMENT = 31
    OUTPUT = 32
    ROW_TIME = 33
    ROW_STEP = 34
    MARK = 35
    STARTED = 36
    GROUP = 37
    RECORDED = 38
    OUTPUTS = 39


class Rows:
    """Where every row and every group of rows stands.

    Parameters
    ----------
    y : (B, N) array
        States on entering a lane; overwritten on leaving it.
    p : (B, P) array
    shape : tuple of int
        Shape (B, M, N or N - 1) of the outputs; a last state that is time is left out.
    which, segment, output : int64 arrays, one entry per group
        Protocol, segment in force, next output.
    begin : array or float
        Time at which each group begins.

    Attributes
    ----------
    y, states : arrays
    status, steps : (B,) int64 arrays
    """

    def __init__(
        self,
        y: Array,
        p: Array,
        shape: tuple[int, int, int],
        which: Integers,
        segment: Integers,
        output: Integers,
        begin: Array | float,
    ) -> None:
        self.y = y
        self.states = np.full(shape, np.nan)
        self._progress = np.empty((3, len(which)), dtype=np.int64)
        self._progress[:] = which, segment, output
        self._times = np.zeros((4, len(which)))
        self._times[0] = begin
        self._outcome = np.zeros((2, len(y)), dtype=np.int64)
        self.status, self.steps = self._outcome
        self.status[:] = RUNNING
        blocks = (y, p, self.states, self._outcome, self._progress, self._times)
        self._blocks = blocks
        at = addresses(*blocks)
        self.directory = [
            *at[:3],
            *(at[3] + 8 * k * len(y) for k in range(2)),
            *(at[4] + 8 * k * len(which) for k in range(3)),
            *(at[5] + 8 * k * len(which) for k in range(4)),
        ]


class Lanes:
    """Memory of V vectors of W lanes.

    Attributes
    ----------
    y, new : (V, 2 N, W) arrays
        States, then slopes, before and after an attempt.
    q : (V, P, W) array
    control : (V, len(Control), W) array
    tolerance : (len(Setting) + N,) array
    prepared : (V, C, W) array
    scratch : (S, W) array
    blocks : (V, 8) int64 array
        Per vector, the addresses that emitted functions take.
    """

    def __init__(self, vectors: int, n: int, p: int, code: SystemCode) -> None:
        width = code.width
        self.y = aligned_zeros(vectors, 2 * n, width)
        self.new = aligned_zeros(vectors, 2 * n, width)
        self.q = aligned_zeros(vectors, p, width)
        self.control = aligned_zeros(vectors, len(Control), width)
        self.tolerance = np.zeros(len(Setting) + n)
        self.prepared = aligned_zeros(vectors, code.prepared, width)
        self.scratch = aligned_zeros(code.scratch, width)
        self._holds = np.empty(vectors * width, dtype=np.int64)
        self._bits = np.empty(vectors, dtype=np.int64)
        self._newton = (
            aligned_zeros(n, width),
            aligned_zeros(n, width),
            aligned_zeros(len(Control), width),
        )
        self._code = code
        common = addresses(self.tolerance, self.scratch, code.functions)
        own = zip(self.y, self.new, self.q, self.prepared, self.control, strict=True)
        self.blocks = np.array([addresses(*arrays) + common for arrays in own], dtype=np.int64)
        newton_y, start, control = self._newton
        shared = addresses(newton_y, start, self.q[0], self.prepared[0], control) + common
        self._newton_blocks = np.array(shared, dtype=np.int64)
        self._directory = [
            width,
            width.bit_length() - 1,
            vectors,
            n,
            p,
            *addresses(self.y, self.q, self.control, self.blocks),
            *addresses(self._holds, self._bits, code.steps),
            *addresses(*self._newton, self._newton_blocks),
        ]

    def directory(self, schedule: Schedule, rows: Rows, group: int) -> Integers:
        """Return the directory of these lanes, a schedule and rows."""
        _, outputs, recorded = rows.states.shape
        entries = (*self._directory, *schedule.directory, *rows.directory)
        return np.array((*entries, group, recorded, outputs), dtype=np.int64)


def aligned_zeros(*shape: int) -> Array:
    """Return zeros that begin where vectors of any width may begin."""
    size = int(np.prod(shape))
    spare = ALIGNMENT // 8
    block = np.zeros(size + spare)
    offset = -block.ctypes.data % ALIGNMENT // 8
    return block[offset : offset + size].reshape(shape)
