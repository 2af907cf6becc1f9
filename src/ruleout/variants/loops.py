"""Feedback loops and feed-forward pairs, found once for all variants together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import islice, product

import networkx as nx

from ruleout.mechanism.types import Edge
from ruleout.variants.graph import Arc
from ruleout.variants.types import Loop

MAX_CYCLES = 2_000
MAX_PATHS = 5_000
MAX_LOOPS = 2_000
"""Bounds on what is enumerated; beyond them the list of loops is incomplete."""


def _sign(path: Sequence[Arc]) -> int:
    sign = 1
    for arc in path:
        sign *= arc.sign
    return sign


def _edges(path: Sequence[Arc]) -> tuple[str, ...]:
    return tuple(arc.edge for arc in path)


def _parallel(arcs: Sequence[Arc]) -> dict[tuple[str, str], list[Arc]]:
    between: dict[tuple[str, str], list[Arc]] = {}
    for arc in arcs:
        between.setdefault((arc.source, arc.target), []).append(arc)
    return between


def _cycles(between: dict[tuple[str, str], list[Arc]]) -> Iterator[tuple[Arc, ...]]:
    """Yield feedback loops; one process never carries two steps of a loop.

    (A reversible conversion or the two partners of a binding would close a loop by themselves.)
    """
    names = sorted({name for pair in between for name in pair})
    number = {name: i for i, name in enumerate(names)}
    # Integers, because networkx walks over sets and the order of strings there is not repeatable.
    graph = nx.DiGraph()
    graph.add_nodes_from(range(len(names)))
    graph.add_edges_from(sorted((number[a], number[b]) for a, b in between))
    for cycle in islice(nx.simple_cycles(graph), MAX_CYCLES):
        first = cycle.index(min(cycle))
        nodes = [names[i] for i in (*cycle[first:], *cycle[:first])]
        steps = [between[pair] for pair in zip(nodes, (*nodes[1:], nodes[0]), strict=True)]
        for path in product(*steps):
            if len({arc.process for arc in path}) == len(path):
                yield path


def _paths(
    start: str, leaving: dict[str, list[Arc]], budget: int
) -> dict[str, list[tuple[Arc, ...]]]:
    """Return up to ``budget`` simple paths from ``start``, shortest first, by where they end."""
    ending: dict[str, list[tuple[Arc, ...]]] = {}
    level: list[tuple[Arc, ...]] = [()]
    count = 0
    while level:
        longer: list[tuple[Arc, ...]] = []
        for path in level:
            visited = {start, *(arc.target for arc in path)}
            here = path[-1].target if path else start
            for arc in leaving.get(here, ()):
                if arc.target in visited or any(arc.process == a.process for a in path):
                    continue
                if count == budget:
                    return ending
                count += 1
                ending.setdefault(arc.target, []).append((*path, arc))
                longer.append((*path, arc))
        level = longer
    return ending


def _pairs(arcs: Sequence[Arc]) -> Iterator[tuple[tuple[Arc, ...], tuple[Arc, ...]]]:
    """Yield pairs of paths that share nothing but where they start and end."""
    leaving: dict[str, list[Arc]] = {}
    for arc in arcs:
        leaving.setdefault(arc.source, []).append(arc)
    for start in leaving:
        for paths in _paths(start, leaving, MAX_PATHS // len(leaving)).values():
            for i, one in enumerate(paths):
                inner = {arc.target for arc in one[:-1]}
                edges = set(_edges(one))
                for other in paths[i + 1 :]:
                    # Two direct arcs are two terms of one interaction, not a second route.
                    if len(one) == len(other) == 1:
                        continue
                    if inner.isdisjoint(arc.target for arc in other[:-1]) and edges.isdisjoint(
                        _edges(other)
                    ):
                        yield one, other


def find_loops(arc_sets: Sequence[Sequence[Arc]]) -> list[tuple[Loop, ...]]:
    """Return the feedback loops and feed-forward pairs of every wiring.

    They are enumerated once, on the union of all arcs; a wiring has those whose arcs it has.

    Parameters
    ----------
    arc_sets : sequence of sequence of Arc
        The arcs of each wiring, see :func:`ruleout.variants.graph.arcs`.
    """
    union = list(dict.fromkeys(arc for arcs in arc_sets for arc in arcs))
    bit = {arc: 1 << i for i, arc in enumerate(union)}
    found: dict[Loop, list[int]] = {}
    for path in islice(_cycles(_parallel(union)), MAX_LOOPS):
        nodes = tuple(arc.source for arc in path)
        loop = Loop("feedback", _sign(path), nodes, _edges(path))
        found.setdefault(loop, []).append(sum(bit[arc] for arc in path))
    for one, other in islice(_pairs(union), MAX_LOOPS):
        ends = (one[0].source, one[-1].target)
        loop = Loop("feed-forward", _sign(one) * _sign(other), ends, (*_edges(one), *_edges(other)))
        found.setdefault(loop, []).append(sum(bit[arc] for arc in (*one, *other)))
    ranked = sorted(
        found, key=lambda x: (x.kind != "feedback", len(x.edges), x.nodes, x.edges, x.sign)
    )
    have = [sum(bit[arc] for arc in dict.fromkeys(arcs)) for arcs in arc_sets]
    return [
        tuple(loop for loop in ranked if any(mask & h == mask for mask in found[loop]))
        for h in have
    ]


def say_feedback(loop: Loop, edges: Mapping[str, Edge]) -> str:
    """Return a feedback loop as a chain of arrows: ``a -> b -| a``.

    A step by an edge onto another one is drawn ``-o``: its sign depends on that one.
    """
    steps = []
    for node, name in zip(loop.nodes, loop.edges, strict=True):
        edge = edges[name]
        arrow = "-o" if edge.onto else "-|" if edge.effects[0] == "inhibits" else "->"
        steps.append(f"{node} {arrow} ")
    return "".join(steps) + loop.nodes[0]
