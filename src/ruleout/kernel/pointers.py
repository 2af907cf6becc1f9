"""Raw memory for the driver: numbers behind an address, and calls of emitted functions.

The driver runs millions of short visits to a handful of arrays. As arrays, every visit would pay
for reference counts and shapes; as addresses it costs a load. Whoever calls the driver keeps the
arrays alive.
"""

from __future__ import annotations

from typing import Any

from numba import types
from numba.extending import intrinsic


def _pointer(builder: Any, address: Any, index: Any, kind: Any) -> Any:
    return builder.gep(builder.inttoptr(address, kind.as_pointer()), [index])


@intrinsic
def read(typing: Any, address: Any, index: Any) -> Any:  # noqa: ARG001
    """Return the ``index``-th double behind ``address``."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        kind = context.get_value_type(types.float64)
        return builder.load(_pointer(builder, *arguments, kind))

    return types.float64(types.int64, types.int64), generate


@intrinsic
def write(typing: Any, address: Any, index: Any, value: Any) -> Any:  # noqa: ARG001
    """Store the double ``value`` as the ``index``-th behind ``address``."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        address, index, value = arguments
        builder.store(value, _pointer(builder, address, index, value.type))
        return context.get_dummy_value()

    return types.void(types.int64, types.int64, types.float64), generate


@intrinsic
def read_int(typing: Any, address: Any, index: Any) -> Any:  # noqa: ARG001
    """Return the ``index``-th int64 behind ``address``."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        kind = context.get_value_type(types.int64)
        return builder.load(_pointer(builder, *arguments, kind))

    return types.int64(types.int64, types.int64), generate


@intrinsic
def write_int(typing: Any, address: Any, index: Any, value: Any) -> Any:  # noqa: ARG001
    """Store the int64 ``value`` as the ``index``-th behind ``address``."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        address, index, value = arguments
        builder.store(value, _pointer(builder, address, index, value.type))
        return context.get_dummy_value()

    return types.void(types.int64, types.int64, types.int64), generate


@intrinsic
def invoke(typing: Any, function: Any, blocks: Any, n: Any) -> Any:  # noqa: ARG001
    """Call the emitted function at an address.

    ``blocks`` is the address of the addresses it takes (eight words, see
    :mod:`ruleout.kernel.steps`), ``n`` the number of states.
    """

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:  # noqa: ARG001
        address, table, states = arguments
        word = context.get_value_type(types.int64)
        words = [
            builder.load(_pointer(builder, table, context.get_constant(types.int64, i), word))
            for i in range(8)
        ]
        from llvmlite import ir

        kind = ir.FunctionType(word, [word] * 9)
        return builder.call(builder.inttoptr(address, kind.as_pointer()), [*words, states])

    return types.int64(types.int64, types.int64, types.int64), generate
