"""The parameters of a wiring's equations, with what they measure and their units."""

from __future__ import annotations

from collections.abc import Collection, Iterable

from ruleout.equations.types import Parameter
from ruleout.expressions import ZERO, Expr, ordered, substitute
from ruleout.mechanism import Role, parameter_names
from ruleout.mechanism.types import Edge, Mechanism
from ruleout.variants import Wiring
from ruleout.variants.rates import rate_expression


def _additive_terms(rate: Expr) -> list[Expr]:
    """Return the terms of a rate that are added up at its top."""
    if rate.op in ("add", "sub"):
        return [term for arg in rate.args for term in _additive_terms(arg)]
    return _additive_terms(rate.args[0]) if rate.op == "neg" else [rate]


def rate_constants(rate: Expr, own: Collection[str]) -> frozenset[str]:
    """Return which own parameters of a rate expression are rate constants.

    Each additive term takes the first parameter that silences it when it vanishes (``k`` in
    ``k * s / (half + s)``); the others are levels.
    """
    found: set[str] = set()
    for term in _additive_terms(rate):
        names = [node.name for node in ordered([term]) if node.op == "sym" and node.name in own]
        silencing = (n for n in names if substitute([term], {n: ZERO})[0] is ZERO)
        found.update(name for name in [next(silencing, None)] if name is not None)
    return frozenset(found)


class _Table:
    """Kinds and display units of the parameters of one wiring."""

    def __init__(self, wiring: Wiring, mechanism: Mechanism) -> None:
        self.wiring = wiring
        self.time = mechanism.time_unit
        self.amount = mechanism.amount_unit
        self.nodes = mechanism.nodes

    def unit_of(self, node: str) -> str:
        """Return the unit of a node's amount; a switched node is a fraction."""
        if node not in self.nodes:
            return ""
        return "fraction" if self.nodes[node].kind == "switched" else self.amount

    def per_time(self, over: str = "", below: Iterable[str] = ()) -> str:
        """Return ``over / (below * time)``, cancelled where they agree; a fraction has no unit."""
        bottom = [unit for unit in below if unit != "fraction"]
        if over in bottom:
            bottom.remove(over)
            over = ""
        top = "1" if over in ("", "fraction") else over
        return "/".join([top, *bottom, self.time])

    def parameter(self, name: str, role: Role) -> Parameter:
        """Return a parameter by what it does."""
        edge = self.wiring.edges.get(role.owner)
        match role.part:
            case "basal":
                return Parameter(name, "rate", self.per_time(self.unit_of(role.owner)))
            case "loss_rate":
                return Parameter(name, "rate", self.per_time())
            case "start":
                return Parameter(name, "start", self.unit_of(role.owner))
            case "half_gain" | "half_loss":
                return Parameter(name, "half", self.unit_of(role.owner), role.owner)
            case "half":
                return Parameter(name, "half", self.unit_of(role.source), role.source)
            case "hill":
                return Parameter(name, "hill", "")
            case "delay":
                return Parameter(name, "delay", self.time)
        if edge is None:
            # A start expression may speak of an edge that this wiring lacks.
            return Parameter(name, "level", "")
        match role.part:
            case "target_half":
                target = edge.targets[0][0]
                return Parameter(name, "half", self.unit_of(target), target)
            case "strength":
                return self._strength(name, edge)
            case "rate":
                return Parameter(name, "rate", self._turnover(edge, edge.sources))
            case "rate_back" | "release":
                return Parameter(name, "rate", self._turnover(edge, edge.targets))
        rate = rate_expression(edge, self.wiring.names)
        own = [node.name for node in ordered([rate]) if node.name.startswith(f"{edge.name}.")]
        # What an own parameter is measured in depends on the expression; no unit is claimed.
        return Parameter(name, "rate" if name in rate_constants(rate, own) else "level", "")

    def _strength(self, name: str, edge: Edge) -> Parameter:
        source = self.unit_of(edge.sources[0][0])
        below = [source] if edge.laws[0] == "linear" else []
        if edge.onto is not None:
            per_source = f"1/{source}" if below and source != "fraction" else ""
            return Parameter(name, "level", per_source)
        gained = self.unit_of(edge.targets[0][0]) if edge.on == "gain" else ""
        return Parameter(name, "rate", self.per_time(gained, below))

    def _turnover(self, edge: Edge, ends: Iterable[tuple[str, float]]) -> str:
        orders = [unit for n, count in ends for unit in [self.unit_of(n)] * round(count)]
        if edge.laws[0] != "linear":
            orders = orders[1:]
        return self.per_time(self.amount, orders)


def equation_parameters(
    wiring: Wiring, mechanism: Mechanism, used: Collection[str]
) -> dict[str, Parameter]:
    """Return the parameters among ``used``, in file order of nodes, then of edges."""
    table = _Table(wiring, mechanism)
    roles = parameter_names(mechanism)
    return {name: table.parameter(name, role) for name, role in roles.items() if name in used}
