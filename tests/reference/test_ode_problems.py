"""Published initial value problems: end values known to many digits.

Sources: Robertson: E. Hairer and G. Wanner, Solving Ordinary Differential Equations II, Springer
1996, section IV.10, and the Bari test set for initial value problem solvers (the value at 1e11).
Oregonator: R. J. Field and R. M. Noyes, J. Chem. Phys. 60 (1974) 1877, in the test set's scaling.
Brusselator: I. Prigogine and R. Lefever, J. Chem. Phys. 48 (1968) 1695. Lotka-Volterra: first
integral and period means by V. Volterra, Nature 118 (1926) 558.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import ArrayLike

from ruleout.expressions import Expr, sym
from ruleout.kernel import Protocol, Solution, Status, System, compile_system

x, y, z, a, b, c, d = (sym(name) for name in ("x", "y", "z", "a", "b", "c", "d"))


def run(system: System, y0: ArrayLike, p: ArrayLike, times: ArrayLike, rtol: float) -> Solution:
    """Integrate one row with an absolute tolerance far below its smallest state."""
    n, m = len(system.states), len(system.parameters)
    protocol = Protocol(
        breaks=np.zeros(1),
        factor=np.ones((1, m)),
        shift=np.zeros((1, m)),
        keep=np.ones((1, n)),
        add=np.zeros((1, n)),
        times=np.asarray(times, dtype=float),
    )
    start, values = np.asarray(y0, dtype=float)[None], np.asarray(p, dtype=float)[None]
    solution = compile_system(system).solve(start, values, [protocol], rtol=rtol, atol=1e-20)
    assert solution.status[0] == Status.OK
    return solution


# Asked tolerance and what the global error may be: a few hundred local errors.
PRECISIONS = pytest.mark.parametrize(("rtol", "allowed"), [(1e-8, 1e-6), (1e-11, 1e-8)])


def robertson() -> System:
    """Return the Robertson problem."""
    rhs = (-a * x + c * y * z, a * x - c * y * z - b * y * y, b * y * y)
    return System(("x", "y", "z"), ("a", "b", "c"), rhs)


@PRECISIONS
def test_robertson(rtol: float, allowed: float) -> None:
    states = run(robertson(), [1, 0, 0], [0.04, 3e7, 1e4], [40, 1e11], rtol).states[0]
    at_40 = [0.7158270687194, 9.185534764558e-6, 0.2841637457458]
    at_end = [2.083340149701255e-8, 8.333360770334713e-14, 0.9999999791665050]
    np.testing.assert_allclose(states[0], at_40, rtol=allowed)
    np.testing.assert_allclose(states[1], at_end, rtol=allowed)
    np.testing.assert_allclose(states.sum(axis=1), 1.0, rtol=1e-12)


@PRECISIONS
def test_oregonator(rtol: float, allowed: float) -> None:
    rhs: tuple[Expr, ...] = (
        a * (y + x * (1.0 - b * x - y)),
        (z - (1.0 + x) * y) / a,
        c * (x - z),
    )
    system = System(("x", "y", "z"), ("a", "b", "c"), rhs)
    end = run(system, [1, 2, 3], [77.27, 8.375e-6, 0.161], [360], rtol).states[0, 0]
    expected = [1.000814870318523, 1228.178521549917, 132.0554942846706]
    # The limit cycle has a nearly vertical front here: ten times the error elsewhere.
    np.testing.assert_allclose(end, expected, rtol=10 * allowed)


@PRECISIONS
def test_brusselator(rtol: float, allowed: float) -> None:
    rhs = (a + x * x * y - (b + 1.0) * x, b * x - x * x * y)
    end = run(System(("x", "y"), ("a", "b"), rhs), [1.5, 3], [1, 3], [20], rtol).states[0, 0]
    np.testing.assert_allclose(end, [0.4986370712683478, 4.596780349452011], rtol=allowed)


@pytest.mark.parametrize(("strength", "amplitude"), [(1.95, 0.0), (2.05, 0.528), (2.2, 1.128)])
def test_brusselator_oscillates_beyond_its_hopf_point(strength: float, amplitude: float) -> None:
    """The rest at (A, B / A) loses stability at B = 1 + A**2."""
    rhs = (a + x * x * y - (b + 1.0) * x, b * x - x * x * y)
    system = System(("x", "y"), ("a", "b"), rhs)
    times = np.linspace(1500, 1520, 2001)
    states = run(system, [1.1, strength], [1, strength], times, 1e-8).states[0, :, 0]
    assert np.ptp(states) == pytest.approx(amplitude, rel=0.01, abs=1e-3)
    rest = compile_system(system).steady([[1.0, strength]], [[1.0, strength]])
    assert rest.stable[0] == (strength < 2.0)


@PRECISIONS
def test_lotka_volterra(rtol: float, allowed: float) -> None:
    rhs = (a * x - b * x * y, d * x * y - c * y)
    system = System(("x", "y"), ("a", "b", "c", "d"), rhs)
    period = 4.297073944
    times = np.array([0.0, period, 10.0])
    states = run(system, [10, 5], [1.5, 1, 3, 1], times, rtol).states[0]
    np.testing.assert_allclose(states[2], [0.287212964202, 0.449777463506], rtol=10 * allowed)
    # The published period is rounded to 5e-10, and the state turns at about 35 per unit time.
    np.testing.assert_allclose(states[1], states[0], rtol=10 * allowed + 2e-8)
    u, v = states.T
    invariant = u - 3.0 * np.log(u) + v - 1.5 * np.log(v)
    np.testing.assert_allclose(invariant, 5.678087852367, rtol=allowed)
