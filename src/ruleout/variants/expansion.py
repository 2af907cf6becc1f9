"""Every admissible way to settle what is in dispute."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from math import prod

import networkx as nx

from ruleout.errors import InputError, did_you_mean
from ruleout.mechanism.types import Edge, Mechanism, Node, Rule
from ruleout.variants.contests import (
    ABSENT,
    PRESENT,
    edge_options,
    has_half,
    matches,
    onto_edge,
    onto_half,
    settle,
)
from ruleout.variants.rules import admits
from ruleout.variants.types import Contest, Option, Wiring

MAX_VARIANTS = 512
MAX_STEPS = 200_000
"""Partly settled wirings looked at before the rules are called too tangled."""


@dataclass(frozen=True, slots=True)
class Draft:
    """One admissible wiring, not yet named."""

    choices: Mapping[str, Option]
    wiring: Wiring


@dataclass(frozen=True, slots=True)
class _Item:
    """A node or an edge, contested or not, with the ways to settle it."""

    thing: Node | Edge
    options: tuple[Option, ...]


class _TooManyStepsError(Exception):
    pass


def where(mechanism: Mechanism, field: str) -> str:
    """Return file and, where known, line and field, for messages."""
    line = mechanism.lines.get(field)
    return f"mechanism.toml:{line}: {field}" if line else f"mechanism.toml: {field}"


def _items(mechanism: Mechanism) -> list[_Item]:
    """Return nodes, then edges with those that others act onto first, those in rules early.

    (The sooner a rule is broken, the less is walked through in vain.)
    """
    ruled = {member.partition("=")[0] for rule in mechanism.rules for member in rule.members}
    rank = {name: (name not in ruled, i) for i, name in enumerate(mechanism.edges)}
    order = nx.DiGraph()
    order.add_nodes_from(mechanism.edges)
    for edge in mechanism.edges.values():
        target = onto_edge(edge)
        if target is not None:
            order.add_edge(target, edge.name)
    try:
        names = list(nx.lexicographical_topological_sort(order, key=rank.__getitem__))
    except nx.NetworkXUnfeasible:
        circle = [a for a, _ in nx.find_cycle(order)]
        raise InputError(
            f"edges act onto each other in a circle ({', '.join(circle)}); take one `onto` away",
            where=where(mechanism, f"edge.{circle[0]}.onto"),
        ) from None
    nodes = [
        _Item(node, (PRESENT, ABSENT) if node.contested else (PRESENT,))
        for node in mechanism.nodes.values()
    ]
    return nodes + [
        _Item(mechanism.edges[name], edge_options(mechanism.edges[name])) for name in names
    ]


class _Walk:
    """Depth-first walk over partly settled wirings that drops a branch once a rule is broken."""

    def __init__(self, mechanism: Mechanism, rules: Sequence[Rule]) -> None:
        self.items = _items(mechanism)
        self.index = {item.thing.name: i for i, item in enumerate(self.items)}
        self.rules_at: list[list[tuple[Rule, tuple[tuple[int, str], ...]]]] = [
            [] for _ in self.items
        ]
        for rule in rules:
            members = tuple(self._member(mechanism, rule, m) for m in rule.members)
            for i in {i for i, _ in members}:
                self.rules_at[i].append((rule, members))

    def _member(self, mechanism: Mechanism, rule: Rule, member: str) -> tuple[int, str]:
        name, _, label = member.partition("=")
        if name not in self.index:
            raise InputError(
                f"'{name}' is neither a node nor an edge{did_you_mean(name, self.index)}",
                where=where(mechanism, f"rule.{rule.name}"),
            )
        return self.index[name], label

    def _options(self, k: int, settled: Sequence[Option]) -> tuple[Option, ...]:
        """Return the ways to settle item ``k``, only ``absent`` if what it needs is gone."""
        thing = self.items[k].thing
        if isinstance(thing, Edge):
            ends = [name for name, _ in (*thing.sources, *thing.targets)]
            target = onto_edge(thing)
            needs = ends if target is None else [*ends, target]
            if not all(settled[self.index[name]].present for name in needs):
                return (ABSENT,)
            if target is not None and onto_half(thing):
                t = self.index[target]
                other = self.items[t].thing
                if isinstance(other, Edge) and not has_half(settle(other, settled[t])):
                    return (ABSENT,)
        return self.items[k].options

    def _broken(self, k: int, settled: Sequence[Option]) -> bool:
        def truth(i: int, label: str) -> bool | None:
            if i > k:
                return None
            thing = self.items[i].thing
            return matches(thing if isinstance(thing, Edge) else None, settled[i], label)

        return any(
            not admits(rule, [truth(i, label) for i, label in members])
            for rule, members in self.rules_at[k]
        )

    def __iter__(self) -> Iterator[dict[str, Option]]:
        stack: list[tuple[Option, ...]] = [()]
        steps = 0
        while stack:
            settled = stack.pop()
            steps += 1
            if steps > MAX_STEPS:
                raise _TooManyStepsError
            k = len(settled)
            if k == len(self.items):
                yield {item.thing.name: o for item, o in zip(self.items, settled, strict=True)}
                continue
            for option in reversed(self._options(k, settled)):
                longer = (*settled, option)
                if not self._broken(k, longer):
                    stack.append(longer)


def _wire(mechanism: Mechanism, settled: Mapping[str, Option]) -> Wiring:
    nodes = {
        name: replace(node, contested=False)
        for name, node in mechanism.nodes.items()
        if settled[name].present
    }
    edges = {
        name: settle(edge, settled[name])
        for name, edge in mechanism.edges.items()
        if settled[name].present
    }
    return Wiring(nodes, edges, frozenset(mechanism.nodes) - nodes.keys())


def expand_wirings(mechanism: Mechanism, contests: Sequence[Contest]) -> list[Draft]:
    """Return every admissible wiring once, in file order of the choices.

    An edge of an absent node is absent, and so is an ``onto`` edge whose target is absent or, for
    ``EDGE.half``, has no half. Rules speak of what then stands.

    Raises
    ------
    InputError
        If there are more than ``MAX_VARIANTS`` wirings, or none.
    """
    drafts: list[Draft] = []
    try:
        for settled in _Walk(mechanism, mechanism.rules):
            if len(drafts) == MAX_VARIANTS:
                raise InputError(_too_many(mechanism, contests), where="mechanism.toml")
            choices = {contest.name: settled[contest.name] for contest in contests}
            drafts.append(Draft(choices, _wire(mechanism, settled)))
    except _TooManyStepsError:
        raise InputError(_too_many(mechanism, contests), where="mechanism.toml") from None
    if not drafts:
        raise _contradiction(mechanism)
    return drafts


def _too_many(mechanism: Mechanism, contests: Sequence[Contest]) -> str:
    product = " x ".join(f"{c.name} ({len(c.options)})" for c in contests)
    count = prod(len(c.options) for c in contests)
    after = f" and its rules leave more than {MAX_VARIANTS}" if mechanism.rules else ""
    message = (
        f"too many variants: {product} = {count:,} combinations{after}, {MAX_VARIANTS} are allowed"
    )
    removable = sorted((c for c in contests if ABSENT in c.options), key=lambda c: -len(c.options))
    for k in range(2, len(removable) + 1):
        group = removable[:k]
        together = 1 + sum(len(c.options) - 1 for c in group)
        left = count // prod(len(c.options) for c in group) * together
        if left <= MAX_VARIANTS:
            names = ", ".join(f'"{c.name}"' for c in group)
            return (
                f"{message}\nsettle some of them, or add rules: "
                f"`at_most_one = [{names}]`, for example, would leave at most {left}"
            )
    return f"{message}\nsettle some of them, or add rules (exactly_one, together, implies)"


def _satisfiable(mechanism: Mechanism, rules: Sequence[Rule]) -> bool:
    try:
        return next(iter(_Walk(mechanism, rules)), None) is not None
    except _TooManyStepsError:
        return True


def _contradiction(mechanism: Mechanism) -> InputError:
    """Return the error that names a smallest set of rules that cannot all be kept."""
    guilty = list(mechanism.rules)
    for rule in mechanism.rules:
        others = [r for r in guilty if r is not rule]
        if not _satisfiable(mechanism, others):
            guilty = others
    names = " and ".join(f"'{rule.name}'" for rule in guilty)
    said = "leaves" if len(guilty) == 1 else "contradict each other and leave"
    return InputError(
        f"{'rule' if len(guilty) == 1 else 'rules'} {names} {said} no variant; change or drop "
        f"{'it' if len(guilty) == 1 else 'one of them'}",
        where=where(mechanism, f"rule.{guilty[0].name}"),
    )
