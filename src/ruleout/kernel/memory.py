"""The arrays that the driver works on."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from ruleout.kernel.assembly import ALIGNMENT
from ruleout.kernel.schedule import Integers
from ruleout.kernel.steps import Control, Setting
from ruleout.kernel.types import Array


class Lanes(NamedTuple):
    """Memory of V vectors of W lanes, and the code that runs in them.

    Attributes
    ----------
    y, new : (V, 2 N, W) arrays
    q : (V, P, W) array
    c : (V, C, W) array
    control : (V, len(Control), W) array
    tolerance : (len(Setting) + N,) array
    scratch : (S, W) array
    functions, steps : int64 arrays
        Addresses of the system's functions and of the step functions.
    """

    y: Array
    new: Array
    q: Array
    c: Array
    control: Array
    tolerance: Array
    scratch: Array
    functions: Integers
    steps: Integers


class Rows(NamedTuple):
    """Where every row and every group of rows stands.

    Attributes
    ----------
    y : (B, N) array
        States on entering and on leaving a lane.
    p : (B, P) array
    which : (B,) int64 array
    states : (B, M, N or more) array
        Outputs; a last state that is time is left out.
    status : (B,) int8 array
    t, h, mark, started : arrays, one entry per group
        Time, step, time at the last look at progress, largest state at the start.
    segment, output : int64 arrays, one entry per group
        Segment in force, next output.
    steps : (B,) int32 array
    """

    y: Array
    p: Array
    which: Integers
    states: Array
    status: np.ndarray[tuple[int, ...], np.dtype[np.int8]]
    t: Array
    h: Array
    mark: Array
    started: Array
    segment: Integers
    output: Integers
    steps: np.ndarray[tuple[int, ...], np.dtype[np.int32]]


def new_lanes(
    vectors: int,
    width: int,
    n: int,
    p: int,
    prepared: int,
    scratch: int,
    functions: Integers,
    steps: Integers,
) -> Lanes:
    """Return zeroed memory for V = ``vectors`` vectors of ``width`` lanes."""
    return Lanes(
        y=_aligned(vectors, 2 * n, width),
        new=_aligned(vectors, 2 * n, width),
        q=_aligned(vectors, p, width),
        c=_aligned(vectors, prepared, width),
        control=_aligned(vectors, len(Control), width),
        tolerance=np.zeros(len(Setting) + n),
        scratch=_aligned(scratch, width),
        functions=functions,
        steps=steps,
    )


def _aligned(*shape: int) -> Array:
    size = int(np.prod(shape))
    spare = ALIGNMENT // 8
    block = np.zeros(size + spare)
    offset = -block.ctypes.data % ALIGNMENT // 8
    return block[offset : offset + size].reshape(shape)
