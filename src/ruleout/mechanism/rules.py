"""Reading ``[rule.NAME]`` and ``[claim.NAME]``."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final, Literal, TypeVar

from ruleout.files import Section, check_label, describe
from ruleout.mechanism.names import check_member
from ruleout.mechanism.types import Claim, Edge, Node, Rule

Kind = TypeVar("Kind", bound=str)
RULES: Final[tuple[Literal["at_most_one", "exactly_one", "together", "implies"], ...]] = (
    "at_most_one",
    "exactly_one",
    "together",
    "implies",
)
CLAIMS: Final[tuple[Literal["any_of", "all_of", "none_of", "loop"], ...]] = (
    "any_of",
    "all_of",
    "none_of",
    "loop",
)


def _kind(table: Section, kinds: tuple[Kind, ...]) -> Kind:
    given = [kind for kind in kinds if kind in table]
    if len(given) != 1:
        found = " and ".join(given) if given else "none"
        table.fail("", f"{found} of {', '.join(kinds)} is given; exactly one is expected")
    return given[0]


def read_rule(
    name: str, table: Section, nodes: Mapping[str, Node], edges: Mapping[str, Edge]
) -> Rule:
    """Return a rule over contested nodes and edges.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(RULES)
    check_label(name, "rule", table.where())
    kind = _kind(table, RULES)
    members = table.names(kind)
    if len(members) < 2:
        table.fail(kind, f"{len(members)} given; a rule binds two members or more")
    for member in members:
        check_member(member, nodes, edges, table.where(kind), contested=True)
    return Rule(name, kind, members)


def read_claim(
    name: str, table: Section, nodes: Mapping[str, Node], edges: Mapping[str, Edge]
) -> Claim:
    """Return a claim of the user's own.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(("text", *CLAIMS))
    check_label(name, "claim", table.where())
    if name in edges or (name in nodes and nodes[name].contested):
        table.fail(
            "",
            f"'{name}' is also a node or an edge, whose own claim bears that name; "
            "rename this claim",
        )
    kind = _kind(table, CLAIMS)
    if kind == "loop":
        members: tuple[str, ...] = (table.word("loop", ("negative", "positive")),)
        text = f"There is a {members[0]} feedback loop"
    else:
        members = table.names(kind)
        if not members:
            table.fail(kind, f"{describe([])} was given; name one edge or node or more")
        for member in members:
            check_member(member, nodes, edges, table.where(kind), contested=False)
        text = f"{kind.replace('_', ' ').capitalize()} {', '.join(members)}"
    return Claim(name, table.text("text") or text, kind, members)
