"""Reading ``[edge.NAME]``."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final, Literal

from ruleout.expressions import parse, symbols
from ruleout.files import Section, check_name, describe
from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge, Effect, Law

REGULATING: Final[tuple[Effect, ...]] = ("stimulates", "inhibits")
MATERIAL: Final[tuple[Effect, ...]] = ("converts", "binds")
EFFECTS: Final = (*REGULATING, *MATERIAL)
LAWS: Final[tuple[Law, ...]] = ("linear", "saturating", "hill")
KEYS = (
    "from", "to", "effect", "law", "contested", "rate", "necessary", "on", "onto", "acts_on",
    "reversible", "delay", "stages", "contains",
)  # fmt: skip
HINTS = {
    key: f'this is a parameter: write it under [prior], as "EDGE.{key}" = 0.1'
    for key in ("strength", "half", "hill", "rate_back", "release", "target_half")
} | {"sign": "the sign is in 'effect': stimulates or inhibits"}
FORMS: Final[tuple[Literal["linear", "saturating"], ...]] = ("linear", "saturating")
OTHER_LAWS = {
    "mass_action": "linear",
    "mass-action": "linear",
    "michaelis_menten": "saturating",
    "michaelis-menten": "saturating",
    "michaelis": "saturating",
}

Side = tuple[tuple[str, float], ...]


def read_edge(name: str, table: Section) -> Edge:
    """Return an edge; what its names refer to is checked by :func:`check_edge`.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(KEYS, HINTS)
    effects, removable = _read_effects(table)
    rates = _read_rates(table)
    edge = Edge(
        name=name,
        sources=_read_side(table, "from"),
        targets=_read_side(table, "to"),
        effects=effects,
        laws=_read_laws(table),
        rates=rates,
        removable=removable,
        necessary=table.flag("necessary"),
        on=table.word("on", ("gain", "loss"), "gain"),
        onto=table.text("onto") or None,
        acts_on=table.word("acts_on", FORMS) if "acts_on" in table else None,
        reversible=table.flag("reversible"),
        delay=_read_delay(table),
        stages=table.integer("stages", 3, low=1, high=20),
        contains=_read_contains(table),
    )
    (_check_material if edge.material else _check_regulating)(edge, table)
    _check_contains(edge, table)
    return edge


def _read_effects(table: Section) -> tuple[tuple[Effect, ...], bool]:
    contested = table.values.get("contested", False)
    if isinstance(table.values.get("effect"), list):
        table.fail("effect", 'a sign in dispute is written contested = ["stimulates", "inhibits"]')
    if not isinstance(contested, list):
        effect = table.word("effect", EFFECTS)
        return (effect,), table.flag("contested")
    options = table.names("contested")
    for option in options:
        if option in LAWS:
            table.fail("contested", f"'{option}' is a law; laws in dispute are written law = [...]")
    allowed = (*EFFECTS, "absent")
    for option in options:
        table.one_of("contested", option, allowed)
    effects = tuple(effect for option in options for effect in EFFECTS if effect == option)
    if not effects or len(options) < 2:
        table.fail(
            "contested",
            f"only {describe(list(options))} is given; a dispute has two options or more, "
            'such as ["stimulates", "absent"]',
        )
    if len(effects) > 1 and not set(effects) <= set(REGULATING):
        table.fail(
            "contested",
            f"{' and '.join(effects)} cannot be options of one edge; write two edges and a rule "
            "(exactly_one)",
        )
    if "effect" in table and table.word("effect", EFFECTS) not in effects:
        table.fail("effect", "the effect is none of the contested ones; leave 'effect' out")
    return effects, "absent" in options


def _read_laws(table: Section) -> tuple[Law, ...]:
    laws = table.names("law", single=True) if "law" in table else LAWS[:1]
    if not laws:
        table.fail("law", f"the list is empty; give one or more of {', '.join(LAWS)}")
    for law in laws:
        if other := OTHER_LAWS.get(law.lower()):
            table.fail("law", f"'{law}' is written law = \"{other}\" here")
    return tuple(table.one_of("law", law, LAWS) for law in laws)


def _read_rates(table: Section) -> tuple[tuple[str, str], ...]:
    rate = table.values.get("rate")
    if rate is None:
        return ()
    if isinstance(rate, str):
        parse(rate, where=table.where("rate"))
        return (("", rate),)
    if not isinstance(rate, Mapping):
        table.fail(
            "rate",
            f"{describe(rate)} was given; an expression in quotes is expected (a rate constant "
            'is fixed under [prior], as "EDGE.rate" = 0.1)',
        )
    if not rate:
        table.fail("rate", "the table is empty; give one expression or more, by label")
    inner = table.section("rate")
    for label in rate:
        check_name(label, "rate", inner.where(label))
        parse(inner.text(label, longest=10_000), where=inner.where(label))
    return tuple(rate.items())


def _read_side(table: Section, key: str) -> Side:
    value = table.values.get(key)
    if value is None:
        return ()
    if isinstance(value, Mapping):
        inner = table.section(key)
        if not value:
            table.fail(key, "the table is empty; name a node, or leave it out")
        return tuple((name, inner.number(name, above=0.0)) for name in value)
    names = table.names(key, single=True, twice="; for two of it write {{ {name} = 2 }}")
    if not names:
        table.fail(key, "the list is empty; name a node, or leave it out")
    return tuple((name, 1.0) for name in names)


def _read_delay(table: Section) -> bool | float:
    value = table.values.get("delay", False)
    if "stages" in table and not value:
        table.fail("stages", "stages belong to a delay; write delay = true or a number as well")
    return value if isinstance(value, bool) else table.as_number("delay", value, above=0.0)


def _read_contains(table: Section) -> tuple[tuple[str, str], ...]:
    pairs = []
    for text in table.names("contains", single=True):
        larger, sign, smaller = (part.strip() for part in text.partition(">"))
        if not (larger and sign and smaller) or ">" in smaller or larger == smaller:
            table.fail("contains", f"{text!r} was given; 'larger > smaller' is expected")
        pairs.append((larger, smaller))
    return tuple(pairs)


def _check_contains(edge: Edge, table: Section) -> None:
    if not edge.contains:
        return
    ways = [label for label, _ in edge.rates if label] or list(edge.laws)
    allowed = [*edge.effects, *ways, *(["absent"] if edge.removable else [])]
    for pair in edge.contains:
        for option in pair:
            table.one_of("contains", option, allowed)


def _refuse(table: Section, keys: tuple[str, ...], reason: str) -> None:
    for key in keys:
        if key in table:
            table.fail(key, f"{reason}; leave '{key}' out")


def _check_regulating(edge: Edge, table: Section) -> None:
    _refuse(table, ("rate", "reversible"), "only converting edges have one")
    for key, side in (("from", edge.sources), ("to", edge.targets)):
        if isinstance(table.values.get(key), Mapping):
            table.fail(key, "stoichiometry belongs to converting and binding edges; name one node")
        if len(side) != 1 and not (key == "to" and edge.onto):
            table.fail(key, f"a regulating edge has one node here; {len(side) or 'none'} was given")
    if edge.onto is not None:
        _refuse(table, ("to", "on", "acts_on"), "an edge onto another edge has none")
    if edge.necessary and "linear" in edge.laws:
        table.fail("necessary", 'a necessary edge needs law = "saturating" or "hill"')
    if all(divides(edge, effect) for effect in edge.effects):
        reason = "this edge divides the whole rate instead of adding a term to it"
        _refuse(table, ("necessary", "acts_on"), reason)
    elif edge.necessary:
        _refuse(table, ("acts_on",), "a necessary edge is a factor of the whole rate")


def _check_material(edge: Edge, table: Section) -> None:
    effect = edge.effects[0]
    _refuse(table, ("necessary", "on", "onto", "acts_on"), f"an edge that {effect} has none")
    if not edge.sources and not edge.targets:
        table.fail("effect", f"an edge that {effect} needs 'from', 'to' or both")
    if edge.rates:
        _refuse(table, ("law", "reversible"), "the rate is given as an expression")
        _check_own_names(edge, table)
        return
    if effect == "binds":
        _check_binding(edge, table)
    elif edge.laws != ("linear",) and not edge.sources:
        table.fail("law", "an inflow has no source to saturate; leave 'law' out")
    if edge.reversible and not (edge.sources and edge.targets):
        table.fail("reversible", "a reversible edge needs both 'from' and 'to'")


def _check_binding(edge: Edge, table: Section) -> None:
    if sum(count for _, count in edge.sources) != 2 or len(edge.targets) != 1:
        table.fail(
            "effect",
            '\'binds\' joins two sources into one complex: from = ["a", "b"], to = "complex"',
        )
    if edge.laws != ("linear",):
        table.fail("law", "binding follows mass action; leave 'law' out")
    _refuse(table, ("reversible",), "binding runs backwards anyway, with EDGE.release")


def _check_own_names(edge: Edge, table: Section) -> None:
    for label, text in edge.rates:
        key = f"rate.{label}" if label else "rate"
        for name in sorted(symbols(parse(text))):
            if "." in name:
                table.fail(
                    key,
                    f"'{name}' has a dot; names in a rate are nodes, time or parameters "
                    f"of this edge (tie them under [prior] to share a value)",
                )
            if name == "delay" and edge.delay:
                table.fail(key, "'delay' is already this edge's delay; use another name")
