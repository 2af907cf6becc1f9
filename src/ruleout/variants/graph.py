"""The signed interaction graph of a wiring: who pushes whose rate of change, and which way."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ruleout.expressions import Expr, differentiate, evaluate, symbols
from ruleout.mechanism.types import Edge
from ruleout.variants.contests import onto_edge, onto_half
from ruleout.variants.rates import rate_expression
from ruleout.variants.types import Wiring

PROBES = 64
"""Random positive points at which the sign of a rate expression's slope is looked up."""


@dataclass(frozen=True, slots=True)
class Arc:
    """``source`` changes the rate of change of ``target`` by way of ``edge``.

    ``sign`` is +1 or -1, or 0 where the direction depends on the levels. ``process`` is the edge
    whose rate is at work: ``edge`` itself, or the one it finally acts onto.
    """

    edge: str
    source: str
    target: str
    sign: int
    process: str


def net_amounts(edge: Edge) -> dict[str, float]:
    """Return what one turnover of a material edge adds to each node (negative: takes away)."""
    net: dict[str, float] = {}
    for name, amount in edge.sources:
        net[name] = net.get(name, 0.0) - amount
    for name, amount in edge.targets:
        net[name] = net.get(name, 0.0) + amount
    return {name: amount for name, amount in net.items() if amount}


def pushes(edge: Edge, wiring: Wiring) -> dict[str, int]:
    """Return the nodes whose rate of change an edge enters, each with the sign of its push.

    An edge onto another one pushes what that one pushes, reversed where it inhibits, and reversed
    again where it raises a half.
    """
    target = onto_edge(edge)
    if target is not None:
        own = 1 if edge.effects[0] == "stimulates" else -1
        if onto_half(edge):
            own = -own
        other = wiring.edges[target]
        # Scaling a reversible flux pushes either way, by which direction prevails.
        if other.material and (other.reversible or other.effects[0] == "binds"):
            own = 0
        return {name: own * sign for name, sign in pushes(other, wiring).items()}
    if edge.material:
        return {name: 1 if amount > 0 else -1 for name, amount in net_amounts(edge).items()}
    sign = 1 if edge.effects[0] == "stimulates" else -1
    return {name: sign for name, _ in edge.targets}


def _slope_sign(rate: Expr, name: str) -> int:
    """Return the sign of d rate / d ``name`` at positive levels and parameters, 0 if it varies."""
    (slope,) = differentiate([rate], name)
    names = sorted(symbols(rate))
    points = np.random.default_rng(0).uniform(-2.0, 2.0, size=(len(names), PROBES))
    values = np.broadcast_to(
        evaluate([slope], dict(zip(names, 10.0**points, strict=True)))[0], PROBES
    )
    values = values[np.isfinite(values)]
    if values.size == 0 or (values.min() < 0.0 < values.max()):
        return 0
    return int(np.sign(values.min() + values.max()))


def drivers(edge: Edge, wiring: Wiring) -> dict[str, int]:
    """Return the nodes that drive an edge, each with the sign of its influence on the rate."""
    if not edge.material:
        return {name: 1 for name, _ in edge.sources}
    if edge.rates:
        rate = rate_expression(edge, wiring.names)
        levels = symbols(rate)
        return {name: _slope_sign(rate, name) for name in wiring.nodes if name in levels}
    found = {name: 1 for name, _ in edge.sources}
    if edge.reversible or edge.effects[0] == "binds":
        for name, _ in edge.targets:
            found[name] = 0 if name in found else -1
    return found


def arcs(wiring: Wiring) -> tuple[Arc, ...]:
    """Return the arcs of the interaction graph, in file order of the edges.

    A material edge is driven by what it consumes; it lowers its sources and raises its targets.
    That a substrate drives its own consumption is no feedback and gives no arc.
    """
    found: list[Arc] = []
    for edge in wiring.edges.values():
        process = edge.name
        while (onto := onto_edge(wiring.edges[process])) is not None:
            process = onto
        for target, push in pushes(edge, wiring).items():
            for source, drive in drivers(edge, wiring).items():
                sign = push * drive
                if edge.material and source == target and sign < 0:
                    continue
                found.append(Arc(edge.name, source, target, sign, process))
    return tuple(found)
