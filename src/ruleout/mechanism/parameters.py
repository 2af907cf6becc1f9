"""Which parameters a mechanism can have, over every way to settle what is in dispute."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from ruleout.expressions import parse, symbols
from ruleout.mechanism.types import FREE, Edge, Mechanism, Node

Part = Literal[
    "basal",
    "loss_rate",
    "start",
    "half_gain",
    "half_loss",
    "strength",
    "rate",
    "rate_back",
    "release",
    "half",
    "hill",
    "target_half",
    "delay",
    "own",
]


@dataclass(frozen=True, slots=True)
class Role:
    """What a parameter does.

    Attributes
    ----------
    owner : str
        Node or edge it belongs to.
    part : str
        The part of its name after the dot, or ``own`` for a name of a rate expression.
    source : str
        The node whose amount a half, a Hill exponent or a strength refers to, else empty.
    """

    owner: str
    part: Part
    source: str = ""

    @property
    def positive(self) -> bool:
        """Whether the equations have no meaning at zero or below."""
        return self.part in ("half_gain", "half_loss", "half", "hill", "target_half", "delay")


def parameter_names(mechanism: Mechanism) -> dict[str, Role]:
    """Return every parameter that occurs in at least one variant, in file order.

    Nodes come first, then edges; over the union of all options of a contested edge. A start is a
    parameter where the mechanism says ``start = "free"``; conditions may free more.
    """
    roles: dict[str, Role] = {}
    for node in mechanism.nodes.values():
        roles |= {f"{node.name}.{part}": Role(node.name, part) for part in _node_parts(node)}
    for edge in mechanism.edges.values():
        source = edge.sources[0][0] if edge.sources else ""
        for part in edge_parts(edge):
            roles[f"{edge.name}.{part}"] = Role(edge.name, part, source)
        for name in own_names(edge, mechanism):
            roles[f"{edge.name}.{name}"] = Role(edge.name, "own")
    return roles


def own_names(edge: Edge, mechanism: Mechanism) -> tuple[str, ...]:
    """Return the parameters that rate expressions bring, sorted within each expression."""
    found: dict[str, None] = {}
    for _, text in edge.rates:
        found |= dict.fromkeys(sorted(symbols(parse(text)) - set(mechanism.nodes) - {"time"}))
    return tuple(found)


def _node_parts(node: Node) -> Iterator[Part]:
    if node.kind in ("switched", "expressed"):
        yield "basal"
        yield "loss_rate"
    if node.acts_on == "saturating":
        yield "half_gain"
        yield "half_loss"
    if node.start == FREE:
        yield "start"


def divides(edge: Edge, effect: str) -> bool:
    """Return whether ``edge`` with this effect divides a rate by ``1 + (s/half)^hill``."""
    if edge.onto is not None:
        return effect == "inhibits"
    return (effect == "inhibits") == (edge.on == "gain")


def edge_parts(edge: Edge) -> Iterator[Part]:
    """Yield the parameters of an edge over all its options, without own names."""
    if edge.material:
        if not edge.rates:
            yield "rate"
            if edge.reversible:
                yield "rate_back"
            if "binds" in edge.effects:
                yield "release"
            if edge.laws != ("linear",):
                yield "half"
            if "hill" in edge.laws:
                yield "hill"
    else:
        dividing = [divides(edge, effect) for effect in edge.effects]
        if not all(dividing) and not edge.necessary:
            yield "strength"
        if any(dividing) or edge.laws != ("linear",):
            yield "half"
        if "hill" in edge.laws:
            yield "hill"
        if edge.acts_on == "saturating":
            yield "target_half"
    if edge.delay is True:
        yield "delay"
