"""Units that nothing fixes: nodes whose amounts can be rescaled without touching a readout.

Every symbol gets an unknown exponent: by which power of the scale it changes when units are
rescaled. Sums and laws demand equal exponents, absolute numbers demand exponent zero, and what the
linear system leaves open are the rescalings that no data can see.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import null_space

from ruleout.equations.laws import TINY
from ruleout.equations.model import build
from ruleout.equations.starts import node_start
from ruleout.equations.types import Model
from ruleout.experiments.types import Experiments
from ruleout.expressions import ZERO, Expr, ordered, substitute
from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Mechanism, Prior, Tied
from ruleout.variants import VariantSet

Form = Mapping[str, float]
"""A linear form in the unknown exponents."""
Array = NDArray[np.float64]
NEGLIGIBLE = 1e-9
"""Exponents below this are rounding; true ones are ratios of small numbers."""


def _combine(a: Form, b: Form, times: float) -> Form:
    names = dict.fromkeys((*a, *b))
    form = {name: a.get(name, 0.0) + times * b.get(name, 0.0) for name in names}
    return {name: value for name, value in form.items() if value}


class Scaling:
    """The linear system of exponents of one model.

    Parameters
    ----------
    scalable : iterable of str
        Nodes whose unit may change.
    nodes : iterable of str
        All nodes; the others, like time, have exponent zero.
    """

    def __init__(self, scalable: Iterable[str], nodes: Iterable[str]) -> None:
        self.scalable = tuple(scalable)
        self.absolute = frozenset(nodes).difference(self.scalable) | {"time"}
        self.rows: dict[frozenset[tuple[str, float]], Form] = {}
        self._open: dict[str, Array] | None = None

    def demand(self, form: Form) -> None:
        """Add the equation ``form = 0``."""
        if form:
            self.rows.setdefault(frozenset(form.items()), form)
            self._open = None

    def equal(self, a: Form | None, b: Form | None) -> None:
        """Demand equal exponents; None is zero, which fits any."""
        if a is not None and b is not None:
            self.demand(_combine(a, b, -1.0))

    def exponent(self, root: Expr) -> Form | None:
        """Return the exponent of an expression, adding what its parts demand of each other."""
        known: dict[Expr, Form | None] = {}
        for node in ordered([root]):
            known[node] = self._of(node, [known[arg] for arg in node.args])
        return known[root]

    def _of(self, node: Expr, args: Sequence[Form | None]) -> Form | None:
        match node.op:
            case "const":
                return None if node is ZERO else {}
            case "sym":
                return {} if node.name in self.absolute else {node.name: 1.0}
            case "neg":
                return args[0]
            case "add" | "sub":
                self.equal(*args)
                return args[1] if args[0] is None else args[0]
            case "max" | "min":
                for i, arg in enumerate(node.args):
                    # A floor this low is a numerical guard, not an amount.
                    if arg.op == "const" and 0.0 <= arg.value <= TINY:
                        return args[1 - i]
                self.equal(*args)
                return args[0]
            case "select":
                self.equal(args[1], args[2])
                return args[1]
        if any(arg is None for arg in args):
            return None
        a, b = dict(args[0] or {}), dict((args[1] if len(args) > 1 else None) or {})
        match node.op:
            case "mul":
                return _combine(a, b, 1.0)
            case "div":
                return _combine(a, b, -1.0)
            case "sqrt":
                return {name: value / 2.0 for name, value in a.items()}
            case "pow" if node.args[1].op == "const":
                return {name: value * node.args[1].value for name, value in a.items()}
        # A general power, an exponential or the like: pure numbers in and out.
        self.demand(a)
        self.demand(b)
        return {}

    def _rescalings(self) -> dict[str, Array]:
        """Return, for every name that occurs, its exponents in a basis of what is left open."""
        if self._open is None:
            rows = list(self.rows.values())
            names = dict.fromkeys((*self.scalable, *(name for row in rows for name in row)))
            column = {name: j for j, name in enumerate(names)}
            matrix = np.zeros((len(rows), len(names)))
            for i, row in enumerate(rows):
                for name, value in row.items():
                    matrix[i, column[name]] = value
            self._open = dict(zip(names, null_space(matrix), strict=True))
        return self._open

    def leaves_open(self, name: str, given: str | None = None) -> bool:
        """Return whether some rescaling that meets every demand changes ``name``.

        ``given`` names one more symbol that is not to change.
        """
        basis = self._rescalings()
        if name not in basis:
            return False
        exponents = basis[name]
        if given in basis and (held := basis[given]).any():
            exponents = exponents - held * (exponents @ held) / (held @ held)
        return bool(np.abs(exponents).max(initial=0.0) > NEGLIGIBLE)


def scaling(model: Model, mechanism: Mechanism, experiments: Experiments) -> Scaling:
    """Return the system of exponents of a model under its readouts, conditions and priors."""
    nodes = model.variant.wiring.nodes
    expressed = [name for name, node in nodes.items() if node.kind == "expressed"]
    system = Scaling(expressed, nodes)
    for state, rhs in zip(model.states, model.rhs, strict=True):
        own: Form = {} if state in system.absolute else {state: 1.0}
        system.equal(system.exponent(rhs), own)
    for condition in experiments.conditions.values():
        for name in expressed:
            start = node_start(nodes[name], condition)
            if start.value is not None:
                system.equal(system.exponent(start.value), {name: 1.0})
            if condition.clamp.get(name) or any(n for _, n in condition.add.get(name, ())):
                system.demand({name: 1.0})
    _add_priors(system, model, mechanism.priors)
    gone = dict.fromkeys(model.variant.wiring.absent, ZERO)
    for readout in experiments.readouts.values():
        seen = system.exponent(substitute([readout.of], gone)[0])
        if seen is None or readout.relative_to is not None:
            continue
        scale = f"{readout.name}.scale"
        given = any(name.partition("@")[0] == scale for name in mechanism.priors)
        free = readout.scale == "free" and not given
        system.demand(_combine(seen, {scale: 1.0}, 1.0) if free else seen)
    return system


def _add_priors(system: Scaling, model: Model, priors: Mapping[str, Prior]) -> None:
    """Add what the file says about parameters: the user's decision on their units."""
    for name, prior in priors.items():
        base = name.partition("@")[0]
        if base not in model.parameters:
            continue
        if isinstance(prior, Tied) and prior.to in model.parameters:
            system.equal({base: 1.0}, {prior.to: 1.0})
        else:
            system.demand({base: 1.0})


def _yardsticks(node: str, variant_set: VariantSet, experiments: Experiments) -> list[str]:
    """Return the gain parameters of a node that may fix its unit, basal gain last.

    They are uncontested, without a prior in the file, and the same in every condition.
    """
    mechanism = variant_set.mechanism
    contested = {contest.name for contest in variant_set.contests}
    own = {name for condition in experiments.conditions.values() for name in condition.free}
    if f"{node}.loss_rate" in own:
        return []
    strengths = [
        f"{edge.name}.strength"
        for edge in mechanism.edges.values()
        if not edge.material
        and edge.onto is None
        and edge.targets[0][0] == node
        and edge.on == "gain"
        and edge.name not in contested
        and not edge.necessary
        and not divides(edge, edge.effects[0])
    ]
    found = [*strengths, f"{node}.basal"]
    return [name for name in found if name not in own and name not in mechanism.priors]


def unit_ties(
    variant_set: VariantSet, experiments: Experiments
) -> tuple[dict[str, str], tuple[str, ...]]:
    """Return how units that nothing fixes are fixed alike in all variants.

    Only a node that can be rescaled freely in every variant that has it gets a tie: one of its
    uncontested gain parameters is set equal to its loss rate.

    Parameters
    ----------
    variant_set : VariantSet
    experiments : Experiments

    Returns
    -------
    ties : dict
        ``{"node.basal": "node.loss_rate"}``: parameter, and the one it is set equal to.
    sentences : tuple of str
        Each direction removed, and each that is left for the user to decide.
    """
    mechanism = variant_set.mechanism
    expressed = [name for name, node in mechanism.nodes.items() if node.kind == "expressed"]
    if not expressed:
        return {}, ()
    models = [build(v, mechanism, experiments) for v in variant_set.variants.values()]
    systems = [scaling(model, mechanism, experiments) for model in models]
    ties: dict[str, str] = {}
    sentences: list[str] = []

    def open_in(node: str) -> tuple[list[int], list[int]]:
        have = [i for i, m in enumerate(models) if node in m.states]
        return have, [i for i in have if systems[i].leaves_open(node)]

    yardsticks = {node: _yardsticks(node, variant_set, experiments) for node in expressed}

    def tie(node: str, basal: bool) -> bool:
        have, free = open_in(node)
        if not have or free != have:
            return False
        for name in yardsticks[node]:
            if name.endswith(".basal") != basal:
                continue
            everywhere = all(name in models[i].parameters for i in have)
            if everywhere and not any(systems[i].leaves_open(node, name) for i in have):
                for i in have:
                    systems[i].demand({name: 1.0})
                ties[name] = f"{node}.loss_rate"
                sentences.append(
                    f"No readout, start or prior fixes the unit of {node}: {name} is set equal to "
                    f"{node}.loss_rate in every variant."
                )
                return True
        return False

    # A strength may hang on the unit of its source, so nodes are gone through until nothing
    # changes. A basal gain, which may well be nothing in truth, is the last resort.
    while any(tie(node, basal) for basal in (False, True) for node in expressed):
        pass
    for node in expressed:
        have, free = open_in(node)
        if free:
            which = "every variant" if free == have else f"{len(free)} of {len(have)} variants"
            sentences.append(
                f"Nothing fixes the unit of {node} in {which}: give {node}.basal or the strength "
                "of an edge to it a fixed value under [prior]."
            )
    return ties, tuple(sentences)
