"""The parameters of a wiring's equations, with what they measure and their units."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator

from ruleout.equations.types import Parameter, ParameterKind
from ruleout.expressions import ZERO, Expr, ordered, substitute
from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge, Mechanism, Node
from ruleout.variants import Wiring
from ruleout.variants.contests import has_half, has_hill, onto_edge
from ruleout.variants.rates import rate_expression


class Units:
    """Display units built from the mechanism's time and amount units."""

    def __init__(self, mechanism: Mechanism) -> None:
        self.time = mechanism.time_unit
        self.amount = mechanism.amount_unit

    def of_node(self, node: Node | None) -> str:
        """Return the unit of a node's amount; a switched node is a fraction."""
        return "fraction" if node is not None and node.kind == "switched" else self.amount

    def per_time(self, over: str = "", below: Iterable[str] = ()) -> str:
        """Return ``over / (below * time)``, cancelled where they agree; a fraction has no unit."""
        bottom = [unit for unit in below if unit != "fraction"]
        if over in bottom:
            bottom.remove(over)
            over = ""
        top = "1" if over in ("", "fraction") else over
        return "/".join([top, *bottom, self.time])


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


def _of_node(node: Node, units: Units) -> Iterator[Parameter]:
    name, amount = node.name, units.of_node(node)
    if node.kind in ("switched", "expressed"):
        # Gain and loss of a switched node share its unit, the fraction, which is no unit at all.
        made = units.per_time() if node.kind == "switched" else units.per_time(amount)
        yield Parameter(f"{name}.basal", "rate", made)
        yield Parameter(f"{name}.loss_rate", "rate", units.per_time())
    if node.kind == "switched" and node.acts_on == "saturating":
        yield Parameter(f"{name}.half_gain", "half", amount, name)
        yield Parameter(f"{name}.half_loss", "half", amount, name)
    yield Parameter(f"{name}.start", "start", amount)


def _of_edge(edge: Edge, wiring: Wiring, mechanism: Mechanism, units: Units) -> Iterator[Parameter]:
    name = edge.name
    source = mechanism.nodes[edge.sources[0][0]] if edge.sources else None
    if edge.rates:
        yield from _of_rate(edge, wiring)
    elif edge.material:
        yield from _of_turnover(edge, mechanism, units)
    elif not divides(edge, edge.effects[0]) and not edge.necessary:
        yield Parameter(f"{name}.strength", *_strength(edge, wiring, mechanism, units))
    if has_half(edge):
        unit = units.of_node(source)
        yield Parameter(f"{name}.half", "half", unit, source.name if source else "")
    if has_hill(edge):
        yield Parameter(f"{name}.hill", "hill", "")
    if edge.acts_on == "saturating" and edge.targets:
        target = mechanism.nodes[edge.targets[0][0]]
        yield Parameter(f"{name}.target_half", "half", units.of_node(target), target.name)
    if edge.delay is True:
        yield Parameter(f"{name}.delay", "delay", units.time)


def _strength(
    edge: Edge, wiring: Wiring, mechanism: Mechanism, units: Units
) -> tuple[ParameterKind, str]:
    """Return kind and unit of the strength of an additive edge."""
    source = mechanism.nodes[edge.sources[0][0]]
    below = [units.of_node(source)] if edge.laws[0] == "linear" else []
    if onto_edge(edge) is not None:
        return "level", f"1/{below[0]}" if below else ""
    target = wiring.nodes[edge.targets[0][0]]
    gained = edge.on == "gain" and target.kind == "expressed"
    return "rate", units.per_time(units.of_node(target) if gained else "", below)


def _of_turnover(edge: Edge, mechanism: Mechanism, units: Units) -> Iterator[Parameter]:
    def unit(ends: Iterable[tuple[str, float]], saturable: bool) -> str:
        orders = [u for n, k in ends for u in [units.of_node(mechanism.nodes[n])] * round(k)]
        if saturable and orders:
            del orders[0]
        return units.per_time(units.amount, orders)

    saturable = edge.laws[0] != "linear"
    yield Parameter(f"{edge.name}.rate", "rate", unit(edge.sources, saturable))
    if edge.effects[0] == "binds":
        yield Parameter(f"{edge.name}.release", "rate", unit(edge.targets, False))
    elif edge.reversible:
        yield Parameter(f"{edge.name}.rate_back", "rate", unit(edge.targets, saturable))


def _of_rate(edge: Edge, wiring: Wiring) -> Iterator[Parameter]:
    rate = rate_expression(edge, wiring.names)
    names = [node.name for node in ordered([rate]) if node.op == "sym"]
    own = [name for name in names if name.startswith(f"{edge.name}.")]
    constants = rate_constants(rate, own)
    for name in own:
        # What an own parameter is measured in depends on the expression; none is claimed.
        yield Parameter(name, "rate" if name in constants else "level", "")


def catalogue(wiring: Wiring, mechanism: Mechanism, used: Collection[str]) -> dict[str, Parameter]:
    """Return the parameters among ``used``, in file order of nodes, then of edges.

    Names that belong to no node or edge of the wiring (a start expression may speak of an absent
    edge) come last, as levels.
    """
    units = Units(mechanism)
    known = [p for node in wiring.nodes.values() for p in _of_node(node, units)]
    for edge in wiring.edges.values():
        known.extend(_of_edge(edge, wiring, mechanism, units))
    found = {p.name: p for p in known if p.name in used}
    for name in sorted(set(used) - found.keys()):
        found[name] = Parameter(name, "level", "")
    return found
