"""Where the nodes of a mechanism's picture go: layers along the flow of the signal.

Lengths are millimetres on paper at the standard size, x to the right and y down.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from ruleout.mechanism.types import Mechanism

Array = NDArray[np.float64]
PointKind = Literal["node", "process", "empty"]

CHARACTER: Final = 1.5
"""Width allowed for a character of 7 point type."""
LINE: Final = 3.2
LONGEST_LINE: Final = 12
MARK: Final = 2.6
"""Side of a process square and of an empty-set sign."""


@dataclass(frozen=True, slots=True)
class Point:
    """A node, or the small sign of a process or of nothing.

    Attributes
    ----------
    name : str
        The node's, else ``EDGE:process`` or ``EDGE:empty``.
    lines : tuple of str
        Label, one entry per line.
    size : (width, height)
    """

    name: str
    kind: PointKind
    lines: tuple[str, ...]
    size: tuple[float, float]


@dataclass(frozen=True, slots=True)
class Piece:
    """A stroke of an edge: from a point to a point, or onto another edge's middle.

    Attributes
    ----------
    edge : str
    source, target : str
        Names of points; ``target`` is the edge's name if ``onto``.
    head : bool
        Whether the arrowhead sits here (not on the way into a process).
    """

    edge: str
    source: str
    target: str
    onto: bool = False
    head: bool = True


@dataclass(frozen=True, slots=True)
class Spacing:
    """How far apart things stand, along the flow and across it."""

    along: float
    across: float


ROOMY: Final = Spacing(along=13.0, across=9.0)
TIGHT: Final = Spacing(along=8.0, across=6.0)


def label_lines(name: str) -> tuple[str, ...]:
    """Break a long name at its underscores into lines of about equal length."""
    if len(name) <= LONGEST_LINE:
        return (name,)
    words = name.split("_")
    lines = [words[0]]
    for word in words[1:]:
        if len(lines[-1]) + 1 + len(word) <= LONGEST_LINE:
            lines[-1] += f"_{word}"
        else:
            lines[-1] += "_"
            lines.append(word)
    return tuple(lines)


def abbreviations(names: Iterable[str]) -> dict[str, str]:
    """Return a distinct short form of every name, of three characters where that is enough."""
    short: dict[str, str] = {}
    for name in names:
        parts = [p for p in name.split("_") if p]
        if len(name) <= 4:
            options = [name]
        else:
            initials = "".join(p[0] for p in parts) if len(parts) > 2 else parts[0][:3]
            options = [name[:3], initials, parts[0][:2] + parts[-1][:1], parts[0][:2] + name[-1]]
        options += [f"{name[:2]}{i}" for i in range(2, 1000)]
        short[name] = next(o for o in options if o not in short.values())
    return short


def points_and_pieces(
    mechanism: Mechanism, *, compact: bool = False
) -> tuple[list[Point], list[Piece]]:
    """Return what is to be placed and what is to be drawn between.

    Parameters
    ----------
    mechanism : Mechanism
    compact : bool
        Abbreviated labels, for a picture the size of a stamp.
    """
    short = abbreviations(mechanism.nodes) if compact else {}
    points: list[Point] = []
    for name in mechanism.nodes:
        lines = (short[name],) if compact else label_lines(name)
        width = max(CHARACTER * max(map(len, lines)) + 5.0, 9.0)
        points.append(Point(name, "node", lines, (width, LINE * len(lines) + 3.4)))
    pieces: list[Piece] = []
    for edge in mechanism.edges.values():
        if edge.onto is not None:
            target = edge.onto.split(".")[0]
            pieces += [Piece(edge.name, s, target, onto=True) for s, _ in edge.sources]
            continue
        if len(edge.sources) == 1 and len(edge.targets) == 1:
            pieces.append(Piece(edge.name, edge.sources[0][0], edge.targets[0][0]))
            continue
        kind: PointKind = "process" if edge.sources and edge.targets else "empty"
        middle = f"{edge.name}:{kind}"
        points.append(Point(middle, kind, (), (MARK, MARK)))
        pieces += [Piece(edge.name, s, middle, head=not edge.targets) for s, _ in edge.sources]
        pieces += [Piece(edge.name, middle, t) for t, _ in edge.targets]
    return points, pieces


def place(
    mechanism: Mechanism,
    points: Sequence[Point],
    pieces: Sequence[Piece],
    spacing: Spacing,
    widest: float,
) -> dict[str, Array]:
    """Return the centre of every point.

    The signal flows from left to right, or downwards if that would be wider than ``widest``.
    """
    layers = _layers(mechanism, points, pieces)
    links = [(p.source, p.target) for p in pieces if not p.onto]
    _order(layers, links)
    size = {p.name: p.size for p in points}
    long_way = sum(max(size[n][0] for n in layer) for layer in layers)
    sideways = long_way + spacing.along * (len(layers) - 1) <= widest
    axis = 0 if sideways else 1
    gap = spacing.along if sideways else spacing.along * 0.85
    along: dict[str, float] = {}
    edge_of_last = 0.0
    for layer in layers:
        thick = max(size[n][axis] for n in layer)
        along.update(dict.fromkeys(layer, edge_of_last + thick / 2))
        edge_of_last += thick + gap
    across = _across(layers, links, {n: s[1 - axis] for n, s in size.items()}, spacing.across)
    order = (along, across) if sideways else (across, along)
    return {p.name: np.array([order[0][p.name], order[1][p.name]]) for p in points}


def _layers(
    mechanism: Mechanism, points: Sequence[Point], pieces: Sequence[Piece]
) -> list[list[str]]:
    """Return the points by distance from the inputs; edges that close a loop do not count."""

    def doubt(piece: Piece) -> tuple[bool, bool]:
        edge = mechanism.edges[piece.edge]
        contested = edge.removable or len(edge.effects) > 1
        return contested, edge.effects[0] == "inhibits"

    flow = nx.DiGraph()
    flow.add_nodes_from(p.name for p in points)
    for piece in sorted((p for p in pieces if not p.onto), key=doubt):
        a, b = piece.source, piece.target
        if a != b and not nx.has_path(flow, b, a):
            flow.add_edge(a, b)
    for piece in pieces:
        # A node that only acts onto edges stands before what that edge leads to.
        ends = mechanism.edges[piece.target].targets if piece.onto else ()
        if ends and not nx.degree(flow, piece.source):
            flow.add_edge(piece.source, ends[0][0])
    rank: dict[str, int] = {}
    for name in nx.topological_sort(flow):
        rank[name] = max((rank[p] + 1 for p in flow.predecessors(name)), default=0)
    for name in reversed(list(nx.topological_sort(flow))):
        nexts = [rank[s] for s in flow.successors(name)]
        if nexts and not flow.in_degree(name):
            rank[name] = min(nexts) - 1
    layers: list[list[str]] = [[] for _ in range(max(rank.values()) + 1)]
    for point in points:
        layers[rank[point.name]].append(point.name)
    return [layer for layer in layers if layer]


def _order(layers: list[list[str]], links: Sequence[tuple[str, str]]) -> None:
    """Sort each layer by the mean position of its neighbours, there and back again."""
    near: dict[str, set[str]] = {n: set() for layer in layers for n in layer}
    for a, b in links:
        near[a].add(b)
        near[b].add(a)
    place = {n: i - (len(layer) - 1) / 2 for layer in layers for i, n in enumerate(layer)}
    for sweep in range(8):
        for layer in layers if sweep % 2 == 0 else layers[::-1]:
            inside = set(layer)
            mean = {
                n: float(np.mean([place[m] for m in near[n] - inside] or [place[n]])) for n in layer
            }
            layer.sort(key=lambda n, mean=mean: mean[n])  # type: ignore[misc]
            place.update({n: i - (len(layer) - 1) / 2 for i, n in enumerate(layer)})


def _across(
    layers: Sequence[Sequence[str]],
    links: Sequence[tuple[str, str]],
    thickness: Mapping[str, float],
    gap: float,
) -> dict[str, float]:
    """Return positions across the flow: near the neighbours' mean, in order and apart."""
    near: dict[str, list[str]] = {n: [] for layer in layers for n in layer}
    for a, b in links:
        if a != b:
            near[a].append(b)
            near[b].append(a)
    at = dict.fromkeys(near, 0.0)
    for _ in range(30):
        for layer in layers:
            steps = [(thickness[a] + thickness[b]) / 2 + gap for a, b in itertools.pairwise(layer)]
            offsets = np.concatenate([[0.0], np.cumsum(steps)])
            wanted = [float(np.mean([at[m] for m in near[n]] or [at[n]])) for n in layer]
            placed = _rising(np.array(wanted) - offsets) + offsets
            at.update(zip(layer, placed.tolist(), strict=True))
    return at


def _rising(values: Array) -> Array:
    """Return the nearest non-decreasing sequence in least squares (pool adjacent violators)."""
    blocks: list[tuple[float, int]] = []
    for value in values:
        blocks.append((float(value), 1))
        while len(blocks) > 1 and blocks[-2][0] > blocks[-1][0]:
            (a, m), (b, n) = blocks.pop(-2), blocks.pop()
            blocks.append(((a * m + b * n) / (m + n), m + n))
    return np.concatenate([np.full(n, v) for v, n in blocks])
