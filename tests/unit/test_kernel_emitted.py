"""Emitted machine code, function by function, in vectors of every width."""

from __future__ import annotations

import ctypes
from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray

from ruleout.expressions import Expr, apply, const, evaluate, sym
from ruleout.kernel import System
from ruleout.kernel.conservation import conserved_totals
from ruleout.kernel.controls import Control, Setting
from ruleout.kernel.engine import SystemCode
from ruleout.kernel.lowering import lower
from ruleout.kernel.memory import Lanes, aligned_zeros
from ruleout.kernel.steps import STEP_FUNCTIONS, SYSTEM_FUNCTIONS

Array = NDArray[np.float64]
WIDTHS = (1, 2, 4, 8, 16)


class Machine:
    """One vector of lanes of a system, whose functions can be called one by one."""

    def __init__(self, system: System, width: int) -> None:
        lowered = lower(system)
        self.lowered = lowered
        self.n = len(lowered.states)
        self.code = SystemCode(lowered, *conserved_totals(lowered), width)
        self.lanes = Lanes(1, self.n, len(lowered.parameters), self.code)
        self.lanes.tolerance[:] = 1.0
        self.lanes.tolerance[Setting.STIFF_LIMIT] = np.inf
        self.lanes.control[:] = 0.0
        self.control(Control.STOP, np.inf)
        self.control(Control.LIVE, 1.0)
        self.control(Control.STEP_LIMIT, np.inf)

    def control(self, entry: Control, value: float) -> None:
        self.lanes.control[0, entry] = value

    def step(self, name: str) -> None:
        address = int(self.code.steps[STEP_FUNCTIONS.index(name)])
        function = ctypes.CFUNCTYPE(ctypes.c_int64, *[ctypes.c_int64] * 9)(address)
        function(*(int(block) for block in self.lanes.blocks[0]), self.n)

    def call(self, name: str, *blocks: Array) -> None:
        address = int(self.code.functions[SYSTEM_FUNCTIONS.index(name)])
        function = ctypes.CFUNCTYPE(None, *[ctypes.c_void_p] * len(blocks))(address)
        function(*(block.ctypes.data for block in blocks))

    def slopes(self, y: Array, q: Array) -> Array:
        """Return the (W, N) slopes of states (W, N) at parameters (W, P)."""
        self.lanes.y[0, : self.n] = y.T
        self.lanes.q[0] = q.T
        prepared = self.lanes.prepared[0]
        self.call("prepare", self.lanes.q[0], prepared)
        self.call("slopes", self.lanes.y[0], prepared, self.lanes.new[0])
        return self.lanes.new[0, : self.n].T.copy()


def values(expression: Expr, xs: Array, ks: Array, width: int) -> Array:
    """Return ``expression`` of symbols x (a state) and k (a parameter), by emitted code."""
    states = ("y", "x")
    machine = Machine(System(states, ("k",), (expression, const(0.0))), width)
    result = np.empty(len(xs))
    for i in range(0, len(xs), width):
        part = slice(i, i + width)
        y = np.column_stack([np.zeros(width), xs[part]])
        result[part] = machine.slopes(y, ks[part, None])[:, 0]
    return result


X, K = sym("x"), sym("k")


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize(
    ("name", "draw"),
    [
        ("exp", lambda rng: rng.uniform(-700, 700, 800)),
        ("log", lambda rng: np.exp(rng.uniform(-300, 300, 800))),
        ("sqrt", lambda rng: np.exp(rng.uniform(-300, 300, 800))),
        ("sin", lambda rng: rng.uniform(-1e4, 1e4, 800)),
        ("cos", lambda rng: rng.uniform(-1e4, 1e4, 800)),
        ("tanh", lambda rng: rng.normal(size=800) * np.exp(rng.uniform(-20, 3, 800))),
    ],
)
def test_elementary_functions_agree_with_numpy(
    name: str, draw: Callable[[np.random.Generator], Array], width: int
) -> None:
    xs = draw(np.random.default_rng(5))
    found = values(apply(name, X), xs, np.zeros(len(xs)), width)
    # A few units in the last place; near a zero of sin and cos the reduction is absolute.
    np.testing.assert_allclose(
        found, evaluate([apply(name, X)], {"x": xs})[0], rtol=2e-15, atol=1e-16
    )


@pytest.mark.parametrize("width", WIDTHS)
def test_powers_agree_with_numpy(width: int) -> None:
    rng = np.random.default_rng(6)
    xs, ks = np.exp(rng.uniform(-20, 20, 800)), rng.uniform(-6, 6, 800)
    # exp(k log x) loses |k log x| units in the last place: at most 120.
    np.testing.assert_allclose(values(X**K, xs, ks, width), xs**ks, rtol=120 * 2.3e-16)
    guarded = values(apply("max", X, const(1e-12)) ** K, xs, ks, width)
    np.testing.assert_allclose(guarded, xs**ks, rtol=120 * 2.3e-16)
    for exponent in (-3.0, -0.5, 0.5, 1.5, 3.0, 7.0):
        found = values(X ** const(exponent), xs, ks, width)
        np.testing.assert_allclose(found, xs**exponent, rtol=3e-15)


def test_special_values_follow_numpy() -> None:
    special = np.array([-np.inf, -2.0, -1.0, -0.0, 0.0, 0.5, 1.0, np.inf, np.nan] * 8)[:64]
    exponents = np.repeat([3.0, 2.0, 0.5, 0.0, -1.0, 2.5, -2.0, 1.0], 8)
    with np.errstate(all="ignore"):
        expected = special**exponents
        odd_cases = ~np.isfinite(special) | ((special == 0.0) & (exponents < 0.0))
        found = values(X**K, special, exponents, 8)
        np.testing.assert_allclose(found[~odd_cases], expected[~odd_cases], rtol=1e-15)
        assert np.isnan(values(apply("exp", X), np.full(8, np.nan), np.zeros(8), 8)).all()
        assert np.isnan(values(apply("log", X), np.full(8, np.nan), np.zeros(8), 8)).all()
        edges = np.array([-np.inf, -1.0, 0.0, np.inf, 1.0, -800.0, 800.0, 0.0])
        np.testing.assert_array_equal(
            values(apply("log", X), edges, edges, 8)[:5], np.log(edges[:5])
        )
        np.testing.assert_array_equal(
            values(apply("exp", X), edges, edges, 8)[[0, 2, 3, 5, 6]],
            [0.0, 1.0, np.inf, 0.0, np.inf],
        )


def test_min_max_and_select_follow_numpy() -> None:
    xs = np.array([-1.0, 0.0, 0.5, 2.0, -3.0, 1.0, 7.0, 1e-300])
    ks = np.array([0.5, -0.5, 0.5, 1.0, 1.0, 1.0, -2.0, 0.0])
    for op in ("min", "max"):
        expected = evaluate([apply(op, X, K)], {"x": xs, "k": ks})[0]
        np.testing.assert_array_equal(values(apply(op, X, K), xs, ks, 8), expected)
    chosen = values(apply("select", X, K, X * 2.0), xs, ks, 8)
    np.testing.assert_array_equal(chosen, np.where(xs > 0.0, ks, 2.0 * xs))


def relay() -> System:
    """Return a four-state relay with a feedback and a Hill term."""
    a, b, c, d, k, h = (sym(name) for name in ("a", "b", "c", "d", "k", "h"))
    floor = const(1e-12)
    brake = 1.0 + (apply("max", d, floor) / k) ** h
    push = apply("max", b, floor) ** h / (k**h + apply("max", b, floor) ** h)
    rhs = (
        2.0 * (1.0 - a) / brake - 0.5 * a,
        1.5 * a * (1.0 - b) - b,
        3.0 * push * (1.0 - c) - c,
        c - 0.7 * d,
    )
    return System(("a", "b", "c", "d"), ("k", "h"), rhs)


@pytest.mark.parametrize("width", WIDTHS)
def test_factors_solve_the_shifted_system(width: int) -> None:
    """(s I - J) x = b has the solution that NumPy finds with the same Jacobian."""
    system = relay()
    machine = Machine(system, width)
    rng = np.random.default_rng(7)
    y, q = rng.uniform(0.1, 1.0, (width, 4)), rng.uniform(1.0, 3.0, (width, 2))
    machine.slopes(y, q)
    prepared, room = machine.lanes.prepared[0], machine.lanes.scratch
    s, b, x = (aligned_zeros(m, width) for m in (1, 4, 4))
    s[:], b[:] = rng.uniform(0.5, 2.0, s.shape), rng.uniform(-1.0, 1.0, b.shape)
    machine.call("factor", machine.lanes.y[0], prepared, s, room)
    machine.call("factor_solve", room, b, x)
    entries = [entry for row in machine.lowered.jacobian for entry in row]
    for w in range(width):
        point = dict(zip((*system.states, *system.parameters), (*y[w], *q[w]), strict=True))
        jacobian = np.array(evaluate(entries, point)).reshape(4, 4)
        expected = np.linalg.solve(s[0, w] * np.eye(4) - jacobian, b[:, w])
        np.testing.assert_allclose(x[:, w], expected, rtol=1e-12)


@pytest.mark.parametrize(("method", "order"), [("explicit", 5), ("implicit", 5)])
def test_steps_converge_with_their_order(method: str, order: int) -> None:
    """Halving the step divides the global error by 2**order."""
    x, y, z = (sym(name) for name in "xyz")
    rhs = (apply("sin", y) - 0.4 * x * z, apply("cos", x) - y * y * 0.3, x * y - z)
    system = System(("x", "y", "z"), (), rhs)

    def final(steps: int) -> Array:
        machine = Machine(system, 2)
        machine.lanes.tolerance[Setting.RTOL] = 1e3
        machine.lanes.y[0, :3] = np.array([[0.3], [0.8], [0.1]])
        machine.control(Control.FRESH, 1.0)
        machine.step("start")
        for _ in range(steps):
            machine.control(Control.STEP, 2.0 / steps)
            machine.step(method)
            machine.step(f"commit_{method}")
        return machine.lanes.y[0, :3, 0].copy()

    exact = final(1600)
    errors = np.array([np.abs(final(n) - exact).max() for n in (16, 32, 64)])
    observed = np.log2(errors[:-1] / errors[1:])
    assert np.all(observed > order - 0.4), observed
    assert np.all(observed < order + 1.2), observed
