"""The interaction graph as GraphML, and a mechanism from a graph that was drawn elsewhere.

Nodes carry ``kind``; edges carry ``effect``, ``law``, ``contested`` and the other words of
``mechanism.toml``. An edge that joins other than one node to one node, or that other edges act
onto, is drawn through a small node of its own with kind ``edge``.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import ParseError

from ruleout.case import Case
from ruleout.errors import InputError, did_you_mean
from ruleout.exchange.scene import find_variant
from ruleout.exchange.text import checked_text
from ruleout.files.names import LONGEST, RESERVED
from ruleout.files.text import read_text
from ruleout.mechanism.types import REST, Edge, Mechanism, Node
from ruleout.variants import expand

EDGE_KIND = "edge"
NODE_KINDS = ("input", "switched", "expressed", "pool")
LARGEST_FILE = 20_000_000
EFFECT_WORDS = {
    "stimulates": "stimulates", "stimulation": "stimulates", "activation": "stimulates",
    "activates": "stimulates", "positive": "stimulates", "+": "stimulates", "1": "stimulates",
    "inhibits": "inhibits", "inhibition": "inhibits", "represses": "inhibits",
    "negative": "inhibits", "-": "inhibits", "-1": "inhibits",
    "converts": "converts", "binds": "binds",
}  # fmt: skip
"""Words for an effect that are understood."""


def write_graphml(case: Case, variant_name: str | None, path: Path | str) -> None:
    """Write the interaction graph of a variant.

    Parameters
    ----------
    case : Case
    variant_name : str or None
        None writes the whole mechanism, with everything in dispute marked.
    path : path

    Raises
    ------
    InputError
        If there is no such variant or the file cannot be written.
    """
    import networkx as nx

    mechanism = case.mechanism
    disputed = {e.name for e in mechanism.edges.values() if _is_contested(e)}
    nodes, edges = mechanism.nodes, mechanism.edges
    label = ""
    if variant_name is not None:
        variant = find_variant(expand(mechanism, case.experiments), variant_name)
        nodes, edges, label = variant.wiring.nodes, variant.wiring.edges, variant.label
    graph = nx.MultiDiGraph(
        title=mechanism.title,
        time_unit=mechanism.time_unit,
        amount_unit=mechanism.amount_unit,
        variant=variant_name or "",
        choices=label,
    )
    for node in nodes.values():
        graph.add_node(node.name, **_node_attributes(node, mechanism.nodes[node.name].contested))
    acted_on = {e.onto.partition(".")[0] for e in edges.values() if e.onto}
    for edge in edges.values():
        _add_edge(graph, edge, edge.name in acted_on, edge.name in disputed)
    path = Path(path)
    try:
        nx.write_graphml(graph, path)
    except OSError as error:
        raise InputError(
            f"this file cannot be written ({error.strerror})", where=str(path)
        ) from error


def _is_contested(edge: Edge) -> bool:
    return edge.removable or max(len(edge.effects), len(edge.laws), len(edge.rates)) > 1


def _node_attributes(node: Node, contested: bool) -> dict[str, Any]:
    found: dict[str, Any] = {"kind": node.kind, "label": node.name, "contested": contested}
    if node.kind == "input":
        found["resting"] = float(node.resting)
    else:
        found["start"] = str(node.start)
    if node.acts_on != "linear":
        found["acts_on"] = node.acts_on
    return found


def _edge_attributes(edge: Edge, contested: bool) -> dict[str, Any]:
    options = [*edge.effects, *(["absent"] if edge.removable else [])]
    found: dict[str, Any] = {
        "edge": edge.name,
        "label": edge.name,
        "effect": edge.effects[0],
        "law": ";".join(edge.laws),
        "contested": contested,
    }
    if len(options) > 1:
        found["options"] = ";".join(options)
    if edge.rates:
        found["rate"] = ";".join(f"{label}={text}" if label else text for label, text in edge.rates)
    for word in ("necessary", "reversible"):
        if getattr(edge, word):
            found[word] = True
    if edge.on != "gain":
        found["on"] = edge.on
    if edge.onto:
        found["onto"] = edge.onto
    if edge.acts_on:
        found["acts_on"] = edge.acts_on
    if edge.delay is not False:
        found["delay"] = "free" if edge.delay is True else repr(float(edge.delay))
        found["stages"] = edge.stages
    if edge.contains:
        found["contains"] = ";".join(f"{larger}>{smaller}" for larger, smaller in edge.contains)
    return found


def _add_edge(graph: Any, edge: Edge, acted_on: bool, contested: bool) -> None:
    attributes = _edge_attributes(edge, contested)
    counts = [count for _, count in (*edge.sources, *edge.targets)]
    plain = len(edge.sources) == len(edge.targets) == 1 and counts == [1.0, 1.0]
    if plain and not acted_on:
        graph.add_edge(edge.sources[0][0], edge.targets[0][0], **attributes)
        return
    middle = f"edge:{edge.name}"
    graph.add_node(middle, kind=EDGE_KIND, **attributes)
    for name, count in edge.sources:
        graph.add_edge(name, middle, part_of=edge.name, stoichiometry=float(count))
    for name, count in edge.targets:
        graph.add_edge(middle, name, part_of=edge.name, stoichiometry=float(count))
    if edge.onto:
        graph.add_edge(middle, f"edge:{edge.onto.partition('.')[0]}", part_of=edge.name, onto=True)


def read_graphml(path: Path | str) -> str:
    """Return a graph in GraphML as the text of a ``mechanism.toml``.

    Parameters
    ----------
    path : path
        A graph as :func:`write_graphml` writes it, or any directed graph. Without attributes a node
        that nothing points at becomes an input, any other one ``expressed``, and an edge stimulates
        by a linear law. Node attributes ``kind``, ``start``, ``resting``, ``acts_on`` and
        ``contested``, and edge attributes ``effect``, ``law``, ``contested`` and the other words of
        ``mechanism.toml`` are heeded; others are passed over.

    Raises
    ------
    InputError
        If the file is no directed graph in GraphML or an attribute cannot be understood.
    """
    import networkx as nx

    path = Path(path)
    text = read_text(path, limit=LARGEST_FILE)
    if "<!DOCTYPE" in text or "<!ENTITY" in text:
        raise InputError(
            "the file declares a document type or entities, which are not read", where=str(path)
        )
    try:
        graph = nx.parse_graphml(text, force_multigraph=True)
    except (nx.NetworkXError, ParseError, KeyError, ValueError) as error:
        raise InputError(
            f"this is no GraphML that can be read ({error})", where=str(path)
        ) from error
    if not graph.is_directed():
        raise InputError(
            'the graph is undirected; effects have a direction (edgedefault="directed")',
            where=str(path),
        )
    mechanism = _Reader(graph, path).mechanism()
    return checked_text(mechanism, (f"Read from {path.name}.",), where=str(path))


class _Reader:
    """Turns a graph into a mechanism."""

    def __init__(self, graph: Any, path: Path) -> None:
        self.graph = graph
        self.path = path
        self._names: dict[Any, str] = {}
        self._middles = {
            key for key, data in graph.nodes(data=True) if _text(data, "kind") == EDGE_KIND
        }

    def mechanism(self) -> Mechanism:
        """Return the mechanism."""
        graph, about = self.graph, self.graph.graph
        nodes = [
            self._node(key, data)
            for key, data in graph.nodes(data=True)
            if key not in self._middles
        ]
        edges: dict[str, Edge] = {}
        for key in self._middles:
            self._names[key] = self._free_name(
                _text(graph.nodes[key], "edge") or str(key).removeprefix("edge:")
            )
        for key, data in graph.nodes(data=True):
            if key in self._middles:
                edges[self._names[key]] = self._middle_edge(key, data)
        for source, target, data in graph.edges(data=True):
            if source not in self._middles and target not in self._middles:
                edge = self._plain_edge(source, target, data)
                edges[edge.name] = edge
        return Mechanism(
            title=_text(about, "title") or self.path.stem,
            time_unit=_text(about, "time_unit") or "time",
            amount_unit=_text(about, "amount_unit") or "amount",
            nodes={node.name: node for node in nodes},
            edges=edges,
        )

    def _fail(self, message: str) -> InputError:
        return InputError(message, where=str(self.path))

    def _free_name(self, wanted: str) -> str:
        plain = re.sub(r"[^A-Za-z0-9_]", "_", wanted)[: LONGEST - 4] or "unnamed"
        plain = plain if re.match(r"[A-Za-z_]", plain) else f"_{plain}"
        while plain in RESERVED or plain in self._names.values():
            plain += "_"
        return plain

    def _node(self, key: Any, data: Mapping[str, Any]) -> Node:
        name = self._free_name(_text(data, "label") or str(key))
        self._names[key] = name
        free_standing = not self.graph.in_degree(key) and self.graph.out_degree(key)
        kind = _text(data, "kind") or ("input" if free_standing else "expressed")
        if kind not in NODE_KINDS:
            near = did_you_mean(kind, NODE_KINDS)
            raise self._fail(
                f"node '{name}' has kind '{kind}'{near}; allowed are {', '.join(NODE_KINDS)}"
            )
        start: float | str = _text(data, "start") or REST
        return Node(
            name=name,
            kind=kind,  # type: ignore[arg-type]
            start=_number_or_text(start),
            resting=self._number(data, "resting", name),
            acts_on="saturating" if _text(data, "acts_on") == "saturating" else "linear",
            contested=_flag(data, "contested"),
        )

    def _number(self, data: Mapping[str, Any], key: str, name: str) -> float:
        try:
            return float(data.get(key, 0.0))
        except (TypeError, ValueError) as error:
            raise self._fail(f"'{name}' has {key} = {data[key]!r}; a number is expected") from error

    def _plain_edge(self, source: Any, target: Any, data: Mapping[str, Any]) -> Edge:
        one, other = self._names[source], self._names[target]
        name = self._free_name(_text(data, "edge") or f"{one}_on_{other}")
        self._names["edge", source, target, name] = name
        return self._edge(name, data, ((one, 1.0),), ((other, 1.0),))

    def _middle_edge(self, key: Any, data: Mapping[str, Any]) -> Edge:
        name = self._names[key]
        sources = self._ends(
            (s, d) for s, _, d in self.graph.in_edges(key, data=True) if s not in self._middles
        )
        targets = self._ends(
            (t, d) for _, t, d in self.graph.out_edges(key, data=True) if t not in self._middles
        )
        return self._edge(name, data, sources, targets)

    def _ends(self, ends: Iterable[tuple[Any, Mapping[str, Any]]]) -> tuple[tuple[str, float], ...]:
        return tuple(
            (
                self._names[key],
                self._number({"stoichiometry": 1.0, **data}, "stoichiometry", str(key)),
            )
            for key, data in ends
        )

    def _edge(
        self,
        name: str,
        data: Mapping[str, Any],
        sources: tuple[tuple[str, float], ...],
        targets: tuple[tuple[str, float], ...],
    ) -> Edge:
        options = _split(data, "options") or [_text(data, "effect") or "stimulates"]
        effects = []
        for option in options:
            if option.lower() == "absent":
                continue
            effect = EFFECT_WORDS.get(option.lower())
            if effect is None:
                near = did_you_mean(option, EFFECT_WORDS)
                raise self._fail(
                    f"edge '{name}' has effect '{option}'{near}; allowed are stimulates, "
                    "inhibits, converts and binds"
                )
            effects.append(effect)
        removable = "absent" in options or (
            "options" not in data
            and _flag(data, "contested")
            and not any(";" in _text(data, key) for key in ("law", "rate"))
        )
        delay = _text(data, "delay")
        return Edge(
            name=name,
            sources=sources,
            targets=targets,
            effects=tuple(effects),  # type: ignore[arg-type]
            laws=tuple(_split(data, "law")) or ("linear",),  # type: ignore[arg-type]
            rates=_rates(_split(data, "rate")),
            removable=removable,
            necessary=_flag(data, "necessary"),
            on="loss" if _text(data, "on") == "loss" else "gain",
            onto=_text(data, "onto") or None,
            acts_on=_text(data, "acts_on") or None,  # type: ignore[arg-type]
            reversible=_flag(data, "reversible"),
            delay=delay == "free" or (self._number(data, "delay", name) if delay else False),
            stages=int(self._number({"stages": 3, **data}, "stages", name)),
            contains=_pairs(_split(data, "contains")),
        )


def _text(data: Mapping[str, Any], key: str) -> str:
    value = data.get(key)
    return "" if value is None else str(value).strip()


def _flag(data: Mapping[str, Any], key: str) -> bool:
    return _text(data, key).lower() in ("true", "yes", "1")


def _split(data: Mapping[str, Any], key: str) -> list[str]:
    return [part.strip() for part in _text(data, key).split(";") if part.strip()]


def _rates(parts: list[str]) -> tuple[tuple[str, str], ...]:
    pairs = []
    for part in parts:
        label, sign, rate = part.partition("=")
        pairs.append((label.strip(), rate.strip()) if sign else ("", part))
    return tuple(pairs)


def _pairs(parts: list[str]) -> tuple[tuple[str, str], ...]:
    found = []
    for part in parts:
        larger, _, smaller = part.partition(">")
        found.append((larger.strip(), smaller.strip()))
    return tuple(found)


def _number_or_text(text: float | str) -> float | str:
    try:
        return float(text)
    except ValueError:
        return text
