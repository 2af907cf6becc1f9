"""From expression graphs to straight-line code: slopes, Jacobian, factors of the step matrix.

What depends on parameters alone is computed once per segment by ``prepare`` and read from
memory afterwards; divisions by it become products.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from ruleout.expressions import ONE, ZERO, Expr, apply, ordered
from ruleout.kernel.assembly import Assembly, Value
from ruleout.kernel.elementary import Elementary
from ruleout.kernel.lowering import Lowered
from ruleout.kernel.types import Array

_LARGEST_UNROLLED_POWER = 32
_CALLS = frozenset({"exp", "log", "pow", "sin", "cos", "tanh"})
_MOST_INLINED = 8
"""Calls up to which the right-hand side, the code run most, has their bodies in line."""


@dataclass(frozen=True, slots=True)
class Graph:
    """Right-hand side and Jacobian, parted into what moves and what does not.

    Attributes
    ----------
    rhs : tuple of Expr, length N
    jacobian : mapping of (row, column) to Expr
        Entries that are not identically zero.
    prepared : tuple of Expr
        Parameter-only expressions read by the others, in their order in memory.
    moving : frozenset of Expr
        Nodes that depend on a state.
    """

    rhs: tuple[Expr, ...]
    jacobian: Mapping[tuple[int, int], Expr]
    prepared: tuple[Expr, ...]
    moving: frozenset[Expr]


def part(lowered: Lowered) -> Graph:
    """Return the graph of ``lowered``."""
    n = len(lowered.states)
    entries = {
        (i, j): lowered.jacobian[i][j]
        for i in range(n)
        for j in range(n)
        if lowered.jacobian[i][j] is not ZERO
    }
    roots = _hoisted([*lowered.rhs, *entries.values()], frozenset(lowered.states))
    rhs, jacobian = roots[:n], dict(zip(entries, roots[n:], strict=True))
    moving = _moving(roots, frozenset(lowered.states))
    prepared: dict[Expr, None] = {}
    for node in ordered(roots):
        if node in moving:
            prepared.update(dict.fromkeys(a for a in node.args if a not in moving))
    prepared.update(dict.fromkeys(root for root in roots if root not in moving))
    kept = tuple(node for node in prepared if node.op != "const")
    return Graph(tuple(rhs), jacobian, kept, moving)


def _moving(roots: Iterable[Expr], states: frozenset[str]) -> frozenset[Expr]:
    moving: set[Expr] = set()
    for node in ordered(roots):
        if node.name in states or any(a in moving for a in node.args):
            moving.add(node)
    return frozenset(moving)


def _hoisted(roots: Sequence[Expr], states: frozenset[str]) -> list[Expr]:
    """Return ``roots`` with divisions by what does not move turned into products."""
    moving = _moving(roots, states)
    new: dict[Expr, Expr] = {}
    for node in ordered(roots):
        if not node.args:
            new[node] = node
            continue
        args = [new[a] for a in node.args]
        if node.op == "div" and node in moving and node.args[1] not in moving:
            new[node] = args[0] * apply("div", ONE, args[1])
        elif node.op == "pow" and node in moving and node.args[1] not in moving:
            new[node] = _power_of_product(*args)
        else:
            new[node] = apply(node.op, *args)
    return [new[root] for root in roots]


def _power_of_product(base: Expr, exponent: Expr) -> Expr:
    """Return ``base ** exponent``, as a product of powers if a factor of the base is positive.

    In a Hill term (s / half) ** h the power of the half is then computed once per segment, and
    the logarithm of the source is shared by all terms that have it.
    """
    if base.op == "mul" and exponent.op != "const":
        for a, b in (base.args, base.args[::-1]):
            if _is_positive(a):
                return apply("pow", a, exponent) * apply("pow", b, exponent)
    return apply("pow", base, exponent)


class Emission:
    """Emits the functions of one system that work on vectors in memory.

    All of them read the states ``y`` (N vectors) and what ``prepare`` left in ``c``.

    Parameters
    ----------
    assembly : Assembly
    elementary : Elementary
    lowered : Lowered
    totals, pivots
        Conserved totals, as from :func:`~ruleout.kernel.conservation.conserved_totals`.
    """

    def __init__(
        self,
        assembly: Assembly,
        elementary: Elementary,
        lowered: Lowered,
        totals: Array,
        pivots: tuple[int, ...],
    ) -> None:
        self._assembly = assembly
        self._elementary = elementary
        self._lowered = lowered
        self._graph = part(lowered)
        self._slot = {node: i for i, node in enumerate(self._graph.prepared)}
        self._totals, self._pivots = totals, pivots
        self.n = len(lowered.states)
        self.prepared = max(len(self._slot), 1)
        self.factors = 0

    def write(self) -> None:
        """Write all functions of the system."""
        self._write_prepare()
        self._write_slopes()
        self._write_factor("factor", within_totals=False)
        if self._pivots:
            self._write_factor("newton_factor", within_totals=True)
        self._write_residual()

    def _write_prepare(self) -> None:
        """Write ``prepare(q, c)``: the parameter-only part."""
        with self._assembly.function("export_prepare", ["ptr %q", "ptr %c"]):
            known: dict[Expr, Value] = {}
            used = {n for n in ordered(self._graph.prepared) if n.op == "sym"}
            for i, name in enumerate(self._lowered.parameters):
                for node in used:
                    if node.name == name:
                        known[node] = self._assembly.load("%q", i)
            for node, value in zip(
                self._graph.prepared, self._values(self._graph.prepared, known), strict=True
            ):
                self._assembly.store(value, "%c", self._slot[node])

    def _write_slopes(self) -> None:
        """Write ``slopes(y, c, f)``: the right-hand side."""
        with self._assembly.function("export_slopes", ["ptr %y", "ptr %c", "ptr %f"]):
            rhs = self._graph.rhs
            calls = sum(node.op in _CALLS for node in ordered(rhs) if node in self._graph.moving)
            self._elementary.inline = calls <= _MOST_INLINED
            values = self._values(rhs, self._inputs(rhs))
            self._elementary.inline = False
            for i, value in enumerate(values):
                self._assembly.store(value, "%f", i)

    def _write_factor(self, name: str, *, within_totals: bool) -> None:
        """Write ``name(y, c, s, m)``: factors of the matrix s I - J into m.

        ``s`` is one vector. With ``within_totals`` the row of each conserved total's pivot is
        replaced by the total's weights. Writes ``name_solve(m, b, x)`` too.
        """
        a = self._assembly
        entries = dict(self._graph.jacobian)
        kept = set(self._pivots) if within_totals else set()
        entries = {at: e for at, e in entries.items() if at[0] not in kept}
        matrix: dict[tuple[int, int], Value] = {}
        with a.function(f"export_{name}", ["ptr %y", "ptr %c", "ptr %s", "ptr %m"]):
            values = self._values(entries.values(), self._inputs(entries.values()))
            jacobian = dict(zip(entries, values, strict=True))
            inertia = a.load("%s", 0)
            for i in range(self.n):
                if i not in kept:
                    own = jacobian.pop((i, i), None)
                    matrix[i, i] = inertia if own is None else a.sub(inertia, own)
            matrix |= {at: a.neg(value) for at, value in jacobian.items()}
            if within_totals:
                for row, pivot in zip(self._totals, self._pivots, strict=True):
                    for j, weight in enumerate(row):
                        if weight:
                            matrix[pivot, j] = a.number(float(weight))
            order = _elimination_order(set(matrix), self.n)
            lower, upper = self._eliminate(matrix, order)
            memory = {at: slot for slot, at in enumerate([*lower, *upper])}
            for at, value in (lower | upper).items():
                a.store(value, "%m", memory[at])
        self.factors = max(self.factors, len(memory))
        self._write_solve(f"{name}_solve", order, memory)

    def _eliminate(
        self, matrix: dict[tuple[int, int], Value], order: Sequence[int]
    ) -> tuple[dict[tuple[int, int], Value], dict[tuple[int, int], Value]]:
        """Return the factors L and U; the diagonal of U is inverted."""
        a = self._assembly
        lower: dict[tuple[int, int], Value] = {}
        upper: dict[tuple[int, int], Value] = {}
        for step, k in enumerate(order):
            rest = order[step + 1 :]
            inverse = a.div(a.number(1.0), matrix[k, k])
            upper[k, k] = inverse
            right = [j for j in rest if (k, j) in matrix]
            for j in right:
                upper[k, j] = matrix[k, j]
            for i in rest:
                if (i, k) not in matrix:
                    continue
                multiple = a.mul(matrix[i, k], inverse)
                lower[i, k] = multiple
                for j in right:
                    product = a.mul(multiple, matrix[k, j])
                    old = matrix.get((i, j))
                    matrix[i, j] = a.neg(product) if old is None else a.sub(old, product)
        return lower, upper

    def _write_residual(self) -> None:
        """Write ``residual(y, start, c, f)``: slopes; in pivot rows the gap to start's total."""
        a = self._assembly
        with a.function("export_residual", ["ptr %y", "ptr %start", "ptr %c", "ptr %f"]):
            a.call("@slopes", "%y", "%c", "%f")
            for row, pivot in zip(self._totals, self._pivots, strict=True):
                gap = a.number(0.0)
                for j, weight in enumerate(row):
                    if weight:
                        difference = a.sub(a.load("%start", j), a.load("%y", j))
                        gap = a.add(gap, a.mul(a.number(float(weight)), difference))
                a.store(gap, "%f", pivot)

    def _write_solve(
        self, name: str, order: Sequence[int], memory: Mapping[tuple[int, int], int]
    ) -> None:
        a = self._assembly
        place = {k: step for step, k in enumerate(order)}
        with a.function(f"export_{name}", ["ptr %m", "ptr %b", "ptr %x"]):
            x: dict[int, Value] = {}
            for i in order:
                value = a.load("%b", i)
                for j in order[: place[i]]:
                    if (i, j) in memory:
                        value = a.sub(value, a.mul(a.load("%m", memory[i, j]), x[j]))
                x[i] = value
            for i in reversed(order):
                value = x[i]
                for j in order[place[i] + 1 :]:
                    if (i, j) in memory:
                        value = a.sub(value, a.mul(a.load("%m", memory[i, j]), x[j]))
                x[i] = a.mul(value, a.load("%m", memory[i, i]))
                a.store(x[i], "%x", i)

    def _inputs(self, roots: Iterable[Expr]) -> dict[Expr, Value]:
        """Load the states and prepared values that ``roots`` need."""
        known: dict[Expr, Value] = {}
        place = {name: i for i, name in enumerate(self._lowered.states)}
        stack, seen = list(roots), set[Expr]()
        while stack:
            node = stack.pop()
            if node in seen:
                continue
            seen.add(node)
            if node in self._slot:
                known[node] = self._assembly.load("%c", self._slot[node])
            elif node.op == "sym":
                known[node] = self._assembly.load("%y", place[node.name])
            else:
                stack.extend(node.args)
        return known

    def _values(self, roots: Iterable[Expr], known: dict[Expr, Value]) -> list[Value]:
        """Emit ``roots``, sharing subexpressions; ``known`` nodes are there already."""
        roots = list(roots)
        writer = _Writer(self._assembly, self._elementary, known)
        stack = [(root, False) for root in reversed(roots)]
        while stack:
            node, ready = stack.pop()
            if node in known:
                continue
            if ready or not node.args:
                known[node] = writer.write(node)
            else:
                stack.append((node, True))
                stack.extend((arg, False) for arg in reversed(node.args))
        return [known[root] for root in roots]


class _Writer:
    """Emits single operations."""

    def __init__(
        self, assembly: Assembly, elementary: Elementary, known: Mapping[Expr, Value]
    ) -> None:
        self._assembly, self._elementary, self._known = assembly, elementary, known
        self._logs: dict[Expr, Value] = {}

    def write(self, node: Expr) -> Value:
        a = self._assembly
        if node.op == "const":
            return a.number(node.value)
        args = [self._known[arg] for arg in node.args]
        match node.op:
            case "add" | "sub" | "mul" | "div" | "neg":
                result: Value = getattr(a, node.op)(*args)
                return result
            case "sqrt":
                return a.intrinsic("sqrt", args[0])
            case "log":
                return self._log(node.args[0])
            case "min":
                return self._extreme(a.minimum, node.args)
            case "max":
                return self._extreme(a.maximum, node.args)
            case "select":
                return a.select(a.compare("ogt", args[0], a.number(0.0)), args[1], args[2])
            case "pow":
                return self._power(*node.args)
        return self._elementary.call(node.op, *args)

    def _extreme(self, choose: object, args: tuple[Expr, ...]) -> Value:
        assert callable(choose)
        # The first argument passes its NaN on, so a constant comes second.
        first, second = args if args[1].op == "const" else (args[1], args[0])
        result: Value = choose(self._known[first], self._known[second])
        return result

    def _log(self, x: Expr) -> Value:
        if x not in self._logs:
            name = "log_positive" if _is_positive(x) else "log"
            self._logs[x] = self._elementary.call(name, self._known[x])
        return self._logs[x]

    def _power(self, base: Expr, exponent: Expr) -> Value:
        x, y = self._known[base], self._known[exponent]
        if exponent.op == "const":
            whole = round(exponent.value * 2.0) / 2.0
            if whole == exponent.value and abs(whole) <= _LARGEST_UNROLLED_POWER:
                result = self._elementary.integer_power(x, int(abs(whole)))
                if whole % 1.0:
                    result = self._assembly.mul(result, self._assembly.intrinsic("sqrt", x))
                one = self._assembly.number(1.0)
                return result if whole > 0 else self._assembly.div(one, result)
        if _is_positive(base):
            return self._elementary.power(self._log(base), y)
        return self._elementary.general_power(x, y)


def _is_positive(node: Expr) -> bool:
    if node.op == "const":
        return node.value > 0.0
    return node.op == "exp" or (node.op == "max" and any(_is_positive(a) for a in node.args))


def _elimination_order(pattern: set[tuple[int, int]], n: int) -> list[int]:
    """Return an order of diagonal pivots with little fill-in (Markowitz's rule)."""
    pattern = set(pattern)
    left = list(range(n))
    order: list[int] = []
    while left:
        fill = {
            k: (sum((i, k) in pattern for i in left) - 1)
            * (sum((k, j) in pattern for j in left) - 1)
            for k in left
        }
        pivot = min(fill, key=fill.__getitem__)
        left.remove(pivot)
        order.append(pivot)
        rows = [i for i in left if (i, pivot) in pattern]
        columns = [j for j in left if (pivot, j) in pattern]
        pattern |= {(i, j) for i in rows for j in columns}
    return order
