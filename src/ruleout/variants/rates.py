"""Rate expressions of material edges, with their parameters under their full names."""

from __future__ import annotations

from collections.abc import Collection
from functools import lru_cache

from ruleout.expressions import Expr, parse, substitute, sym, symbols
from ruleout.mechanism.types import Edge


def rate_expression(edge: Edge, nodes: Collection[str]) -> Expr:
    """Return the rate expression of a settled edge.

    Nodes stand under their names, ``time`` under its own, any other name ``k`` as ``EDGE.k``.

    Parameters
    ----------
    edge : Edge
        With exactly one rate.
    nodes : collection of str
        Names that mean amounts: all nodes of the mechanism, present or not.
    """
    return _read(edge.name, edge.rates[0][1], frozenset(nodes))


@lru_cache(maxsize=4096)
def _read(edge: str, text: str, nodes: frozenset[str]) -> Expr:
    rate = parse(text)
    own = symbols(rate) - nodes - {"time"}
    (full,) = substitute([rate], {name: sym(f"{edge}.{name}") for name in own if "." not in name})
    return full
