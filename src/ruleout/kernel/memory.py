"""The arrays that the driver works on, and the same as addresses."""

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
    control : (V, len(Control), W) array
    tolerance : (len(Setting) + N,) array
    blocks : (V, 8) int64 array
        Addresses of the blocks of each vector, in the order of the emitted functions' arguments.
    holds : (V * W,) int64 array
        Group in each slot, -1 where there is none.
    functions, steps : int64 arrays
        Addresses of the system's functions and of the step functions.
    newton_y, newton_start, newton_control, newton_blocks : arrays
        Memory of one more vector, for Newton's method on the first one's parameters.
    rest : tuple of arrays
        Memory that only the emitted functions use.
    """

    y: Array
    new: Array
    q: Array
    control: Array
    tolerance: Array
    blocks: Integers
    holds: Integers
    steps: Integers
    functions: Integers
    newton_y: Array
    newton_start: Array
    newton_control: Array
    newton_blocks: Integers
    rest: tuple[Array, Array]


class Rows(NamedTuple):
    """Where every row and every group of rows stands.

    Attributes
    ----------
    y : (B, N) array
        States on entering and on leaving a lane.
    p : (B, P) array
    states : (B, M, N or N - 1) array
        Outputs; a last state that is time is left out.
    status, steps : (B,) int64 arrays
    which, segment, output : int64 arrays, one entry per group
        Protocol, segment in force, next output.
    t, h, mark, started : arrays, one entry per group
        Time, step, time at the last look at progress, largest state at the start.
    """

    y: Array
    p: Array
    states: Array
    status: Integers
    steps: Integers
    which: Integers
    segment: Integers
    output: Integers
    t: Array
    h: Array
    mark: Array
    started: Array


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
    y, new, q, c, control = (
        _aligned(vectors, size, width) for size in (2 * n, 2 * n, p, prepared, len(Control))
    )
    newton_y, newton_start, newton_control = (
        _aligned(size, width) for size in (n, n, len(Control))
    )
    tolerance = np.zeros(len(Setting) + n)
    shared = _aligned(scratch, width)
    common = [block.ctypes.data for block in (tolerance, shared, functions)]

    def blocks_of(*own: Array) -> list[int]:
        return [*(block.ctypes.data for block in own), *common]

    blocks = [blocks_of(y[v], new[v], q[v], c[v], control[v]) for v in range(vectors)]
    newton_blocks = blocks_of(newton_y, newton_start, q[0], c[0], newton_control)
    return Lanes(
        y=y,
        new=new,
        q=q,
        control=control,
        tolerance=tolerance,
        blocks=np.array(blocks, dtype=np.int64),
        holds=np.empty(vectors * width, dtype=np.int64),
        steps=steps,
        functions=functions,
        newton_y=newton_y,
        newton_start=newton_start,
        newton_control=newton_control,
        newton_blocks=np.array(newton_blocks, dtype=np.int64),
        rest=(c, shared),
    )


def _aligned(*shape: int) -> Array:
    size = int(np.prod(shape))
    spare = ALIGNMENT // 8
    block = np.zeros(size + spare)
    offset = -block.ctypes.data % ALIGNMENT // 8
    return block[offset : offset + size].reshape(shape)
