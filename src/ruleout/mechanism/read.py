"""``mechanism.toml`` -> :class:`Mechanism`."""

from __future__ import annotations

from pathlib import Path

from ruleout.errors import did_you_mean
from ruleout.expressions import parse, symbols
from ruleout.files import Section, check_name
from ruleout.mechanism.checks import check_edge
from ruleout.mechanism.edges import read_edge
from ruleout.mechanism.nodes import read_node
from ruleout.mechanism.parameters import parameter_names
from ruleout.mechanism.priors import read_priors
from ruleout.mechanism.rules import read_claim, read_rule
from ruleout.mechanism.types import FREE, REST, Edge, Mechanism, Node, Prior

MOST_NODES = 200
MOST_EDGES = 1000
KEYS = ("title", "time_unit", "amount_unit", "node", "edge", "rule", "claim", "prior")


def read_mechanism(path: Path) -> Mechanism:
    """Return the interaction graph written in ``path``.

    Parameters
    ----------
    path : Path
        A ``mechanism.toml``. Nothing in it is ever executed.

    Raises
    ------
    InputError
        At the first thing that cannot be used, with file, line and field.
    """
    top = Section.open(path)
    top.only(KEYS)
    nodes, basal = _read_nodes(top)
    edges = _read_edges(top, nodes)
    priors = read_priors(top)
    for name in basal:
        if name in priors:
            top.section("prior").fail(name, "this is set at the node as well; keep one of the two")
    mechanism = Mechanism(
        title=top.text("title"),
        time_unit=top.text("time_unit", "time", longest=40),
        amount_unit=top.text("amount_unit", "amount", longest=40),
        nodes=nodes,
        edges=edges,
        rules=tuple(read_rule(n, t, nodes, edges) for n, t in top.sections("rule").items()),
        claims=tuple(read_claim(n, t, nodes, edges) for n, t in top.sections("claim").items()),
        priors=basal | priors,
        lines=top.lines,
    )
    _check_starts(mechanism, top)
    return mechanism


def _read_nodes(top: Section) -> tuple[dict[str, Node], dict[str, Prior]]:
    tables = top.sections("node")
    if not tables:
        top.fail("node", 'there is no node; write [node.NAME] with kind = "switched" or another')
    if len(tables) > MOST_NODES:
        top.fail("node", f"there are {len(tables)} nodes; at most {MOST_NODES} are read")
    nodes: dict[str, Node] = {}
    priors: dict[str, Prior] = {}
    for name, table in tables.items():
        check_name(name, "node", table.where())
        nodes[name], given = read_node(name, table)
        priors |= given
    return nodes, priors


def _read_edges(top: Section, nodes: dict[str, Node]) -> dict[str, Edge]:
    tables = top.sections("edge")
    if len(tables) > MOST_EDGES:
        top.fail("edge", f"there are {len(tables)} edges; at most {MOST_EDGES} are read")
    edges: dict[str, Edge] = {}
    for name, table in tables.items():
        check_name(name, "edge", table.where())
        if name in nodes:
            table.fail("", f"'{name}' is a node as well; edges and nodes need different names")
        edges[name] = read_edge(name, table)
    for name, edge in edges.items():
        check_edge(edge, nodes, edges, tables[name])
    return edges


def _check_starts(mechanism: Mechanism, top: Section) -> None:
    roles = parameter_names(mechanism)
    for node in mechanism.nodes.values():
        if isinstance(node.start, str) and node.start not in (REST, FREE):
            table = top.section("node").section(node.name)
            for name in sorted(symbols(parse(node.start, where=table.where("start")))):
                if name not in roles:
                    near = did_you_mean(name, [*roles, REST, FREE])
                    table.fail(
                        "start",
                        f"'{name}' is no parameter{near}; a start is a number, 'rest', 'free' or "
                        "an expression of parameters such as edge.rate",
                    )
