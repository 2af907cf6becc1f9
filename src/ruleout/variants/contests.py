"""What is in dispute in a mechanism, and the ways to settle it."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import replace

from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge, Mechanism
from ruleout.variants.types import Contest, Option

ABSENT = Option(False)
PRESENT = Option(True)


def has_half(edge: Edge) -> bool:
    """Return whether a settled edge carries a parameter ``EDGE.half``."""
    if edge.rates or edge.effects[0] == "binds":
        return False
    return edge.laws[0] != "linear" or divides(edge, edge.effects[0])


def has_hill(edge: Edge) -> bool:
    """Return whether a settled edge carries a parameter ``EDGE.hill``."""
    return not edge.rates and edge.effects[0] != "binds" and edge.laws[0] == "hill"


def onto_edge(edge: Edge) -> str | None:
    """Return the name of the edge that an ``onto`` edge acts on."""
    return None if edge.onto is None else edge.onto.partition(".")[0]


def cut_with_onto(edges: Mapping[str, Edge], cut: Collection[str]) -> frozenset[str]:
    """Return ``cut`` with every edge that acts, directly or by way of others, onto a cut one."""
    gone = set(cut)
    while following := {n for n, e in edges.items() if onto_edge(e) in gone} - gone:
        gone |= following
    return frozenset(gone)


def onto_half(edge: Edge) -> bool:
    """Return whether an ``onto`` edge acts on its target's half instead of its rate."""
    return edge.onto is not None and "." in edge.onto


def edge_options(edge: Edge) -> tuple[Option, ...]:
    """Return the ways to settle ``edge``, in file order, ``absent`` last.

    Options with the same equations (a dividing edge is alike under the linear and the saturating
    law; two labels may carry the same rate) are listed once.
    """
    texts = dict(edge.rates)
    found: dict[tuple[object, ...], Option] = {}
    for effect in edge.effects:
        if edge.rates:
            options = [Option(True, effect, None, label) for label in texts]
        else:
            options = [Option(True, effect, law) for law in edge.laws]
        for option in options:
            law = option.law
            if law == "linear" and divides(edge, effect):
                law = "saturating"
            found.setdefault((effect, law, texts.get(option.rate)), option)
    return (*found.values(), ABSENT) if edge.removable else tuple(found.values())


def find_contests(mechanism: Mechanism) -> tuple[Contest, ...]:
    """Return every contested node, then every contested edge, in file order."""
    nodes = [
        Contest(node.name, (PRESENT, ABSENT)) for node in mechanism.nodes.values() if node.contested
    ]
    edges = [Contest(edge.name, edge_options(edge)) for edge in mechanism.edges.values()]
    return (*nodes, *(contest for contest in edges if len(contest.options) > 1))


def settle(edge: Edge, option: Option) -> Edge:
    """Return ``edge`` with one effect, one law or rate, and no longer removable."""
    effect = option.effect or edge.effects[0]
    laws = (option.law,) if option.law else edge.laws[:1]
    rates = tuple(pair for pair in edge.rates if pair[0] == option.rate)
    return replace(edge, effects=(effect,), laws=laws, rates=rates, removable=False, contains=())


def matches(edge: Edge | None, option: Option, label: str) -> bool:
    """Return whether ``option`` is what ``label`` asks for.

    Parameters
    ----------
    edge : Edge or None
        The edge the option settles; None for a node.
    option : Option
    label : str
        Empty or ``present`` for presence, ``absent``, an effect, a law, a rate label, or the
        option as it is written (``stimulates/hill``).
    """
    if label in ("", "present"):
        return option.present
    if not option.present:
        return label == "absent"
    if label in (option.effect, option.rate, option.law, str(option)):
        return True
    alike = {"linear", "saturating"}
    dividing = edge is not None and option.effect is not None and divides(edge, option.effect)
    return dividing and {option.law, label} == alike


def choice_name(contest: Contest, option: Option) -> str:
    """Return the name of a choice: the contest's own where presence is all that is in dispute.

    Else ``EDGE=inhibits``, ``EDGE=hill``, ``EDGE=stimulates/hill`` with what varies, and
    ``EDGE=absent``.
    """
    if not option.present:
        return f"{contest.name}=absent"
    present = [o for o in contest.options if o.present]
    if len(present) == 1:
        return contest.name
    parts = [
        str(getattr(option, part))
        for part in ("effect", "law", "rate")
        if len({getattr(o, part) for o in present}) > 1
    ]
    return f"{contest.name}={'/'.join(parts)}"
