"""exp, log, powers, sin, cos and tanh in every lane, the same on every platform.

Each is emitted once per module as a function of vectors, from polynomials after reduction of the
argument; relative errors are a few units in the last place (times ``|y log x|`` for ``x ** y``).

References
----------
W. J. Cody and W. Waite, Software Manual for the Elementary Functions, Prentice-Hall 1980:
reduction with a constant in two or three parts. J.-M. Muller, Elementary Functions, 3rd ed.,
Birkhauser 2016, doi:10.1007/978-1-4899-7983-4: the series used.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from math import factorial, log, pi
from typing import Final

from ruleout.kernel.assembly import Assembly, Value

_ROUND: Final = 1.5 * 2.0**52
"""Adding it rounds to an integer, which is left in the low bits."""
_ROUND_BITS: Final = 0x4338000000000000
_LN2: Final = (float.fromhex("0x1.62e42fefa3800p-1"), float.fromhex("0x1.ef35793c76730p-45"))
_HALF_PI: Final = (
    float.fromhex("0x1.921fb54400000p+0"),
    float.fromhex("0x1.0b4611a600000p-34"),
    float.fromhex("0x1.3198a2e037073p-69"),
)
_LOG_TERMS: Final = 9
_EXP_TERMS: Final = 14


_FUNCTIONS: Final = ("exp", "log", "log_positive", "sin", "cos", "tanh")
SYMBOLS: Final = tuple(f"lanes_{name}" for name in _FUNCTIONS)
"""Names of the emitted functions; LLVM takes plain ``exp`` for the C library's."""


class Elementary:
    """Emits calls to the functions, or their bodies.

    Parameters
    ----------
    assembly : Assembly
    addresses : mapping of symbol to int, optional
        Where the functions are, if another module has them; else this one must :meth:`write_all`.

    Attributes
    ----------
    inline : bool
        Whether bodies are written in place of calls: faster to run, slower to compile.
    """

    def __init__(self, assembly: Assembly, addresses: Mapping[str, int] | None = None) -> None:
        self.inline = False
        self._assembly = assembly
        self._addresses = addresses

    def call(self, name: str, x: Value) -> Value:
        """Return function ``name`` (exp, log, log_positive, sin, cos, tanh) of a value."""
        if self.inline:
            return self._body(name, x)
        kind = self._assembly.doubles
        callee = f"@lanes_{name}"
        if self._addresses:
            callee = f"inttoptr (i64 {self._addresses[f'lanes_{name}']} to ptr)"
        return self._assembly.emit(f"call {kind} {callee}({kind} {x})")

    def write_all(self) -> None:
        """Write all functions."""
        kind = self._assembly.doubles
        for name, symbol in zip(_FUNCTIONS, SYMBOLS, strict=True):
            with self._assembly.function(f"export_{symbol}", [f"{kind} %x"], kind):
                self._assembly.give(kind, self._body(name, "%x"))

    def _body(self, name: str, x: Value) -> Value:
        body: Callable[[Value], Value] = getattr(self, f"_{name}")
        return body(x)

    def power(self, log_x: Value, y: Value) -> Value:
        """Return x ** y for positive x, given its logarithm."""
        return self.call("exp", self._assembly.mul(y, log_x))

    def general_power(self, x: Value, y: Value) -> Value:
        """Return x ** y; for negative x the sign of an odd y, NaN where y is no integer."""
        a = self._assembly
        size = a.intrinsic("fabs", x)
        value = self.power(self.call("log", size), y)
        value = a.select(a.compare("oeq", y, a.number(0.0)), a.number(1.0), value)
        rounded = a.sub(a.add(y, a.number(_ROUND)), a.number(_ROUND))
        half = a.mul(y, a.number(0.5))
        half_rounded = a.sub(a.add(half, a.number(_ROUND)), a.number(_ROUND))
        odd = a.compare("one", half, half_rounded)
        signed = a.select(odd, a.neg(value), value)
        signed = a.select(a.compare("oeq", y, rounded), signed, a.number(float("nan")))
        return a.select(a.compare("olt", x, a.number(0.0)), signed, value)

    def integer_power(self, x: Value, exponent: int) -> Value:
        """Return x ** exponent by repeated squaring."""
        a = self._assembly
        result, square, left = None, x, abs(exponent)
        while left:
            if left & 1:
                result = square if result is None else a.mul(result, square)
            left >>= 1
            if left:
                square = a.mul(square, square)
        if result is None:
            return a.number(1.0)
        return a.div(a.number(1.0), result) if exponent < 0 else result

    def _exp(self, x: Value) -> Value:
        a = self._assembly
        inside = a.maximum(a.minimum(x, a.number(709.0)), a.number(-708.0))
        shifted = a.add(a.mul(inside, a.number(1.0 / log(2.0))), a.number(_ROUND))
        k = a.sub(shifted, a.number(_ROUND))
        r = a.sub(inside, a.mul(k, a.number(_LN2[0])))
        r = a.sub(r, a.mul(k, a.number(_LN2[1])))
        value = self._polynomial(r, [1.0 / factorial(i) for i in range(_EXP_TERMS)])
        biased = a.emit(f"add {a.integers} {self._bits(shifted)}, {a.integer(1023)}")
        scale = a.emit(f"shl {a.integers} {biased}, {a.integer(52)}")
        value = a.mul(value, self._doubles(scale))
        value = a.select(a.compare("olt", x, a.number(-708.0)), a.number(0.0), value)
        return a.select(a.compare("ogt", x, a.number(709.0)), a.number(float("inf")), value)

    def _log(self, x: Value) -> Value:
        a = self._assembly
        value = self.call("log_positive", x)
        infinity = a.number(float("inf"))
        value = a.select(a.compare("oeq", x, infinity), infinity, value)
        value = a.select(a.compare("oeq", x, a.number(0.0)), a.neg(infinity), value)
        return a.select(a.compare("olt", x, a.number(0.0)), a.number(float("nan")), value)

    def _log_positive(self, x: Value) -> Value:
        a = self._assembly
        bits = self._bits(x)
        # Mantissas are taken from sqrt(1/2) to sqrt(2), around which the series converges best.
        offset = a.emit(f"sub {a.integers} {bits}, {a.integer(0x3FE6A09E667F3BCD)}")
        exponent = a.emit(f"ashr {a.integers} {offset}, {a.integer(52)}")
        taken = a.emit(f"shl {a.integers} {exponent}, {a.integer(52)}")
        mantissa = self._doubles(a.emit(f"sub {a.integers} {bits}, {taken}"))
        counted = a.emit(f"add {a.integers} {exponent}, {a.integer(_ROUND_BITS)}")
        k = a.sub(self._doubles(counted), a.number(_ROUND))
        f = a.sub(mantissa, a.number(1.0))
        s = a.div(f, a.add(f, a.number(2.0)))
        z = a.mul(s, s)
        series = self._polynomial(z, [2.0 / (2 * i + 3) for i in range(_LOG_TERMS)])
        half_square = a.mul(a.mul(f, f), a.number(0.5))
        tail = a.mul(s, a.add(half_square, a.mul(z, series)))
        tail = a.add(tail, a.mul(k, a.number(_LN2[1])))
        value = a.sub(f, a.sub(half_square, tail))
        value = a.add(a.mul(k, a.number(_LN2[0])), value)
        return a.add(value, a.sub(x, x))  # NaN stays NaN

    def _sin(self, x: Value) -> Value:
        return self._circular(x, 0)

    def _cos(self, x: Value) -> Value:
        return self._circular(x, 1)

    def _circular(self, x: Value, quarter_turns: int) -> Value:
        a = self._assembly
        shifted = a.add(a.mul(x, a.number(2.0 / pi)), a.number(_ROUND))
        k = a.sub(shifted, a.number(_ROUND))
        r = x
        for part in _HALF_PI:
            r = a.sub(r, a.mul(k, a.number(part)))
        z = a.mul(r, r)
        odd_terms = [(-1.0) ** i / factorial(2 * i + 1) for i in range(1, 9)]
        even_terms = [(-1.0) ** i / factorial(2 * i) for i in range(1, 10)]
        sine = a.add(r, a.mul(a.mul(r, z), self._polynomial(z, odd_terms)))
        cosine = a.add(a.number(1.0), a.mul(z, self._polynomial(z, even_terms)))
        quadrant = a.emit(f"add {a.integers} {self._bits(shifted)}, {a.integer(quarter_turns)}")
        value = a.select(self._bit(quadrant, 1), cosine, sine)
        return a.select(self._bit(quadrant, 2), a.neg(value), value)

    def _tanh(self, x: Value) -> Value:
        a = self._assembly
        e = self.call("exp", a.mul(a.intrinsic("fabs", x), a.number(-2.0)))
        far = a.div(a.sub(a.number(1.0), e), a.add(a.number(1.0), e))
        far = a.select(a.compare("olt", x, a.number(0.0)), a.neg(far), far)
        # Near zero the quotient cancels: sinh / cosh by their series instead.
        z = a.mul(x, x)
        sinh = a.mul(x, self._polynomial(z, [1.0 / factorial(2 * i + 1) for i in range(8)]))
        cosh = self._polynomial(z, [1.0 / factorial(2 * i) for i in range(8)])
        near = a.compare("olt", z, a.number(0.3))
        return a.select(near, a.div(sinh, cosh), far)

    def _polynomial(self, x: Value, coefficients: Sequence[float]) -> Value:
        """Return the sum of coefficients[i] * x ** i, by Estrin's scheme."""
        a = self._assembly
        terms = [a.number(c) for c in coefficients]
        power = x
        while len(terms) > 1:
            pairs = [
                a.add(terms[i], a.mul(terms[i + 1], power)) for i in range(0, len(terms) - 1, 2)
            ]
            terms = pairs + terms[len(pairs) * 2 :]
            if len(terms) > 1:
                power = a.mul(power, power)
        return terms[0]

    def _bit(self, integers: Value, bit: int) -> Value:
        a = self._assembly
        kept = a.emit(f"and {a.integers} {integers}, {a.integer(bit)}")
        return a.emit(f"icmp ne {a.integers} {kept}, zeroinitializer")

    def _bits(self, x: Value) -> Value:
        a = self._assembly
        return a.emit(f"bitcast {a.doubles} {x} to {a.integers}")

    def _doubles(self, x: Value) -> Value:
        a = self._assembly
        return a.emit(f"bitcast {a.integers} {x} to {a.doubles}")
