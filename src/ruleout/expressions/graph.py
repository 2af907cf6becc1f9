"""Expressions as immutable, interned graphs: the one language of rates, readouts and starts.

Equal expressions are the same object, so shared subexpressions are found by identity and
simplification happens once, when a node is made. Nothing here is ever evaluated as Python code.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from typing import Any, Final
from weakref import WeakValueDictionary

import numpy as np

FUNCTIONS: Final[Mapping[str, Callable[..., Any]]] = {
    "neg": np.negative,
    "exp": np.exp,
    "log": np.log,
    "sqrt": np.sqrt,
    "sin": np.sin,
    "cos": np.cos,
    "tanh": np.tanh,
    "add": np.add,
    "sub": np.subtract,
    "mul": np.multiply,
    "div": np.divide,
    "pow": np.power,
    "min": np.minimum,
    "max": np.maximum,
    "select": lambda c, a, b: np.where(np.greater(c, 0.0), a, b),
}
"""Every operation and its meaning on arrays; ``select(c, a, b)`` is a where c > 0, else b."""

_interned: WeakValueDictionary[tuple[Any, ...], Expr] = WeakValueDictionary()


class Expr:
    """One node of an expression graph: a constant, a symbol or an operation on other nodes.

    Made by :func:`const`, :func:`sym`, :func:`apply` and the operators; compared by identity.

    Attributes
    ----------
    op : str
        ``"const"``, ``"sym"`` or a key of ``FUNCTIONS``.
    args : tuple of Expr
    value : float
        Of a constant, else NaN.
    name : str
        Of a symbol, else empty.
    """

    __slots__ = ("__weakref__", "args", "name", "op", "value")
    op: str
    args: tuple[Expr, ...]
    value: float
    name: str

    def __add__(self, other: Expr | float) -> Expr:
        return apply("add", self, as_expr(other))

    def __radd__(self, other: float) -> Expr:
        return apply("add", as_expr(other), self)

    def __sub__(self, other: Expr | float) -> Expr:
        return apply("sub", self, as_expr(other))

    def __rsub__(self, other: float) -> Expr:
        return apply("sub", as_expr(other), self)

    def __mul__(self, other: Expr | float) -> Expr:
        return apply("mul", self, as_expr(other))

    def __rmul__(self, other: float) -> Expr:
        return apply("mul", as_expr(other), self)

    def __truediv__(self, other: Expr | float) -> Expr:
        return apply("div", self, as_expr(other))

    def __rtruediv__(self, other: float) -> Expr:
        return apply("div", as_expr(other), self)

    def __pow__(self, other: Expr | float) -> Expr:
        return apply("pow", self, as_expr(other))

    def __neg__(self) -> Expr:
        return apply("neg", self)

    def __reduce__(self) -> tuple[Any, ...]:
        if self.op == "const":
            return const, (self.value,)
        if self.op == "sym":
            return sym, (self.name,)
        return _make, (self.op, *self.args)

    def __repr__(self) -> str:
        if self.op == "const":
            return f"{self.value:g}"
        if self.op == "sym":
            return self.name
        return f"{self.op}({', '.join(map(repr, self.args))})"


def _intern(op: str, args: tuple[Expr, ...], value: float, name: str) -> Expr:
    # A sign bit in the key keeps 0.0 and -0.0 apart; NaN never gets here.
    key = (op, args, value, math.copysign(1.0, value), name)
    found = _interned.get(key)
    if found is None:
        found = object.__new__(Expr)
        found.op, found.args, found.value, found.name = op, args, value, name
        _interned[key] = found
    return found


def _make(op: str, *args: Expr) -> Expr:
    return _intern(op, args, 0.0, "")


def const(value: float) -> Expr:
    """Return the constant ``value``; ValueError if it is NaN."""
    if math.isnan(value):
        raise ValueError("a constant cannot be NaN")
    return _intern("const", (), float(value), "")


def sym(name: str) -> Expr:
    """Return the symbol called ``name`` (a state, a parameter, an input or ``time``)."""
    return _intern("sym", (), 0.0, name)


def as_expr(value: Expr | float) -> Expr:
    """Return ``value`` itself if it is an expression, else the constant."""
    return value if isinstance(value, Expr) else const(value)


ZERO: Final = const(0.0)
ONE: Final = const(1.0)


def apply(op: str, *args: Expr) -> Expr:
    """Return ``op`` of ``args``, folding constants and dropping neutral elements.

    Operations on constants whose result is not finite are left standing, so that a reader can
    find and refuse them.
    """
    if all(a.op == "const" for a in args):
        with np.errstate(all="ignore"):
            value = float(FUNCTIONS[op](*(a.value for a in args)))
        if math.isfinite(value):
            return const(value)
        return _make(op, *args)
    simpler = _SIMPLIFY.get(op)
    return (simpler(*args) if simpler else None) or _make(op, *args)


def _simplify_add(a: Expr, b: Expr) -> Expr | None:
    if a is ZERO:
        return b
    if b is ZERO:
        return a
    return a - b.args[0] if b.op == "neg" else None


def _simplify_sub(a: Expr, b: Expr) -> Expr | None:
    if b is ZERO:
        return a
    if a is ZERO:
        return -b
    if a is b:
        return ZERO
    return a + b.args[0] if b.op == "neg" else None


def _simplify_mul(a: Expr, b: Expr) -> Expr | None:
    if a is ZERO or b is ZERO:
        return ZERO
    if a is ONE:
        return b
    if b is ONE:
        return a
    if a.op == "neg":
        return -(a.args[0] * b)
    if b.op == "neg":
        return -(a * b.args[0])
    return None


def _simplify_div(a: Expr, b: Expr) -> Expr | None:
    if b is ONE:
        return a
    if a is ZERO and b is not ZERO:
        return ZERO
    return -(a.args[0] / b) if a.op == "neg" else None


def _simplify_pow(a: Expr, b: Expr) -> Expr | None:
    if b is ONE:
        return a
    if b is ZERO or a is ONE:
        return ONE
    if b.op == "const" and b.value == 2.0:
        return a * a
    return None


def _simplify_neg(a: Expr) -> Expr | None:
    return a.args[0] if a.op == "neg" else None


def _simplify_select(c: Expr, a: Expr, b: Expr) -> Expr | None:
    if a is b:
        return a
    if c.op == "const":
        return a if c.value > 0.0 else b
    return None


_SIMPLIFY: Final[Mapping[str, Callable[..., Expr | None]]] = {
    "add": _simplify_add,
    "sub": _simplify_sub,
    "mul": _simplify_mul,
    "div": _simplify_div,
    "pow": _simplify_pow,
    "neg": _simplify_neg,
    "select": _simplify_select,
}


def ordered(roots: Iterable[Expr]) -> list[Expr]:
    """Return every node below ``roots`` once, arguments before their users."""
    done: dict[Expr, None] = {}
    stack = [(root, False) for root in reversed(list(roots))]
    while stack:
        node, expanded = stack.pop()
        if node in done:
            continue
        if expanded:
            done[node] = None
        else:
            stack.append((node, True))
            stack.extend((arg, False) for arg in reversed(node.args))
    return list(done)


def symbols(*roots: Expr) -> frozenset[str]:
    """Return the names of all symbols below ``roots``."""
    return frozenset(node.name for node in ordered(roots) if node.op == "sym")


def substitute(roots: Iterable[Expr], values: Mapping[str, Expr]) -> tuple[Expr, ...]:
    """Return ``roots`` with the named symbols replaced, simplified again."""
    roots = tuple(roots)
    new: dict[Expr, Expr] = {}
    for node in ordered(roots):
        if node.op == "sym":
            new[node] = values.get(node.name, node)
        elif node.op == "const":
            new[node] = node
        else:
            new[node] = apply(node.op, *(new[a] for a in node.args))
    return tuple(new[root] for root in roots)


def evaluate(roots: Iterable[Expr], values: Mapping[str, Any]) -> list[Any]:
    """Return the values of ``roots`` on arrays.

    Parameters
    ----------
    roots : iterable of Expr
    values : mapping of str to array_like
        One entry for every symbol; arrays broadcast against each other.
    """
    roots = tuple(roots)
    known: dict[Expr, Any] = {}
    with np.errstate(all="ignore"):
        for node in ordered(roots):
            if node.op == "const":
                known[node] = node.value
            elif node.op == "sym":
                known[node] = values[node.name]
            else:
                known[node] = FUNCTIONS[node.op](*(known[a] for a in node.args))
    return [known[root] for root in roots]


def _derivative(node: Expr, d: Mapping[Expr, Expr]) -> Expr:
    args = node.args
    a = args[0]
    da = d[a]
    match node.op:
        case "neg":
            return -da
        case "exp":
            return node * da
        case "log":
            return da / a
        case "sqrt":
            return da / (2.0 * node)
        case "sin":
            return apply("cos", a) * da
        case "cos":
            return -(apply("sin", a) * da)
        case "tanh":
            return (1.0 - node * node) * da
    b = args[1]
    db = d[b]
    match node.op:
        case "add":
            return da + db
        case "sub":
            return da - db
        case "mul":
            return da * b + a * db
        case "div":
            return (da - node * db) / b
        case "pow":
            by_base = b * apply("pow", a, b - 1.0) * da
            return by_base if db is ZERO else by_base + node * apply("log", a) * db
        case "min":
            return apply("select", b - a, da, db)
        case "max":
            return apply("select", a - b, da, db)
    return apply("select", a, db, d[args[2]])


def differentiate(roots: Iterable[Expr], by: str) -> tuple[Expr, ...]:
    """Return the derivatives of ``roots`` with respect to the symbol ``by``.

    At the kink of ``min`` and ``max`` the second argument's derivative is taken.
    """
    roots = tuple(roots)
    d: dict[Expr, Expr] = {}
    for node in ordered(roots):
        if node.op == "sym":
            d[node] = ONE if node.name == by else ZERO
        elif node.op == "const" or all(d[a] is ZERO for a in node.args):
            d[node] = ZERO
        else:
            d[node] = _derivative(node, d)
    return tuple(d[root] for root in roots)
