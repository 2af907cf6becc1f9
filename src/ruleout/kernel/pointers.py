"""Raw memory for the driver: numbers behind an address, and calls of emitted functions.

The driver makes millions of short visits to a handful of arrays. As arrays, every visit would pay
for reference counts and shapes; as addresses it costs a load. Whoever calls the driver keeps the
arrays alive.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

from llvmlite import ir
from numba import njit, types
from numba.extending import intrinsic

_Function = TypeVar("_Function", bound=Callable[..., Any])
_DOUBLE, _WORD = ir.DoubleType(), ir.IntType(64)
_BLOCKS = 8


def compiled(function: _Function) -> _Function:
    """Compile ``function`` as a part of an entry point."""
    result: _Function = njit(error_model="numpy", no_cpython_wrapper=True, no_cfunc_wrapper=True)(
        function
    )
    return result


def entry_point(function: _Function) -> _Function:
    """Compile ``function``, keep the result on disk, and let other threads run meanwhile.

    The copy on disk is renewed when the entry point's own file changes, not when others do. Where
    no folder can be written it is compiled anew in every process.
    """
    options = {"nogil": True, "error_model": "numpy", "no_cfunc_wrapper": True}
    try:
        result: _Function = njit(cache=True, **options)(function)
    except RuntimeError:
        result = njit(**options)(function)
    return result


def _place(builder: Any, address: Any, index: Any, kind: ir.Type) -> Any:
    return builder.gep(builder.inttoptr(address, kind.as_pointer()), [index])


def _read(kind: ir.Type, numba_type: Any) -> Any:
    def read(typing: Any, address: Any, index: Any) -> Any:  # noqa: ARG001
        def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
            address, index = arguments
            return builder.load(_place(builder, address, index, kind))

        return numba_type(types.int64, types.int64), generate

    return intrinsic(read)


def _write(kind: ir.Type, numba_type: Any) -> Any:
    def write(typing: Any, address: Any, index: Any, value: Any) -> Any:  # noqa: ARG001
        def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
            address, index, value = arguments
            builder.store(value, _place(builder, address, index, kind))
            return context.get_dummy_value()

        return types.void(types.int64, types.int64, numba_type), generate

    return intrinsic(write)


def _invoke(typing: Any, function: Any, blocks: Any, n: Any) -> Any:  # noqa: ARG001
    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        address, table, states = arguments
        words = [
            builder.load(_place(builder, table, ir.Constant(_WORD, i), _WORD))
            for i in range(_BLOCKS)
        ]
        kind = ir.FunctionType(_WORD, [_WORD] * (_BLOCKS + 1))
        return builder.call(builder.inttoptr(address, kind.as_pointer()), [*words, states])

    return types.int64(types.int64, types.int64, types.int64), generate


read: Callable[[int, int], float] = _read(_DOUBLE, types.float64)
"""``read(address, i)``: the i-th double behind ``address``."""
write: Callable[[int, int, float], None] = _write(_DOUBLE, types.float64)
"""``write(address, i, value)``: store a double there."""
read_int: Callable[[int, int], int] = _read(_WORD, types.int64)
"""``read_int(address, i)``: the i-th int64 behind ``address``."""
write_int: Callable[[int, int, int], None] = _write(_WORD, types.int64)
"""``write_int(address, i, value)``: store an int64 there."""
invoke: Callable[[int, int, int], int] = intrinsic(_invoke)
"""``invoke(function, blocks, n)``: call the emitted function at an address.

``blocks`` is the address of the addresses it takes, ``n`` the number of states; see
:mod:`ruleout.kernel.steps`.
"""


@compiled
def number(at: int, place: int, i: int) -> float:
    """Return the i-th double of the array whose address is entry ``place`` of directory ``at``."""
    return read(read_int(at, place), i)


@compiled
def set_number(at: int, place: int, i: int, value: float) -> None:
    """Store a double in the array at entry ``place`` of directory ``at``."""
    write(read_int(at, place), i, value)


@compiled
def whole(at: int, place: int, i: int) -> int:
    """Return the i-th int64 of the array at entry ``place`` of directory ``at``."""
    return read_int(read_int(at, place), i)


@compiled
def set_whole(at: int, place: int, i: int, value: int) -> None:
    """Store an int64 in the array at entry ``place`` of directory ``at``."""
    write_int(read_int(at, place), i, value)
