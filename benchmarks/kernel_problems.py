"""The problems of ``benchmarks/kernel.py``, each written once and translated for every solver."""

from __future__ import annotations

import ast
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.expressions.parse import parse
from ruleout.kernel import System
from ruleout.kernel.lowering import lower
from ruleout.kernel.reference import Tape

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Problem:
    """An initial value problem with parameters that vary from solve to solve.

    Attributes
    ----------
    name, title : str
    equations : mapping of state to formula
        In Python's notation.
    parameters : mapping of name to (low, high)
        Drawn uniformly in the logarithm; equal bounds fix it.
    start : tuple of float
    times : (M,) array
        Output times, after 0.
    small : float
        Absolute tolerance per relative tolerance.
    stiff : bool
        Whether only implicit methods are worth timing.
    """

    name: str
    title: str
    equations: dict[str, str]
    parameters: dict[str, tuple[float, float]]
    start: tuple[float, ...]
    times: Array
    small: float
    stiff: bool

    def draw(self, rows: int) -> Array:
        """Return the first ``rows`` parameter sets; the same ones every time."""
        low, high = np.log(np.array(list(self.parameters.values()))).T
        unit = np.random.default_rng(20240229).uniform(size=(rows, len(low)))
        return np.exp(low + unit * (high - low))

    def system(self) -> System:
        """Return the problem as the kernel takes it."""
        rhs = tuple(parse(formula) for formula in self.equations.values())
        return System(tuple(self.equations), tuple(self.parameters), rhs)

    def python(self) -> Callable[..., list[float]]:
        """Return ``f(t, y, p)`` in plain Python."""
        lines = [
            "def f(_t, _y, _p):",
            f"    {', '.join(self.equations)}, = _y",
            f"    {', '.join(self.parameters)}, = _p",
            f"    return [{', '.join(self.equations.values())}]",
        ]
        names: dict[str, Callable[..., list[float]]] = {}
        exec("\n".join(lines), names)
        return names["f"]

    def compiled(self) -> Callable[..., Array]:
        """Return ``f(t, y, p)`` compiled by numba."""
        from numba import njit

        lines = [
            "def f(_t, _y, _p):",
            *(f"    {name} = _y[{i}]" for i, name in enumerate(self.equations)),
            *(f"    {name} = _p[{i}]" for i, name in enumerate(self.parameters)),
            "    _d = empty_like(_y)",
            *(f"    _d[{i}] = {formula}" for i, formula in enumerate(self.equations.values())),
            "    return _d",
        ]
        names = {"empty_like": np.empty_like}
        exec("\n".join(lines), names)
        compiled: Callable[..., Array] = njit(error_model="numpy", fastmath=True)(names["f"])
        return compiled

    def jacobian(self) -> Callable[..., Array]:
        """Return ``d f / d y`` of ``(t, y, p)``, for the solutions that all are held against."""
        lowered = lower(self.system())
        n = len(lowered.states)
        names = (*lowered.states, *lowered.parameters)
        tape = Tape([entry for row in lowered.jacobian for entry in row], names)
        return lambda _t, y, p: tape.run(list(np.array([*y, *p])[:, None])).reshape(n, n)

    def c_source(self) -> str:
        """Return the macros and the function that ``cvode_solve.c`` includes."""
        lines = [
            f"#define STATES {len(self.equations)}",
            f"#define PARAMETERS {len(self.parameters)}",
            "static void slopes(const double *_y, const double *_p, double *_d) {",
            *(f"  const double {name} = _y[{i}];" for i, name in enumerate(self.equations)),
            *(f"  const double {name} = _p[{i}];" for i, name in enumerate(self.parameters)),
            *(f"  _d[{i}] = {_to_c(text)};" for i, text in enumerate(self.equations.values())),
            "}",
        ]
        return "\n".join(lines) + "\n"


class _Powers(ast.NodeTransformer):
    def visit_BinOp(self, node: ast.BinOp) -> ast.AST:
        self.generic_visit(node)
        if not isinstance(node.op, ast.Pow):
            return node
        square = isinstance(node.right, ast.Constant) and node.right.value == 2
        if square and isinstance(node.left, ast.Name):
            return ast.BinOp(node.left, ast.Mult(), node.left)
        return ast.Call(ast.Name("pow"), [node.left, node.right], [])

    def visit_Constant(self, node: ast.Constant) -> ast.AST:
        return ast.Constant(float(node.value))  # type: ignore[arg-type]

    def visit_Name(self, node: ast.Name) -> ast.AST:
        return ast.Name({"max": "fmax", "min": "fmin"}.get(node.id, node.id))


def _to_c(formula: str) -> str:
    return ast.unparse(ast.fix_missing_locations(_Powers().visit(ast.parse(formula))))


RELAY = Problem(
    name="relay",
    title="4-state relay with feedback",
    equations={
        "a": "gain_a * (1 - a) / (1 + (max(d, 1e-12) / half) ** hill) - loss_a * a",
        "b": "gain_b * a * (1 - b) - loss_b * b",
        "c": "gain_c * max(b, 1e-12) ** steep"
        " / (level ** steep + max(b, 1e-12) ** steep) * (1 - c) - loss_c * c",
        "d": "gain_d * c - loss_d * d",
    },
    parameters={
        "gain_a": (0.1, 3.0),
        "gain_b": (0.1, 3.0),
        "gain_c": (0.1, 3.0),
        "gain_d": (0.1, 3.0),
        "loss_a": (0.05, 1.0),
        "loss_b": (0.05, 1.0),
        "loss_c": (0.05, 1.0),
        "loss_d": (0.05, 1.0),
        "half": (0.1, 1.0),
        "hill": (1.0, 4.0),
        "level": (0.1, 1.0),
        "steep": (1.0, 4.0),
    },
    start=(0.0, 0.0, 0.0, 0.0),
    times=np.linspace(0.0, 60.0, 13)[1:],
    small=1e-3,
    stiff=False,
)

ROBERTSON = Problem(
    name="robertson",
    title="Robertson's kinetics",
    equations={
        "x": "-k1 * x + k3 * y * z",
        "y": "k1 * x - k3 * y * z - k2 * y ** 2",
        "z": "k2 * y ** 2",
    },
    parameters={"k1": (0.02, 0.08), "k2": (1.5e7, 6e7), "k3": (5e3, 2e4)},
    start=(1.0, 0.0, 0.0),
    times=10.0 ** np.arange(-1.0, 6.0),
    small=1e-6,
    stiff=True,
)

HIRES = Problem(
    name="hires",
    title="HIRES, high irradiance response",
    equations={
        "y1": "-k1 * y1 + 0.43 * y2 + 8.32 * y3 + 0.0007",
        "y2": "k1 * y1 - 8.75 * y2",
        "y3": "-10.03 * y3 + 0.43 * y4 + 0.035 * y5",
        "y4": "8.32 * y2 + k1 * y3 - 1.12 * y4",
        "y5": "-1.745 * y5 + 0.43 * y6 + 0.43 * y7",
        "y6": "-k2 * y6 * y8 + 0.69 * y4 + k1 * y5 - 0.43 * y6 + 0.69 * y7",
        "y7": "k2 * y6 * y8 - 1.81 * y7",
        "y8": "-k2 * y6 * y8 + 1.81 * y7",
    },
    parameters={"k1": (1.4, 2.1), "k2": (230.0, 340.0)},
    start=(1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0057),
    times=np.array([1.0, 5.0, 20.0, 80.0, 200.0, 321.8122]),
    small=1e-4,
    stiff=True,
)

OSCILLATOR = Problem(
    name="oscillator",
    title="6-state oscillator of three repressors",
    equations={
        "m1": "rate / (1 + max(p3, 1e-12) ** hill) + leak - m1",
        "m2": "rate / (1 + max(p1, 1e-12) ** hill) + leak - m2",
        "m3": "rate / (1 + max(p2, 1e-12) ** hill) + leak - m3",
        "p1": "turnover * (m1 - p1)",
        "p2": "turnover * (m2 - p2)",
        "p3": "turnover * (m3 - p3)",
    },
    parameters={
        "rate": (30.0, 200.0),
        "leak": (0.01, 0.1),
        "hill": (2.0, 3.0),
        "turnover": (0.3, 3.0),
    },
    start=(1.0, 0.5, 0.0, 0.0, 0.0, 0.0),
    times=np.linspace(0.0, 60.0, 13)[1:],
    small=1e-3,
    stiff=False,
)

PROBLEMS = (RELAY, ROBERTSON, HIRES, OSCILLATOR)
