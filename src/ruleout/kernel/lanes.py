"""Where a lane's numbers lie in vectors of lanes, as seen from compiled code."""

from __future__ import annotations

from ruleout.kernel.controls import CONTROLS
from ruleout.kernel.memory import Place
from ruleout.kernel.pointers import compiled, number, read, read_int, set_number


@compiled
def in_vectors(at: int, lane: int, members: int) -> int:
    """Return the index of ``lane`` in the first of ``members`` vectors per vector of lanes."""
    shift = read_int(at, Place.WIDTH_BITS)
    width = 1 << shift
    return ((lane >> shift) * members << shift) + (lane & (width - 1))


@compiled
def control(at: int, lane: int, entry: int) -> float:
    """Return one entry of the control block of ``lane``."""
    first = in_vectors(at, lane, CONTROLS)
    return number(at, Place.CONTROL, first + (entry << read_int(at, Place.WIDTH_BITS)))


@compiled
def set_control(at: int, lane: int, entry: int, value: float) -> None:
    """Set one entry of the control block of ``lane``."""
    first = in_vectors(at, lane, CONTROLS)
    set_number(at, Place.CONTROL, first + (entry << read_int(at, Place.WIDTH_BITS)), value)


@compiled
def in_y(at: int, lane: int) -> int:
    """Return the address of the first state in ``lane``; the next are ``width`` apart."""
    return read_int(at, Place.Y) + 8 * in_vectors(at, lane, 2 * read_int(at, Place.N))


@compiled
def is_finite(at: int, lane: int, count: int) -> bool:
    """Return whether the first ``count`` numbers of the state block of ``lane`` are finite."""
    y, width = in_y(at, lane), read_int(at, Place.WIDTH)
    total = 0.0
    for i in range(count):
        total += read(y, i * width) * 0.0
    return total == 0.0


@compiled
def largest(at: int, lane: int) -> float:
    """Return the largest magnitude among the states of ``lane``."""
    y, width = in_y(at, lane), read_int(at, Place.WIDTH)
    size = 0.0
    for i in range(read_int(at, Place.N)):
        size = max(size, abs(read(y, i * width)))
    return size
