"""A family file -> :class:`Family`, the behaviours to score and how to sample."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, Final, get_args

from ruleout.files import Section, check_name, describe
from ruleout.mechanism import read_mechanism
from ruleout.mechanism.parameters import parameter_names
from ruleout.mechanism.types import Fixed, LogUniform
from ruleout.survey.behaviours import BEHAVIOURS, Behaviour
from ruleout.survey.behaviours.resemblance import Resemblance
from ruleout.survey.data import read_resemblance
from ruleout.survey.mechanisms import RANGES, AnyFamily, MechanismFamily
from ruleout.survey.types import DEFAULT_RANGES, Family, Method, Range, Style

KEYS: Final = ("title", "family", "node", "edge", "range", "sampling", "behaviour")
FAMILY_KEYS: Final = (
    "style", "output", "edges", "self_edges", "signs", "fewest_edges", "most_edges",
    "must_reach", "connected", "up_to_relabelling", "constant", "start",
)  # fmt: skip
NODE_KINDS: Final[Mapping[Style, str]] = {"enzyme": "switched", "gene": "expressed"}
SIGN: Final[Mapping[str, int]] = {"stimulates": 1, "inhibits": -1, "absent": 0}
MOST_NODES: Final = 5
MOST_SETS: Final = 1_000_000


@dataclass(frozen=True, slots=True)
class FamilyFile:
    """What a family file says.

    Attributes
    ----------
    family : Family or MechanismFamily
    behaviours : tuple of Behaviour
        In file order.
    sets : int
    method : {"sobol", "latin", "independent"}
    """

    family: AnyFamily
    behaviours: tuple[Behaviour, ...]
    sets: int
    method: Method


def read_family(path: Path) -> FamilyFile:
    """Return the family, behaviours and sampling written in ``path``.

    Raises
    ------
    InputError
        At the first thing that cannot be used, with file, line and field.
    """
    top = Section.open(path)
    if "mechanism" in top.section("family"):
        return _read_mechanism_family(top)
    top.only(KEYS)
    table = top.section("family")
    table.only(FAMILY_KEYS, {"input": 'the input is a node of kind = "input" with an edge'})
    style: Style = table.word("style", get_args(Style))
    nodes, source = _read_nodes(top, style)
    allowed, drives = _read_edges(top, table, nodes, source)
    output = _node(table, "output", table.text("output"), nodes)
    start = table.number("start", 0.1, low=0.0)
    family = Family(
        title=top.text("title"),
        style=style,
        nodes=nodes,
        output=output,
        source=source,
        drives=drives,
        allowed=allowed,
        fewest_edges=table.integer("fewest_edges", 0, low=0, high=MOST_NODES**2),
        most_edges=table.integer("most_edges", MOST_NODES**2, low=0, high=MOST_NODES**2),
        must_reach=table.flag("must_reach", bool(source)),
        connected=table.flag("connected"),
        relabelled=table.flag("up_to_relabelling"),
        ranges=_read_ranges(top, DEFAULT_RANGES[style]),
        constant=table.number("constant", 0.5, above=0.0),
        starts=(start,) * len(nodes),
    )
    if family.must_reach and not source:
        table.fail("must_reach", 'there is no input to start from; add a node of kind = "input"')
    _check_range_names(top, family)
    return _with_sampling(top, family, bool(source), style == "gene")


def _read_mechanism_family(top: Section) -> FamilyFile:
    """Return the variants of the mechanism that the family file names."""
    top.only(("title", "family", "range", "sampling", "behaviour"))
    table = top.section("family")
    table.only(("mechanism", "input", "output", "start"))
    mechanism = read_mechanism(top.path.parent / table.text("mechanism"))
    nodes = mechanism.nodes
    moving = tuple(name for name, node in nodes.items() if node.kind != "input")
    output = moving[_node(table, "output", table.text("output"), moving)]
    source = table.text("input")
    if source and (source not in nodes or nodes[source].kind != "input"):
        table.fail("input", f"'{source}' is no input of this mechanism")
    if nodes[output].contested:
        table.fail("output", f"'{output}' is contested; the output must be in every variant")
    names = parameter_names(mechanism)
    parts = {*RANGES, *(name.rpartition(".")[2] for name in names)}
    ranges = _read_ranges(top, parts)
    for name in ranges:
        if "." in name and name not in names:
            top.section("range").fail(name, f"'{name}' is no parameter of this mechanism")
    family = MechanismFamily(
        title=top.text("title", mechanism.title),
        mechanism=mechanism,
        source=source,
        output=output,
        ranges=ranges,
        start=table.number("start", 0.1, low=0.0),
    )
    return _with_sampling(top, family, bool(source), nodes[output].kind == "expressed")


def _with_sampling(top: Section, family: AnyFamily, has_input: bool, expressed: bool) -> FamilyFile:
    sampling = top.section("sampling")
    sampling.only(("sets", "method"))
    return FamilyFile(
        family=family,
        behaviours=_read_behaviours(top, has_input, expressed),
        sets=sampling.integer("sets", 1024, low=1, high=MOST_SETS),
        method=sampling.word("method", get_args(Method), "sobol"),
    )


def _node(table: Section, key: str, name: str, nodes: tuple[str, ...]) -> int:
    if name not in nodes:
        table.fail(key, f"'{name}' is no node that moves; give one of {', '.join(nodes)}")
    return nodes.index(name)


def _read_nodes(top: Section, style: Style) -> tuple[tuple[str, ...], str]:
    nodes: list[str] = []
    source = ""
    for name, table in top.sections("node").items():
        check_name(name, "node", table.where())
        table.only(("kind",))
        kind = table.word("kind", (NODE_KINDS[style], "input"))
        if kind == "input" and source:
            table.fail("kind", f"'{source}' is an input already; a family has one at most")
        if kind == "input":
            source = name
        else:
            nodes.append(name)
    if not 1 <= len(nodes) <= MOST_NODES:
        top.fail(
            "node",
            f"{len(nodes)} nodes of kind {NODE_KINDS[style]} were given; a family has 1 to "
            f"{MOST_NODES}",
        )
    return tuple(nodes), source


def _read_edges(
    top: Section, table: Section, nodes: tuple[str, ...], source: str
) -> tuple[tuple[tuple[tuple[int, ...], ...], ...], tuple[tuple[int, int], ...]]:
    words = table.names("signs") or ("stimulates", "inhibits")
    for word in words:
        table.one_of("signs", word, ("stimulates", "inhibits"))
    everywhere = tuple(sorted({0, *(SIGN[w] for w in words)}))
    every = table.word("edges", ("all", "listed"), "all") == "all"
    loops = table.flag("self_edges", True)
    n = len(nodes)
    allowed = [
        [everywhere if every and (loops or i != j) else (0,) for j in range(n)] for i in range(n)
    ]
    drives: list[tuple[int, int]] = []
    for edge in top.sections("edge").values():
        edge.only(("from", "to", "effect", "contested"))
        target = _node(edge, "to", edge.text("to"), nodes)
        signs = _read_signs(edge)
        if source and edge.text("from") == source:
            if len(signs) > 1 or signs == (0,):
                edge.fail("contested", "an edge from the input is in every wiring; give 'effect'")
            drives.append((target, signs[0]))
        else:
            allowed[_node(edge, "from", edge.text("from"), nodes)][target] = signs
    if source and not drives:
        top.fail("edge", f'nothing leads from the input; write an edge from = "{source}"')
    return tuple(map(tuple, allowed)), tuple(drives)


def _read_signs(edge: Section) -> tuple[int, ...]:
    if "effect" in edge:
        return (SIGN[edge.word("effect", ("stimulates", "inhibits"))],)
    options = edge.names("contested")
    if not options:
        edge.fail("contested", "give 'effect', or contested = [...] with the signs it may have")
    for option in options:
        edge.one_of("contested", option, tuple(SIGN))
    return tuple(sorted(SIGN[option] for option in options))


def _named(table: Section) -> Iterator[tuple[str, Any]]:
    """Yield ranges by full name, whether ``EDGE.part`` stands in quotes or not."""
    for outer, value in table.values.items():
        if isinstance(value, Mapping) and not value.keys() <= {"low", "high"}:
            yield from ((f"{outer}.{inner}", v) for inner, v in value.items())
        else:
            yield outer, value


def _read_ranges(top: Section, parts: Collection[str]) -> dict[str, Range]:
    table = top.section("range")
    found: dict[str, Range] = {}
    for name, value in _named(table):
        if name.rpartition(".")[2] not in parts:
            known = ", ".join(sorted(parts))
            table.fail(name, f"'{name}' has no range here; ranges are for {known}")
        if isinstance(value, Mapping):
            inner = Section(table.path, f"range.{name}", value, table.lines)
            inner.only(("low", "high"))
            low = inner.number("low", above=0.0)
            found[name] = LogUniform(low, inner.number("high", above=low))
        elif isinstance(value, int | float) and not isinstance(value, bool):
            found[name] = Fixed(table.as_number(name, value, above=0.0))
        else:
            table.fail(name, f"{describe(value)} was given; {{ low, high }} or a number is needed")
    return found


def _check_range_names(top: Section, family: Family) -> None:
    edges = {
        family.edge_name(i, j) for i in range(len(family.nodes)) for j in range(len(family.nodes))
    }
    owners = {
        *edges,
        *(f"{family.source}_on_{family.nodes[j]}" for j, _ in family.drives),
        *(f"{word}_{node}" for word in ("raise", "lower") for node in family.nodes),
        *family.nodes,
    }
    for name in family.ranges:
        owner = name.rpartition(".")[0]
        if owner and owner not in owners:
            top.section("range").fail(
                name, f"'{owner}' is no edge or node; edges are called SOURCE_on_TARGET"
            )


def _read_behaviours(top: Section, has_input: bool, expressed: bool) -> tuple[Behaviour, ...]:
    tables = top.sections("behaviour")
    if not tables:
        top.fail(
            "behaviour",
            f"no behaviour is given; write [behaviour.NAME] with one of {', '.join(BEHAVIOURS)}",
        )
    found: list[Behaviour] = []
    for name, table in tables.items():
        top.section("behaviour").one_of(name, name, tuple(BEHAVIOURS))
        made = read_resemblance(table) if name == Resemblance.name else _read_behaviour(name, table)
        if made.needs_input and not has_input:
            top.section("behaviour").fail(
                name, "it needs an input, a node of that kind; for a mechanism, [family] names it"
            )
        if made.needs_expressed and not expressed:
            top.section("behaviour").fail(
                name, "it compares with simple regulation, so it needs an expressed output"
            )
        found.append(made)
    return tuple(found)


def _read_behaviour(name: str, table: Section) -> Behaviour:
    kind = BEHAVIOURS[name]
    table.only([f.name for f in fields(kind)])
    made: Behaviour = kind(**{f.name: _read_field(table, f) for f in fields(kind)})
    return made


def _read_field(table: Section, field: Any) -> float | int:
    if isinstance(field.default, int):
        return table.integer(field.name, field.default, low=1, high=100_000)
    return table.number(field.name, float(field.default), low=0.0)
