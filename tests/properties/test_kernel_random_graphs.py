"""Two hundred random mechanisms over all kinds of terms, against SciPy's Radau."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from ruleout.expressions import ONE, ZERO, Expr, apply, const, sym
from ruleout.kernel import Program, Protocol, Status, System, set_threads
from ruleout.kernel.lowering import lower
from ruleout.kernel.reference import Tape

Array = NDArray[np.float64]
GRAPHS = 200


class Drawing:
    """A random mechanism: switched, expressed and pool nodes, and every kind of edge.

    Each parameter is noted with the range its values are drawn from.
    """

    def __init__(self, seed: int) -> None:
        self._rng = np.random.default_rng([seed, 20231])
        self.ranges: dict[str, tuple[float, float]] = {}
        count = int(self._rng.integers(2, 7))
        self._nodes = [sym(f"n{i}") for i in range(count)]
        self._kinds = self._rng.choice(["switched", "expressed", "pool"], count)
        self._gain: dict[Expr, Expr] = {}
        self._gain_factor: dict[Expr, Expr] = {}
        self._loss: dict[Expr, Expr] = {}
        self._flow = dict.fromkeys(self._nodes, ZERO)
        self._stages: list[tuple[Expr, Expr]] = []
        for node in self._nodes:
            self._gain[node] = self._parameter(0.01, 0.5)
            self._gain_factor[node] = ONE
            self._loss[node] = self._parameter(0.05, 5.0)
        for _ in range(int(self._rng.integers(2, 9))):
            self._draw_edge()

    def system(self) -> System:
        """Return the mechanism's equations."""
        rhs = []
        for node, kind in zip(self._nodes, self._kinds, strict=True):
            gain, loss = self._gain[node] * self._gain_factor[node], self._loss[node]
            match kind:
                case "switched":
                    k = self._parameter(0.05, 2.0)
                    saturates = bool(self._rng.integers(2))
                    on, off = 1.0 - node, node
                    acts = (_saturating(on, k), _saturating(off, k)) if saturates else (on, off)
                    rhs.append(gain * acts[0] - loss * acts[1] + self._flow[node])
                case "expressed":
                    rhs.append(gain - loss * node + self._flow[node])
                case _:
                    rhs.append(self._flow[node])
        states = (*self._nodes, *(stage for stage, _ in self._stages))
        equations = (*rhs, *(slope for _, slope in self._stages))
        return System(tuple(s.name for s in states), tuple(self.ranges), equations)

    def _parameter(self, low: float, high: float) -> Expr:
        name = f"p{len(self.ranges)}"
        self.ranges[name] = (low, high)
        return sym(name)

    def _pick(self) -> Expr:
        return self._nodes[int(self._rng.integers(len(self._nodes)))]

    def _law(self, source: Expr) -> Expr:
        match self._rng.integers(3):
            case 0:
                return source
            case 1:
                return _saturating(source, self._parameter(0.05, 2.0))
        h, half = self._parameter(1.0, 4.0), self._parameter(0.05, 2.0)
        power = apply("max", source, const(1e-12)) ** h
        return power / (half**h + power)

    def _brake(self, source: Expr) -> Expr:
        h, half = self._parameter(1.0, 4.0), self._parameter(0.05, 2.0)
        return 1.0 / (1.0 + (apply("max", source, const(1e-12)) / half) ** h)

    def _delayed(self, source: Expr) -> Expr:
        rate = self._parameter(0.5, 20.0)
        for _ in range(int(self._rng.integers(1, 4))):
            stage = sym(f"d{len(self._stages)}")
            self._stages.append((stage, rate * (source - stage)))
            source = stage
        return source

    def _draw_edge(self) -> None:
        source, target = self._pick(), self._pick()
        if self._rng.random() < 0.2:
            source = self._delayed(source)
        strength = self._parameter(0.05, 5.0)
        flow: Expr
        match self._rng.integers(9):
            case 0:
                self._gain[target] = self._gain[target] + strength * self._law(source)
            case 1:
                self._gain_factor[target] = self._gain_factor[target] * self._brake(source)
            case 2:
                self._gain_factor[target] = self._gain_factor[target] * self._law(source)
            case 3:
                self._loss[target] = self._loss[target] + strength * self._law(source)
            case 4:
                self._loss[target] = self._loss[target] * self._brake(source)
            case 5:
                other = self._pick()
                flow = strength * target - self._parameter(0.05, 5.0) * other
                flow = flow * (1.0 + self._law(source))
                self._flow[target] = self._flow[target] - flow
                self._flow[other] = self._flow[other] + flow
            case 6:
                partner, made = self._pick(), self._pick()
                flow = strength * target * partner - self._parameter(0.05, 5.0) * made
                for node, sign in ((target, -1.0), (partner, -1.0), (made, 1.0)):
                    self._flow[node] = self._flow[node] + sign * flow
            case 7:
                flow = strength * _saturating(target, self._parameter(0.05, 2.0))
                self._flow[target] = self._flow[target] - flow
            case _:
                wave = 1.0 + 0.5 * apply("sin", strength * sym("time"))
                bend = apply("tanh", self._pick()) + apply("exp", -apply("sqrt", ONE + source**2.0))
                self._flow[target] = self._flow[target] + 0.2 * wave * apply("min", bend, ONE)
                self._flow[target] = self._flow[target] - 0.3 * target


def _saturating(s: Expr, k: Expr) -> Expr:
    return s / (k + apply("max", s, ZERO))


def scipy_functions(
    system: System, p: Array
) -> tuple[Callable[[float, Array], Array], Callable[[float, Array], Array]]:
    """Return right-hand side and Jacobian for SciPy, interpreted by NumPy."""
    lowered = lower(system)
    n = len(system.states)
    names = (*system.states, *system.parameters, "time")
    entries = [entry for row in lowered.jacobian[:n] for entry in row[:n]]
    slopes, jacobian = Tape(system.rhs, names), Tape(entries, names)

    def inputs(t: float, y: Array) -> list[Array]:
        return list(np.array([*y, *p, t])[:, None])

    return (
        lambda t, y: slopes.run(inputs(t, y))[0],
        lambda t, y: jacobian.run(inputs(t, y)).reshape(n, n),
    )


@pytest.mark.parametrize("first", range(0, GRAPHS, 20))
def test_random_mechanisms_agree_with_radau(first: int) -> None:
    """Values to rtol 1e-6 of each solver; Jacobians against central differences."""
    set_threads(1)
    times = np.array([0.3, 1.0, 3.0, 8.0])
    for seed in range(first, first + 20):
        drawing = Drawing(seed)
        system = drawing.system()
        rng = np.random.default_rng([seed, 7])
        low, high = np.log(np.array(list(drawing.ranges.values()))).T
        n, m = len(system.states), len(system.parameters)
        p = np.exp(rng.uniform(low, high, m))
        y0 = rng.uniform(0.0, 1.0, n)
        plan = Protocol(
            breaks=np.zeros(1),
            factor=np.ones((1, m)),
            shift=np.zeros((1, m)),
            keep=np.ones((1, n)),
            add=np.zeros((1, n)),
            times=times,
        )
        solution = Program(system).solve(y0[None], p[None], [plan], rtol=1e-8, atol=1e-10)
        slopes, jacobian = scipy_functions(system, p)
        check_jacobian(slopes, jacobian, y0 + 0.1)
        exact = solve_ivp(
            slopes, (0.0, 8.0), y0, "Radau", times, jac=jacobian, rtol=1e-8, atol=1e-10
        )
        assert (solution.status[0] == Status.OK) == exact.success, seed
        if exact.success:
            gap = np.abs(solution.states[0] - exact.y.T) / (1.0 + np.abs(exact.y.T))
            assert gap.max() < 1e-6, (seed, gap.max())


def check_jacobian(
    slopes: Callable[[float, Array], Array], jacobian: Callable[[float, Array], Array], y: Array
) -> None:
    exact = jacobian(0.7, y)
    step = 1e-6
    for j in range(len(y)):
        shift = np.zeros(len(y))
        shift[j] = step
        numeric = (slopes(0.7, y + shift) - slopes(0.7, y - shift)) / (2 * step)
        # Kinks of min and max aside, differences are good to step**2 and to rounding / step.
        np.testing.assert_allclose(exact[:, j], numeric, rtol=1e-5, atol=1e-7)
