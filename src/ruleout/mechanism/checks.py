"""Edges held against the nodes and edges they name."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.errors import did_you_mean
from ruleout.files import Section
from ruleout.mechanism.parameters import divides
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
    elif edge.onto is not None:
        _check_onto(edge, edges, table)
    else:
        _check_target(edge, nodes[edge.targets[0][0]], table)


def _check_material(edge: Edge, nodes: Mapping[str, Node], table: Section) -> None:
    for key, side in (("from", edge.sources), ("to", edge.targets)):
        for name, _ in side:
            if nodes[name].kind == "input":
                table.fail(
                    key,
                    f"'{name}' is an input, whose level each condition sets; material "
                    "moves between pools and expressed nodes (an input may speed it: "
                    "use onto, or a rate expression)",
                )
            if nodes[name].kind == "switched":
                table.fail(
                    key,
                    f"'{name}' is switched, a fraction; material moves between pools "
                    "and expressed nodes",
                )
    both = {name for name, _ in edge.sources} & {name for name, _ in edge.targets}
    if both and dict(edge.sources) == dict(edge.targets):
        table.fail("to", f"'{min(both)}' turns into itself; nothing would move")


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
    if dot and not _has_half(target):
        table.fail("onto", f"edge '{name}' has no half: its law is {target.laws[0]}")
    seen = [edge.name]
    while target.onto is not None:
        seen.append(target.name)
        following = edges.get(target.onto.partition(".")[0])
        if target.name == edge.name or following is None:
            break
        if following.name in seen:
            table.fail("onto", f"edges act onto each other in a circle: {', '.join(seen)}")
        target = following
    if target.name == edge.name:
        table.fail("onto", f"edge '{edge.name}' acts onto itself")


def _has_half(edge: Edge) -> bool:
    if edge.rates:
        return False
    if edge.material:
        return "saturating" in edge.laws
    return edge.laws != ("linear",) or any(divides(edge, effect) for effect in edge.effects)
