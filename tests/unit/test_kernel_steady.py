"""Steady states: the one the flow reaches, its stability, and flows that do not settle."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from ruleout.expressions import apply, const, sym
from ruleout.kernel import Program, Status, System

Array = NDArray[np.float64]

u, v, w, x, y, z, a, b, h = (sym(name) for name in ("u", "v", "w", "x", "y", "z", "a", "b", "h"))
TOGGLE = System(("u", "v"), ("a", "h"), (a / (1.0 + v**h) - u, a / (1.0 + u**h) - v))


@pytest.fixture(params=["compiled", "reference"], autouse=True)
def _implementation(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("RULEOUT_KERNEL", request.param)


def test_the_flow_decides_between_two_stable_states() -> None:
    """A toggle switch falls to the side that its start is on, however near the watershed."""
    rng = np.random.default_rng(1)
    starts = rng.uniform(0.0, 4.0, (400, 2))
    starts[:100, 1] = starts[:100, 0] * (1.0 + rng.choice([-1e-2, 1e-2], 100))
    starts = starts[np.abs(starts[:, 0] - starts[:, 1]) > 2e-3]
    found = Program(TOGGLE).steady(starts, np.tile([3.0, 2.0], (len(starts), 1)))
    assert (found.status == Status.OK).all()
    assert found.stable.all()
    # u + v = 3 and u v = 1 at both.
    high, low = (3.0 + np.sqrt(5.0)) / 2.0, (3.0 - np.sqrt(5.0)) / 2.0
    side = starts[:, :1] > starts[:, 1:]
    expected = np.where(side, [high, low], [low, high])
    np.testing.assert_allclose(found.states, expected, rtol=1e-12)


def test_a_start_on_the_watershed_ends_on_the_saddle_and_is_called_unstable() -> None:
    found = Program(TOGGLE).steady([[0.0, 0.0]], [[3.0, 2.0]])
    assert found.status[0] == Status.OK
    assert not found.stable[0]
    root = np.roots([1.0, 0.0, 1.0, -3.0]).real.max()
    np.testing.assert_allclose(found.states[0], root, rtol=1e-10)


def test_basins_agree_with_integration() -> None:
    """Three states, two of them stable: the end of SciPy's long integration, from each start."""
    system = System(
        ("x", "y", "z"),
        ("a", "h"),
        (a * z**h / (1.0 + z**h) - x + 0.02, 2.0 * (x - y), 0.3 * (y - z)),
    )
    rng = np.random.default_rng(2)
    starts = rng.uniform(0.0, 2.0, (60, 3))
    found = Program(system).steady(starts, np.tile([2.2, 3.0], (60, 1)))
    assert (found.status == Status.OK).all()

    def slopes(_: float, s: Array) -> list[float]:
        p, q, r = s
        return [2.2 * r**3 / (1 + r**3) - p + 0.02, 2.0 * (p - q), 0.3 * (q - r)]

    ends = [solve_ivp(slopes, (0, 400), s, "LSODA", rtol=1e-9).y[:, -1] for s in starts]
    np.testing.assert_allclose(found.states, ends, rtol=1e-6)
    assert len(np.unique(np.round(ends, 3), axis=0)) == 2


def test_conserved_totals_are_kept() -> None:
    """A reversible conversion and a binding: the Jacobian is singular, the totals are not."""
    bind = a * x * y - b * z
    system = System(
        ("x", "y", "z", "u", "v"), ("a", "b"), (-bind, -bind, bind, b * v - a * u, a * u - b * v)
    )
    starts = np.array([[1.0, 2.0, 0.0, 1.0, 0.0], [0.0, 0.0, 3.0, 0.2, 0.7]])
    p = np.array([[2.0, 0.5], [1.0, 4.0]])
    found = Program(system).steady(starts, p)
    assert (found.status == Status.OK).all()
    assert found.stable.all()
    s = found.states
    np.testing.assert_allclose(s[:, 0] + s[:, 2], starts[:, 0] + starts[:, 2], rtol=1e-13)
    np.testing.assert_allclose(s[:, 1] + s[:, 2], starts[:, 1] + starts[:, 2], rtol=1e-13)
    np.testing.assert_allclose(s[:, 3] + s[:, 4], starts[:, 3] + starts[:, 4], rtol=1e-13)
    np.testing.assert_allclose(p[:, 0] * s[:, 0] * s[:, 1], p[:, 1] * s[:, 2], rtol=1e-11)


def test_an_oscillator_does_not_settle() -> None:
    """The Brusselator beyond its Hopf point circles; at the rest itself it stays, unstable."""
    system = System(("x", "y"), ("a", "b"), (a + x * x * y - (b + 1.0) * x, b * x - x * x * y))
    found = Program(system).steady([[1.5, 3.0], [1.0, 3.0], [1.5, 1.0]], [[1, 3], [1, 3], [1, 1.5]])
    assert list(found.status) == [Status.NO_STEADY_STATE, Status.OK, Status.OK]
    assert np.isnan(found.states[0]).all()
    np.testing.assert_allclose(found.states[1:], [[1.0, 3.0], [1.0, 1.5]], rtol=1e-12)
    assert list(found.stable) == [False, False, True]


def test_growth_without_end_is_not_steady() -> None:
    growing = System(("x",), ("a",), (a * x,))
    found = Program(growing).steady([[1.0], [1.0], [0.0]], [[1.0], [-1.0], [1.0]])
    assert list(found.status) == [Status.BLOW_UP, Status.OK, Status.OK]
    assert list(found.stable) == [False, True, False]
    np.testing.assert_allclose(found.states[1:], 0.0, atol=1e-9)
    filling = System(("x",), ("a",), (a,))
    found = Program(filling).steady([[1.0], [1.0], [np.nan]], [[1.0], [0.0], [1.0]])
    assert found.status[0] in (Status.BLOW_UP, Status.NO_STEADY_STATE)
    assert found.status[1] == Status.OK
    assert found.status[2] == Status.BAD_START


def test_wide_spread_rates_settle() -> None:
    """Time scales over ten decades in one chain, against the closed solution."""
    rng = np.random.default_rng(4)
    k = np.exp(rng.uniform(np.log(1e-5), np.log(1e5), (300, 4)))
    names = ("k1", "k2", "k3", "k4")
    k1, k2, k3, k4 = (sym(name) for name in names)
    feed = k1 * (1.0 - x) - k2 * x
    system = System(("x", "y", "z"), names, (feed, k3 * x - k4 * y, k4 * y / (1.0 + y) - k1 * z))
    found = Program(system).steady(np.zeros((300, 3)), k)
    assert (found.status == Status.OK).all()
    assert found.stable.all()
    first = k[:, 0] / (k[:, 0] + k[:, 1])
    second = k[:, 2] * first / k[:, 3]
    third = k[:, 3] / k[:, 0] * second / (1.0 + second)
    np.testing.assert_allclose(found.states, np.column_stack([first, second, third]), rtol=1e-9)


def test_differences_of_steady_states_are_derivatives() -> None:
    program = Program(TOGGLE)
    shift = 1e-6
    p = np.array([[3.0, 2.0], [3.0 * np.exp(shift), 2.0], [3.0, 2.0 * np.exp(shift)]])
    states = program.steady(np.tile([2.0, 1.0], (3, 1)), p, group=3).states
    found = (states[1:] - states[0]) / shift
    wide = 1e-4
    for j, derivative in enumerate(found):
        ends = []
        for sign in (1.0, -1.0):
            moved = np.array([[3.0, 2.0]])
            moved[0, j] *= np.exp(sign * wide)
            ends.append(program.steady([[2.0, 1.0]], moved).states[0])
        # A forward difference is off by half the curvature, here about 25, times its step.
        np.testing.assert_allclose(derivative, (ends[0] - ends[1]) / (2 * wide), atol=2e-5)


@pytest.mark.parametrize(("size", "limit"), [(1, 1.0), (2, 4.0), (3, 8.0), (5, 1.0 / 0.345)])
def test_stability_of_a_ring_changes_where_theory_says(size: int, limit: float) -> None:
    """x1' = g(xn) - x1, xi' = x(i-1) - xi loses stability where -g' = sec(pi / n) ** n.

    J. J. Tyson and H. G. Othmer, Progress in Theoretical Biology 5 (1978) 1-62. Rings of one and
    two never lose it; what is varied is the slope g' = -a of a linear feedback around rest.
    """
    names = tuple(f"x{i}" for i in range(size))
    states = [sym(name) for name in names]
    rhs = (
        -(a * states[-1]) - states[0],
        *(p - q for p, q in pairwise(states)),
    )
    limit = (1.0 / np.cos(np.pi / size)) ** size if size > 2 else limit
    program = Program(System(names, ("a",), rhs))
    slopes = np.array([[0.99 * limit], [1.01 * limit]])
    found = program.steady(np.zeros((2, size)), slopes)
    assert (found.status == Status.OK).all()
    assert list(found.stable) == [True, size < 3]


def test_stability_need_not_be_judged() -> None:
    found = Program(TOGGLE).steady([[2.0, 1.0]], [[3.0, 2.0]], stability=False)
    assert found.status[0] == Status.OK
    assert not found.stable[0]


def test_a_guarded_hill_term_settles_from_zero() -> None:
    """Rest of a mutual activation from zero is the low state, not the high one."""
    guarded = apply("max", y, const(1e-12)) ** h
    system = System(("x", "y"), ("a", "h"), (0.01 + a * guarded / (1.0 + guarded) - x, x - y))
    found = Program(system).steady([[0.0, 0.0], [4.0, 4.0]], [[3.0, 2.0], [3.0, 2.0]])
    assert found.stable.all()
    assert found.states[0, 0] < 0.02
    assert found.states[1, 0] > 2.0
