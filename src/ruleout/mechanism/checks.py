"""Edges held against the nodes and edges they name."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.errors import did_you_mean
from ruleout.files import Section
from ruleout.mechanism.parameters import edge_parts
from ruleout.mechanism.types import Edge, Node


def check_edge(
    edge: Edge, nodes: Mapping[str, Node], edges: Mapping[str, Edge], table: Section
) -> None:
    """Raise InputError where ``edge`` names what does not exist or cannot take part."""
    for key, side in (("from", edge.sources), ("to", edge.targets)):
        for name, _ in side:
            if name not in nodes:
                near = did_you_mean(name, nodes)
                hint = "; to act on an edge write onto" if name in edges and key == "to" else ""
                table.fail(key, f"'{name}' is no node of this mechanism{near}{hint}")
    if edge.material:
        _check_material(edge, nodes, table)
        return
    source = nodes[edge.sources[0][0]]
    if source.resting < 0:
        table.fail(
            "from",
            f"'{source.name}' rests at {source.resting:g}; an input that stimulates or inhibits "
            "is 0 or more",
        )
    if edge.onto is not None:
        _check_onto(edge, edges, table)
    else:
        _check_target(edge, nodes[edge.targets[0][0]], table)


def _check_material(edge: Edge, nodes: Mapping[str, Node], table: Section) -> None:
    sources, targets = dict(edge.sources), dict(edge.targets)
    if sources == targets:
        table.fail("to", "'from' and 'to' are the same; nothing would move")
    for key, name in [*(("from", n) for n in sources), *(("to", n) for n in targets)]:
        kind = nodes[name].kind
        consumed = sources.get(name, 0.0) != targets.get(name, 0.0)
        if kind == "switched" and consumed:
            table.fail(
                key,
                f"'{name}' is switched, a fraction of itself; material moves between pools and "
                "expressed nodes (as a catalyst it may stand on both sides)",
            )
        if kind == "input" and key == "to" and consumed:
            table.fail(
                key,
                f"'{name}' is an input, whose level each condition sets; material "
                "moves to pools and expressed nodes",
            )


def _check_target(edge: Edge, target: Node, table: Section) -> None:
    if target.kind == "input":
        table.fail("to", f"'{target.name}' is an input: its level is set by each condition")
    if target.kind == "pool":
        table.fail(
            "to",
            f"'{target.name}' is a pool, which only material edges move; regulate one "
            'of those with onto = "EDGE", or make the node expressed or switched',
        )
    if edge.acts_on and target.kind != "switched":
        table.fail(
            "acts_on",
            f"only edges to a switched node have 'acts_on'; '{target.name}' is {target.kind}",
        )


def _check_onto(edge: Edge, edges: Mapping[str, Edge], table: Section) -> None:
    name, dot, part = str(edge.onto).partition(".")
    if name not in edges:
        near = did_you_mean(name, edges)
        table.fail("onto", f"'{name}' is no edge of this mechanism{near}")
    if dot and part != "half":
        table.fail("onto", f'\'{edge.onto}\' was given; an edge acts onto "EDGE" or "EDGE.half"')
    target = edges[name]
    if dot and "half" not in set(edge_parts(target)):
        table.fail("onto", f"edge '{name}' has no half: its law is {target.laws[0]}")
    chain = [edge.name]
    following: Edge | None = target
    while following is not None:
        if following.name in chain:
            circle = " -> ".join([*chain, following.name])
            table.fail("onto", f"edges act onto each other in a circle: {circle}")
        chain.append(following.name)
        following = edges.get(following.onto.partition(".")[0]) if following.onto else None
