"""Emitted steps: one attempt of W lanes by either integrator, and what follows from its error.

All functions take the same arguments, in this order:

``y``
    2 N vectors: states, then their slopes.
``new``
    2 N vectors: states and slopes after the attempt.
``q``, ``c``
    Parameters in force, and what the system's ``prepare`` made of them.
``control``
    One vector for each member of :class:`~ruleout.kernel.controls.Control`.
``tolerance``
    Scalars: the members of
    :class:`~ruleout.kernel.controls.Setting`, then N absolute tolerances.
``scratch``
    :func:`scratch_vectors` vectors.
``functions``
    Addresses of the system's own functions, one for each of :data:`SYSTEM_FUNCTIONS`.
``n``
    Number of states N.

The step functions know nothing else of a system, so one copy serves all.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Final

from ruleout.kernel.assembly import Assembly, Value
from ruleout.kernel.coefficients import RODAS_A, RODAS_C, RODAS_GAMMA, TSIT_A, TSIT_ERROR
from ruleout.kernel.controls import Control, Setting
from ruleout.kernel.elementary import Elementary

STEP_FUNCTIONS: Final = (
    "start",
    "explicit",
    "implicit",
    "commit_explicit",
    "commit_implicit",
    "newton",
)
SYSTEM_FUNCTIONS: Final = (
    "prepare",
    "slopes",
    "factor",
    "factor_solve",
    "residual",
    "newton_factor",
    "newton_factor_solve",
)
_BLOCKS: Final = ("y", "new", "q", "c", "control", "tolerance", "scratch", "functions")
_ARGUMENTS: Final = (*(f"ptr %{name}" for name in _BLOCKS), "i64 %n")

_TSIT_STABILITY: Final = 2.8
"""|h lambda| beyond which the explicit method is held back by stability."""
_ROUND: Final = 1.5 * 2.0**52
"""Adding it rounds a double below 2**51 to an integer."""
_FEW_PARTS: Final = 16.0
_BITS_OF_ONE: Final = float(1023 << 52)
_NEWTON_REACH: Final = 1e8
"""Newton's method is regularised on time scales this much longer than the last step."""


def scratch_vectors(n: int, factors: int) -> int:
    """Return how many vectors of scratch memory a system with ``n`` states needs."""
    return 10 * n + 1 + factors


class Steps:
    """Emits the step functions."""

    def __init__(self, assembly: Assembly) -> None:
        self._a = assembly
        self._elementary = Elementary(assembly)

    def write(self) -> None:
        """Write all of :data:`STEP_FUNCTIONS` and the elementary functions."""
        self._write_start()
        self._write_explicit()
        self._write_implicit()
        self._write_commit("commit_explicit", 2)
        self._write_commit("commit_implicit", 1)
        self._write_newton()
        self._elementary.write_all()

    def _write_start(self) -> None:
        """Prepared values for all lanes; slopes and first step for fresh ones.

        The first step follows Hairer, Norsett and Wanner (Solving Ordinary Differential Equations
        I, section II.4).
        """
        a = self._a
        with a.function("export_start", _ARGUMENTS):
            self._call("prepare", "%q", "%c")
            slopes, probe, bent = (self._block("%scratch", k) for k in range(3))
            self._call("slopes", "%y", "%c", slopes)
            zero = a.number(0.0)
            size, slope, bend = (a.variable(zero) for _ in range(3))

            def measure(i: Value) -> None:
                y = a.load("%y", i)
                scale = self._scale(i, a.intrinsic("fabs", y))
                self._raise(size, a.mul(y, scale))
                self._raise(slope, a.mul(a.load(slopes, i), scale))

            self._each(measure)
            largest, steepest = a.load(size, 0), a.load(slope, 0)
            small = a.either(
                a.compare("olt", largest, a.number(1e-5)),
                a.compare("olt", steepest, a.number(1e-5)),
            )
            h = a.div(a.mul(largest, a.number(0.01)), steepest)
            h = a.select(small, a.number(1e-6), h)

            def move(i: Value) -> None:
                a.store(a.add(a.load("%y", i), a.mul(h, a.load(slopes, i))), probe, i)

            def compare(i: Value) -> None:
                scale = self._scale(i, a.intrinsic("fabs", a.load("%y", i)))
                gap = a.sub(a.load(bent, i), a.load(slopes, i))
                self._raise(bend, a.mul(gap, scale))

            self._each(move)
            self._call("slopes", probe, "%c", bent)
            self._each(compare)
            steepest = a.maximum(steepest, a.div(a.load(bend, 0), h))
            guess = self._fifth_root(a.div(a.number(0.01), steepest))
            flat = a.maximum(a.number(1e-6), a.mul(h, a.number(1e-3)))
            guess = a.select(a.compare("ole", steepest, a.number(1e-15)), flat, guess)
            h = a.minimum(a.mul(h, a.number(100.0)), guess)
            fresh = a.compare("ogt", self._get(Control.FRESH), zero)
            self._put(Control.STEP, a.select(fresh, h, self._get(Control.STEP)))
            own = self._block("%y", 1)
            self._each(
                lambda i: a.store(a.select(fresh, a.load(slopes, i), a.load(own, i)), own, i)
            )

    def _write_explicit(self) -> None:
        """An attempt by Tsit5, with its error and a sign of stiffness."""
        a = self._a
        with a.function("export_explicit", _ARGUMENTS):
            h = self._trial()
            stages = [
                self._block("%y", 1),
                *(self._block("%scratch", k) for k in range(5)),
                self._block("%new", 1),
            ]
            before, place = self._block("%scratch", 5), self._block("%scratch", 6)
            for stage in range(1, 7):
                target = {5: before, 6: "%new"}.get(stage, place)

                def advance(i: Value, stage: int = stage, target: Value = target) -> None:
                    slope = self._combination(TSIT_A[stage], stages, i)
                    a.store(a.add(a.load("%y", i), a.mul(h, slope)), target, i)

                self._each(advance)
                self._call("slopes", target, "%c", stages[stage])
            zero = a.number(0.0)
            worst, size, slope_gap, state_gap = (a.variable(zero) for _ in range(4))

            def judge(i: Value) -> None:
                new = a.load("%new", i)
                larger = a.maximum(a.intrinsic("fabs", new), a.intrinsic("fabs", a.load("%y", i)))
                scale = self._scale(i, larger)
                error = a.mul(h, self._combination(TSIT_ERROR, stages, i))
                self._worsen(worst, a.mul(error, scale))
                self._raise(size, larger)
                gap = a.mul(a.sub(a.load(stages[6], i), a.load(stages[5], i)), scale)
                a.store(a.add(a.load(slope_gap, 0), a.mul(gap, gap)), slope_gap, 0)
                gap = a.mul(a.sub(new, a.load(before, i)), scale)
                a.store(a.add(a.load(state_gap, 0), a.mul(gap, gap)), state_gap, 0)

            self._each(judge)
            limit = a.mul(a.load(state_gap, 0), a.number(_TSIT_STABILITY**2))
            stiff = a.compare("ogt", a.mul(a.mul(h, h), a.load(slope_gap, 0)), limit)
            self._put(Control.ERROR, a.load(worst, 0))
            self._put(Control.SIZE, a.load(size, 0))
            self._put(Control.STIFFNESS, a.select(stiff, a.number(1.0), zero))
            self._put(Control.SETTLING, a.number(float("inf")))

    def _write_implicit(self) -> None:
        """An attempt by Rodas5P; its first increment tells how near the steady state is."""
        a = self._a
        with a.function("export_implicit", _ARGUMENTS):
            h = self._trial()
            inverse_step = a.div(a.number(1.0), h)
            inertia = self._block("%scratch", 10)
            factors = a.address(inertia, 1)
            a.store(a.div(a.number(1.0 / RODAS_GAMMA), h), inertia, 0)
            self._call("factor", "%y", "%c", inertia, factors)
            increments = [self._block("%scratch", k) for k in range(8)]
            right, place = self._block("%scratch", 8), self._block("%scratch", 9)
            for stage in range(8):

                def advance(i: Value, stage: int = stage) -> None:
                    if stage < 6:
                        step = self._combination(RODAS_A[stage], increments, i)
                        moved = a.add(a.load("%y", i), step)
                    else:
                        moved = a.add(a.load(place, i), a.load(increments[stage - 1], i))
                    a.store(moved, place, i)

                def complete(i: Value, stage: int = stage) -> None:
                    mixed = self._combination(RODAS_C[stage], increments, i)
                    a.store(a.add(a.load(right, i), a.mul(mixed, inverse_step)), right, i)

                if stage:
                    self._each(advance)
                self._call("slopes", place if stage else "%y", "%c", right)
                if stage:
                    self._each(complete)
                self._call("factor_solve", factors, right, increments[stage])
            zero = a.number(0.0)
            worst, size, settling = (a.variable(zero) for _ in range(3))

            def judge(i: Value) -> None:
                error = a.load(increments[7], i)
                new = a.add(a.load(place, i), error)
                a.store(new, "%new", i)
                larger = a.maximum(a.intrinsic("fabs", new), a.intrinsic("fabs", a.load("%y", i)))
                scale = self._scale(i, larger)
                self._worsen(worst, a.mul(error, scale))
                self._raise(size, larger)
                self._worsen(settling, a.mul(a.load(increments[0], i), scale))

            self._each(judge)
            self._put(Control.ERROR, a.load(worst, 0))
            self._put(Control.SIZE, a.load(size, 0))
            self._put(Control.STIFFNESS, zero)
            self._put(Control.SETTLING, a.load(settling, 0))

    def _write_commit(self, name: str, blocks: int) -> None:
        """Accept or reject, and choose the next step; the bits of lanes that need care.

        Elementary controller with safety 0.9, factors 0.2 to 6, no growth after a rejection.
        ``blocks`` is 2 if slopes move along with states.
        """
        a = self._a
        zero, one = a.number(0.0), a.number(1.0)
        with a.function(f"export_{name}", _ARGUMENTS, "i64"):
            error, trial, h = map(self._get, (Control.ERROR, Control.TRIAL, Control.STEP))
            t, stop = self._get(Control.TIME), self._get(Control.STOP)
            live = a.compare("ogt", self._get(Control.LIVE), zero)
            accepted = a.both(a.compare("ole", error, one), live)

            def blend(i: Value) -> None:
                a.store(a.select(accepted, a.load("%new", i), a.load("%y", i)), "%y", i)

            a.loop(a.emit(f"mul i64 %n, {blocks}"), blend)
            factor = a.mul(a.number(0.9), self._inverse_fifth_root(error))
            factor = a.minimum(a.maximum(factor, a.number(0.2)), a.number(6.0))
            again = a.compare("ogt", self._get(Control.REJECTED), zero)
            factor = a.select(again, a.minimum(factor, one), factor)
            smaller = a.minimum(factor, a.number(0.9))
            smaller = a.select(a.compare("olt", error, a.number(1e300)), smaller, a.number(0.1))
            arrived = a.both(a.compare("oge", trial, a.sub(stop, t)), accepted)
            following = a.mul(trial, a.select(accepted, factor, smaller))
            # A step cut short by an output time says little about the next one.
            following = a.select(arrived, a.maximum(h, following), following)
            t = a.select(accepted, a.select(arrived, stop, a.add(t, trial)), t)
            count = self._get(Control.STIFF_COUNT)
            stiff = a.compare("ogt", self._get(Control.STIFFNESS), zero)
            relaxed = a.maximum(a.sub(count, a.number(0.5)), zero)
            counted = a.select(stiff, a.add(count, one), relaxed)
            count = a.select(accepted, counted, count)
            steps = a.add(self._get(Control.STEPS), a.select(live, one, zero))
            floor = a.mul(self._get(Control.SIZE), self._setting(Setting.FLOOR_FACTOR))
            floor = a.maximum(self._get(Control.FLOOR), floor)
            self._put(Control.TIME, t)
            self._put(Control.STEP, following)
            self._put(Control.STIFF_COUNT, count)
            self._put(Control.STEPS, steps)
            self._put(Control.REJECTED, a.select(accepted, zero, one))
            self._put(Control.FLOOR, a.select(accepted, floor, self._get(Control.FLOOR)))
            hundredth = a.mul(following, a.number(0.01))
            stuck = a.compare("oeq", a.add(t, hundredth), t)
            stuck = a.either(stuck, a.compare("ult", following, a.number(1e-100)))
            settled = a.compare(
                "olt", self._get(Control.SETTLING), self._setting(Setting.SETTLE_LIMIT)
            )
            care = a.either(arrived, stuck)
            care = a.either(care, a.compare("oge", count, self._setting(Setting.STIFF_LIMIT)))
            care = a.either(care, a.compare("oge", steps, self._get(Control.STEP_LIMIT)))
            care = a.both(a.either(care, a.both(settled, accepted)), live)
            bits = a.emit(f"bitcast {a.masks} {care} to i{a.width}")
            a.give("i64", a.emit(f"zext i{a.width} {bits} to i64"))

    def _write_newton(self) -> None:
        """One Newton step of ``y`` towards the steady state, in place.

        ``new`` holds states with the conserved totals to keep. SETTLING becomes the largest
        relative change, with FLOOR added to the size of a state.
        """
        a = self._a
        with a.function("export_newton", _ARGUMENTS):
            inertia = self._block("%scratch", 10)
            factors = a.address(inertia, 1)
            right, change = self._block("%scratch", 0), self._block("%scratch", 1)
            a.store(a.div(a.number(1.0 / _NEWTON_REACH), self._get(Control.STEP)), inertia, 0)
            self._call("residual", "%y", "%new", "%c", right)
            self._call("newton_factor", "%y", "%c", inertia, factors)
            self._call("newton_factor_solve", factors, right, change)
            worst = a.variable(a.number(0.0))
            floor = self._get(Control.FLOOR)

            def move(i: Value) -> None:
                moved = a.add(a.load("%y", i), a.load(change, i))
                a.store(moved, "%y", i)
                size = a.add(a.intrinsic("fabs", moved), floor)
                self._worsen(worst, a.div(a.load(change, i), size))

            self._each(move)
            self._put(Control.SETTLING, a.load(worst, 0))

    def _trial(self) -> Value:
        """Return the step to try: the way to the next stop, in equal parts no longer than h.

        Equal parts cost no more steps than full ones and a short last one, and err less.
        """
        a = self._a
        h = self._get(Control.STEP)
        remaining = a.sub(self._get(Control.STOP), self._get(Control.TIME))
        # Half a part rounds up; a hundredth is the excess that a last step may take.
        parts = a.add(a.div(remaining, h), a.number(0.49))
        parts = a.sub(a.add(parts, a.number(_ROUND)), a.number(_ROUND))
        parts = a.maximum(parts, a.number(1.0))
        near = a.compare("olt", parts, a.number(_FEW_PARTS))
        trial = a.select(near, a.div(remaining, parts), h)
        self._put(Control.TRIAL, trial)
        return trial

    def _combination(self, weights: Sequence[float], blocks: Sequence[Value], i: Value) -> Value:
        a = self._a
        terms = [
            (a.number(weight), a.load(block, i))
            for weight, block in zip(weights, blocks, strict=False)
        ]
        total = a.mul(*terms[0])
        for weight, vector in terms[1:]:
            total = a.add(total, a.mul(weight, vector))
        return total

    def _scale(self, i: Value, magnitude: Value) -> Value:
        """Return 1 / (floor + atol_i + rtol * magnitude)."""
        a = self._a
        atol = self._a.broadcast("%tolerance", a.emit(f"add i64 {i}, {len(Setting)}"))
        total = a.add(atol, a.mul(self._setting(Setting.RTOL), magnitude))
        return a.div(a.number(1.0), a.add(self._get(Control.FLOOR), total))

    def _worsen(self, worst: Value, error: Value) -> None:
        """Raise the variable to |error|, or to NaN for good if that is not finite."""
        a = self._a
        self._raise(worst, error)
        a.store(a.add(a.load(worst, 0), a.sub(error, error)), worst, 0)

    def _raise(self, variable: Value, value: Value) -> None:
        a = self._a
        a.store(a.maximum(a.load(variable, 0), a.intrinsic("fabs", value)), variable, 0)

    def _fifth_root(self, x: Value) -> Value:
        e = self._elementary
        return e.call("exp", self._a.mul(self._a.number(0.2), e.call("log", x)))

    def _inverse_fifth_root(self, x: Value) -> Value:
        """Return x ** (-1/5) to about 1 %, for x from 1e-5 to 1e4; nearest in there beyond.

        The bits of a double, read as an integer, are nearly its logarithm; Newton's method then
        mends the root.
        """
        a = self._a
        x = a.minimum(a.maximum(x, a.number(1e-5)), a.number(1e4))
        bits = a.emit(f"bitcast {a.doubles} {x} to {a.integers}")
        logarithm = a.emit(f"sitofp {a.integers} {bits} to {a.doubles}")
        # 1.2 times the bits of one, less a fifth of those of x; the root begins a little low.
        root = a.sub(a.number(1.2 * _BITS_OF_ONE - 0.03 * 2.0**52), a.mul(logarithm, a.number(0.2)))
        bits = a.emit(f"fptosi {a.doubles} {root} to {a.integers}")
        root = a.emit(f"bitcast {a.integers} {bits} to {a.doubles}")
        square = a.mul(root, root)
        fifth = a.mul(a.mul(square, square), root)
        rest = a.sub(a.number(1.2), a.mul(a.mul(x, fifth), a.number(0.2)))
        return a.mul(root, rest)

    def _each(self, body: Callable[[Value], None]) -> None:
        self._a.loop("%n", body)

    def _block(self, pointer: Value, k: int) -> Value:
        """Return the address of the k-th N vectors behind ``pointer``."""
        return self._a.address(pointer, self._a.emit(f"mul i64 %n, {k}"))

    def _call(self, name: str, *arguments: Value) -> None:
        a = self._a
        slot = a.emit(
            f"getelementptr inbounds i64, ptr %functions, i64 {SYSTEM_FUNCTIONS.index(name)}"
        )
        a.call(a.emit(f"load ptr, ptr {slot}, align 8"), *arguments)

    def _get(self, control: Control) -> Value:
        return self._a.load("%control", int(control))

    def _put(self, control: Control, value: Value) -> None:
        self._a.store(value, "%control", int(control))

    def _setting(self, setting: Setting) -> Value:
        return self._a.broadcast("%tolerance", int(setting))
