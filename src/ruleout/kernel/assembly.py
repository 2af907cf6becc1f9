"""A writer of W-wide LLVM assembly: one value is one number in each of W lanes."""

from __future__ import annotations

import struct
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager

ALIGNMENT = 64
"""Bytes at which every block of lanes in memory begins."""

Value = str
"""Name or literal of a vector of doubles (or of a mask or of integers, where said so)."""


class Assembly:
    """Text of a module under construction.

    Sums and products may be contracted to fused multiply-adds; nothing else is reordered, so that
    every lane sees the same arithmetic wherever it stands.

    Parameters
    ----------
    width : int
        Number of lanes W.
    """

    def __init__(self, width: int) -> None:
        self.width = width
        self.doubles = f"<{width} x double>"
        self.integers = f"<{width} x i64>"
        self.masks = f"<{width} x i1>"
        self._lines: list[str] = []
        self._declared: dict[str, None] = {}
        self._count = 0
        self._block = "entry"

    def text(self) -> str:
        """Return the whole module."""
        return "\n".join([*self._declared, *self._lines, ""])

    @contextmanager
    def function(
        self, name: str, arguments: Sequence[str], returns: str = "void"
    ) -> Iterator[None]:
        """Open the body of function ``name``; ``arguments`` are typed, such as ``ptr %y``.

        A body that returns something ends with its own :meth:`give`. Functions that work on
        memory keep their identity (are never inlined): one copy of the code means one rounding.
        """
        local = "" if name.startswith("export_") else "internal "
        symbol = name.removeprefix("export_")
        kind = "noinline nounwind" if any("ptr" in a for a in arguments) else "nounwind"
        self._lines.append(f"define {local}{returns} @{symbol}({', '.join(arguments)}) {kind} {{")
        self._lines.append("entry:")
        self._block = "entry"
        yield
        if returns == "void":
            self._lines.append("  ret void")
        self._lines.append("}")

    def give(self, kind: str, value: Value) -> None:
        """Return ``value`` of type ``kind`` from the function."""
        self._lines.append(f"  ret {kind} {value}")

    def emit(self, instruction: str) -> Value:
        """Append ``instruction`` and return the name of its result."""
        self._count += 1
        name = f"%v{self._count}"
        self._lines.append(f"  {name} = {instruction}")
        return name

    def loop(self, count: Value, body: Callable[[Value], None]) -> None:
        """Run ``body`` for the i64 indices 0 to count - 1 (count at least 1)."""
        self._count += 1
        label = f"loop{self._count}"
        index, following = f"%i{self._count}", f"%j{self._count}"
        before = self._block
        self._lines += [
            f"  br label %{label}",
            f"{label}:",
            f"  {index} = phi i64 [ 0, %{before} ], [ {following}, %{label} ]",
        ]
        self._block = label
        body(index)
        if self._block != label:
            raise AssertionError("loops do not nest")
        self._lines += [
            f"  {following} = add nuw nsw i64 {index}, 1",
            f"  %c{label} = icmp ult i64 {following}, {count}",
            f"  br i1 %c{label}, label %{label}, label %after{label}",
            f"after{label}:",
        ]
        self._block = f"after{label}"

    def declare(self, line: str) -> None:
        """Add a declaration to the module, once."""
        self._declared[line] = None

    def number(self, value: float) -> Value:
        """Return the literal with ``value`` in every lane."""
        bits = struct.unpack("<Q", struct.pack("<d", value))[0]
        return "<" + ", ".join([f"double 0x{bits:016X}"] * self.width) + ">"

    def integer(self, value: int) -> Value:
        """Return the integer literal with ``value`` in every lane."""
        return "<" + ", ".join([f"i64 {value}"] * self.width) + ">"

    def add(self, a: Value, b: Value) -> Value:
        """Return a + b."""
        return self.emit(f"fadd contract {self.doubles} {a}, {b}")

    def sub(self, a: Value, b: Value) -> Value:
        """Return a - b."""
        return self.emit(f"fsub contract {self.doubles} {a}, {b}")

    def mul(self, a: Value, b: Value) -> Value:
        """Return a * b."""
        return self.emit(f"fmul contract {self.doubles} {a}, {b}")

    def div(self, a: Value, b: Value) -> Value:
        """Return a / b."""
        return self.emit(f"fdiv {self.doubles} {a}, {b}")

    def neg(self, a: Value) -> Value:
        """Return -a."""
        return self.emit(f"fneg {self.doubles} {a}")

    def intrinsic(self, name: str, a: Value) -> Value:
        """Return the LLVM intrinsic ``name`` (fabs, sqrt) of a."""
        symbol = f"@llvm.{name}.v{self.width}f64"
        self.declare(f"declare {self.doubles} {symbol}({self.doubles})")
        return self.emit(f"call {self.doubles} {symbol}({self.doubles} {a})")

    def compare(self, how: str, a: Value, b: Value) -> Value:
        """Return the mask of lanes where ``a how b`` (an LLVM predicate: ogt, ole, uno, ...)."""
        return self.emit(f"fcmp {how} {self.doubles} {a}, {b}")

    def both(self, a: Value, b: Value) -> Value:
        """Return the mask a and b."""
        return self.emit(f"and {self.masks} {a}, {b}")

    def either(self, a: Value, b: Value) -> Value:
        """Return the mask a or b."""
        return self.emit(f"or {self.masks} {a}, {b}")

    def select(self, mask: Value, a: Value, b: Value) -> Value:
        """Return a where the mask holds, else b."""
        return self.emit(f"select {self.masks} {mask}, {self.doubles} {a}, {self.doubles} {b}")

    def maximum(self, a: Value, b: Value) -> Value:
        """Return the larger; a itself where either is NaN."""
        return self.select(self.compare("ogt", b, a), b, a)

    def minimum(self, a: Value, b: Value) -> Value:
        """Return the smaller; a itself where either is NaN."""
        return self.select(self.compare("olt", b, a), b, a)

    def address(self, pointer: Value, index: Value | int) -> Value:
        """Return the address of the ``index``-th vector behind ``pointer``."""
        return self.emit(f"getelementptr inbounds {self.doubles}, ptr {pointer}, i64 {index}")

    def load(self, pointer: Value, index: Value | int) -> Value:
        """Return the ``index``-th vector behind ``pointer``."""
        at = self.address(pointer, index)
        return self.emit(f"load {self.doubles}, ptr {at}, align {self._alignment}")

    def store(self, value: Value, pointer: Value, index: Value | int) -> None:
        """Store ``value`` as the ``index``-th vector behind ``pointer``."""
        at = self.address(pointer, index)
        self._lines.append(f"  store {self.doubles} {value}, ptr {at}, align {self._alignment}")

    def broadcast(self, pointer: Value, index: Value | int) -> Value:
        """Return the ``index``-th double behind ``pointer`` in every lane."""
        at = self.emit(f"getelementptr inbounds double, ptr {pointer}, i64 {index}")
        scalar = self.emit(f"load double, ptr {at}, align 8")
        one = self.emit(f"insertelement {self.doubles} poison, double {scalar}, i64 0")
        lanes = f"<{self.width} x i32> zeroinitializer"
        return self.emit(f"shufflevector {self.doubles} {one}, {self.doubles} poison, {lanes}")

    def variable(self, start: Value) -> Value:
        """Return the address of a local vector that begins as ``start``."""
        place = self.emit(f"alloca {self.doubles}, align {self._alignment}")
        self.store(start, place, 0)
        return place

    def call(self, function: Value, *arguments: Value) -> None:
        """Call a function that works on memory: ``@name`` or an address."""
        self._lines.append(f"  call void {function}({', '.join(f'ptr {a}' for a in arguments)})")

    @property
    def _alignment(self) -> int:
        return min(ALIGNMENT, 8 * self.width)
