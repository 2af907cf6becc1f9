"""From a sign matrix to equations.

Wirings with edges at the same places share one system in which the signs are parameters, so that
a family of thousands compiles in some hundred pieces. :func:`wiring` gives the same equations in
the words of a mechanism; the tests hold the two against each other.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from ruleout.equations.laws import Laws
from ruleout.expressions import ZERO, Expr, const, sym, symbols
from ruleout.kernel import Program, System, compile_system
from ruleout.mechanism.types import Edge, Node, NodeKind
from ruleout.survey.behaviours import Subject
from ruleout.survey.types import Family, Signs
from ruleout.variants import Wiring

Array = NDArray[np.float64]
CONSTANT = "constant"
_LAWS = Laws()


@dataclass(frozen=True, slots=True)
class Term:
    """An edge as it enters an equation.

    Attributes
    ----------
    name : str
        Prefix of its parameters in the shared system.
    level : Expr
        Amount of its source.
    sign : Expr
        1, -1, or 0 for no effect.
    """

    name: str
    level: Expr
    sign: Expr


def opposing_sign(family: Family, signs: Signs, target: int) -> int:
    """Return the side on which a constant enzyme opposes: 1 raises, -1 lowers, 0 for none."""
    present = {int(s) for s in signs[:, target] if s}
    present |= {s for node, s in family.drives if node == target}
    return -present.pop() if len(present) == 1 else 0


def _terms(family: Family, pattern: NDArray[np.bool_], target: int) -> Iterator[Term]:
    node = family.nodes[target]
    regulated = False
    for i in np.flatnonzero(pattern[:, target]):
        name = family.edge_name(int(i), target)
        regulated = True
        yield Term(name, sym(family.nodes[i]), sym(f"sign:{name}"))
    for at, sign in family.drives:
        if at == target:
            regulated = True
            yield Term(f"{family.source}_on_{node}", sym(f"input:{family.source}"), const(sign))
    if family.style == "enzyme":
        level = const(family.constant)
        if regulated:
            yield Term(f"oppose_{node}", level, sym(f"sign:oppose_{node}"))
        else:
            yield Term(f"raise_{node}", level, const(1))
            yield Term(f"lower_{node}", level, const(-1))


def _enzyme(node: str, terms: list[Term]) -> Expr:
    x = sym(node)
    change = ZERO
    for term in terms:
        # The side acted on: 1 - x where the edge stimulates, x where it inhibits.
        side = 0.5 * (1.0 + term.sign) - term.sign * x
        rate = (term.sign * sym(f"{term.name}.strength")) * term.level
        change = change + rate * _LAWS.saturating(side, sym(f"{term.name}.target_half"))
    return change


def _gene(node: str, terms: list[Term]) -> Expr:
    gain: Expr = sym(f"{node}.basal")
    divisors: list[Expr] = []
    for term in terms:
        ratio = _LAWS.ratio(term.level, sym(f"{term.name}.half"), sym(f"{term.name}.hill"))
        on, off = 0.5 * (1.0 + term.sign), 0.5 * (1.0 - term.sign)
        gain = gain + (on * sym(f"{term.name}.strength")) * (ratio / (1.0 + ratio))
        divisors.append(1.0 + off * ratio)
    for divisor in divisors:
        gain = gain / divisor
    return gain - sym(f"{node}.loss_rate") * sym(node)


def shared_system(family: Family, pattern: NDArray[np.bool_]) -> System:
    """Return the equations of all wirings with edges where ``pattern`` (n, n) says.

    Its parameters are those of the edges and nodes and, for each edge, ``sign:EDGE``.
    """
    write = _enzyme if family.style == "enzyme" else _gene
    rhs = tuple(
        write(node, list(_terms(family, pattern, j))) for j, node in enumerate(family.nodes)
    )
    names = symbols(*rhs) - set(family.nodes)
    return System(states=family.nodes, parameters=tuple(sorted(names)), rhs=rhs)


class Member:
    """One wiring of a family, ready to be scored.

    Parameters
    ----------
    family : Family
    signs : (n, n) int8 array
    """

    def __init__(self, family: Family, signs: Signs) -> None:
        self.family, self.signs = family, signs
        self._system = shared_system(family, signs != 0)
        self._aliases = self._name_opposing()

    @cached_property
    def program(self) -> Program:
        """The compiled system, shared by all wirings with edges at the same places."""
        return compile_system(self._system)

    @cached_property
    def parameters(self) -> tuple[str, ...]:
        """Names of the parameters that this wiring has, in a fixed order."""
        return tuple(name for name in map(self._own_name, self._system.parameters) if name)

    def subject(self, values: Array) -> Subject:
        """Return the wiring with parameter sets ``values`` (M, len(parameters))."""
        family = self.family
        columns = self._system.parameters
        p = np.ones((len(values), len(columns)))
        known = {name: values[:, k] for k, name in enumerate(self.parameters)}
        for k, name in enumerate(columns):
            own = self._own_name(name)
            if own:
                p[:, k] = known[own]
            elif name.startswith("sign:"):
                p[:, k] = self._sign(name.removeprefix("sign:"))
        place = {name: k for k, name in enumerate(columns)}
        output = family.nodes[family.output]
        return Subject(
            program=self.program,
            p=p,
            start=np.array(family.starts),
            ceiling=self._ceiling(known, len(values)),
            output=family.output,
            source=place.get(f"input:{family.source}"),
            loss=place.get(f"{output}.loss_rate"),
        )

    def _name_opposing(self) -> Mapping[str, str]:
        words = {1: "raise", -1: "lower", 0: ""}
        found = {}
        for j, node in enumerate(self.family.nodes):
            word = words[opposing_sign(self.family, self.signs, j)]
            found[f"oppose_{node}"] = f"{word}_{node}" if word else ""
        return found

    def _own_name(self, name: str) -> str:
        """Return the name of a parameter in this wiring, empty if it has no such parameter."""
        if ":" in name:
            return ""
        owner, _, part = name.rpartition(".")
        if owner in self._aliases:
            alias = self._aliases[owner]
            return f"{alias}.{part}" if alias else ""
        if part == "strength" and self.family.style == "gene" and self._sign(owner) < 0:
            return ""
        return name

    def _sign(self, owner: str) -> int:
        family = self.family
        if owner.startswith("oppose_"):
            return opposing_sign(family, self.signs, family.nodes.index(owner[len("oppose_") :]))
        for i, j in np.argwhere(self.signs):
            if family.edge_name(int(i), int(j)) == owner:
                return int(self.signs[i, j])
        return next(s for j, s in family.drives if owner == f"{family.source}_on_{family.nodes[j]}")

    def _ceiling(self, known: Mapping[str, Array], count: int) -> Array:
        family = self.family
        ceiling = np.ones((count, len(family.nodes)))
        if family.style == "gene":
            for j, node in enumerate(family.nodes):
                most = known[f"{node}.basal"] + sum(
                    (v for name, v in known.items() if name.endswith(f"_on_{node}.strength")),
                    start=np.zeros(count),
                )
                ceiling[:, j] = most / known[f"{node}.loss_rate"]
        return ceiling


def wiring(family: Family, signs: Signs) -> Wiring:
    """Return a wiring in the words of a mechanism, constant enzymes as an input ``constant``."""
    kind: NodeKind = "switched" if family.style == "enzyme" else "expressed"
    nodes: dict[str, Node] = {}
    if family.source:
        nodes[family.source] = Node(family.source, "input")
    if family.style == "enzyme":
        nodes[CONSTANT] = Node(CONSTANT, "input", resting=family.constant)
    nodes |= {n: Node(n, kind, start=s) for n, s in zip(family.nodes, family.starts, strict=True)}
    edges: dict[str, Edge] = {}

    def add(name: str, source: str, target: str, sign: int) -> None:
        enzyme = family.style == "enzyme"
        edges[name] = Edge(
            name=name,
            sources=((source, 1.0),),
            targets=((target, 1.0),),
            effects=("stimulates" if sign > 0 else "inhibits",),
            laws=("linear",) if enzyme else ("hill",),
            on="loss" if enzyme and sign < 0 else "gain",
            acts_on="saturating" if enzyme else None,
        )

    for j, sign in family.drives:
        target = family.nodes[j]
        add(f"{family.source}_on_{target}", family.source, target, sign)
    for i, j in np.argwhere(signs):
        add(family.edge_name(i, j), family.nodes[i], family.nodes[j], int(signs[i, j]))
    if family.style == "enzyme":
        driven = {j for j, _ in family.drives}
        for j, node in enumerate(family.nodes):
            bare = not signs[:, j].any() and j not in driven
            opposing = opposing_sign(family, signs, j)
            if bare or opposing > 0:
                add(f"raise_{node}", CONSTANT, node, 1)
            if bare or opposing < 0:
                add(f"lower_{node}", CONSTANT, node, -1)
    return Wiring(nodes, edges)
