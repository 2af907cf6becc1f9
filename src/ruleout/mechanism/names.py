"""Members of rules and claims: contested nodes and edges, and ways to settle them."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.errors import InputError, did_you_mean
from ruleout.mechanism.types import Edge, Node


def options(edge: Edge) -> tuple[str, ...]:
    """Return the words for the ways to settle ``edge``: its effects, and its laws or rate labels.

    ``effect/law`` and ``effect/label`` name both at once.
    """
    ways = tuple(label for label, _ in edge.rates if label) or (() if edge.rates else edge.laws)
    pairs = (f"{effect}/{way}" for effect in edge.effects for way in ways)
    absent = ("absent",) if edge.removable else ()
    return (*edge.effects, *ways, *absent, *pairs)


def in_dispute(edge: Edge, nodes: Mapping[str, Node]) -> bool:
    """Return whether ``edge`` is contested, by itself or through a node it needs."""
    if edge.removable or max(len(edge.effects), len(edge.laws), len(edge.rates)) > 1:
        return True
    return any(nodes[name].contested for name, _ in (*edge.sources, *edge.targets))


def check_member(
    member: str,
    nodes: Mapping[str, Node],
    edges: Mapping[str, Edge],
    where: str,
    *,
    contested: bool,
) -> None:
    """Raise InputError unless ``member`` is ``NODE``, ``EDGE`` or ``EDGE=option``.

    Parameters
    ----------
    contested : bool
        Whether only what is in dispute may be named.
    """
    name, equals, option = member.partition("=")
    if name not in nodes and name not in edges:
        near = did_you_mean(name, [*edges, *nodes])
        raise InputError(f"'{name}' is no edge or node of this mechanism{near}", where=where)
    edge = edges.get(name)
    if equals:
        allowed = options(edge) if edge else ("absent", "present")
        if option not in allowed:
            near = did_you_mean(option, allowed)
            raise InputError(
                f"'{option}' is no option of '{name}'{near}; it has {', '.join(allowed)}",
                where=where,
            )
    disputed = in_dispute(edge, nodes) if edge else nodes[name].contested
    if contested and not disputed:
        raise InputError(
            f"'{name}' is not in dispute, so no rule can bear on it; write contested = true there "
            "or leave it out here",
            where=where,
        )
