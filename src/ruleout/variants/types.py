"""Variants of a mechanism, their nesting, loops and the claims they decide."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from ruleout.mechanism.types import Edge, Effect, Law, Mechanism, Node


@dataclass(frozen=True, slots=True)
class Option:
    """One way to settle a contested node or edge.

    ``present`` False leaves the rest empty. Written ``absent``, ``present`` (a node),
    ``stimulates/hill`` or ``converts/first`` (effect, then law or rate label; an unlabelled rate
    expression leaves the effect alone).
    """

    present: bool
    effect: Effect | None = None
    law: Law | None = None
    rate: str = ""

    def __str__(self) -> str:
        if not self.present:
            return "absent"
        if self.effect is None:
            return "present"
        detail = self.rate or self.law
        return f"{self.effect}/{detail}" if detail else self.effect


@dataclass(frozen=True, slots=True)
class Contest:
    """A contested node or edge and the ways to settle it, in file order."""

    name: str
    options: tuple[Option, ...]


@dataclass(frozen=True, slots=True)
class Wiring:
    """A graph with nothing left in dispute: every edge has one effect, one law, one rate.

    ``absent`` names the contested nodes that are no part of it: rate expressions that speak of
    them find nothing there.
    """

    nodes: Mapping[str, Node]
    edges: Mapping[str, Edge]
    absent: frozenset[str] = frozenset()

    @property
    def names(self) -> frozenset[str]:
        """Every name that means an amount, present or not."""
        return self.absent.union(self.nodes)


@dataclass(frozen=True, slots=True)
class Loop:
    """A feedback loop (or a pair of feed-forward paths) in one wiring.

    Attributes
    ----------
    kind : {"feedback", "feed-forward"}
    sign : int
        +1 or -1: product of net effects (feedback); +1 coherent, -1 incoherent (feed-forward);
        0 if an effect on the way has no fixed sign.
    nodes : tuple of str
        In order along the loop, starting at the alphabetically first; source and target for a
        feed-forward pair.
    edges : tuple of str
        Edges that carry it.
    """

    kind: str
    sign: int
    nodes: tuple[str, ...]
    edges: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Variant:
    """One wiring: every contested choice settled one way.

    Attributes
    ----------
    name : str
        ``v1``, ``v2``, ... from the smallest up, zero-padded to equal width.
    choices : mapping of contested node or edge to Option
        In file order.
    wiring : Wiring
    loops : tuple of Loop
    """

    name: str
    choices: Mapping[str, Option]
    wiring: Wiring
    loops: tuple[Loop, ...] = ()

    @property
    def edges(self) -> tuple[str, ...]:
        """Contested edges that are present, in file order."""
        return tuple(n for n, o in self.choices.items() if o.present and n in self.wiring.edges)

    @property
    def label(self) -> str:
        """``edge=stimulates/hill;other=absent``."""
        return ";".join(f"{name}={option}" for name, option in self.choices.items())


@dataclass(frozen=True, slots=True)
class ClaimSplit:
    """A claim and the variants in which it holds.

    ``settled`` is None, or True/False where the rules alone decide it. ``also`` names merged claims
    that split the variants alike; ``negated`` is unused unless two claims are each other's reverse.
    """

    name: str
    text: str
    holds_in: frozenset[str]
    settled: bool | None = None
    also: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class VariantSet:
    """Everything the graph calculus knows about the variants of one mechanism.

    Attributes
    ----------
    variants : mapping of name to Variant
        From the smallest up (fewest contested choices present, then file order).
    contains : mapping of name to frozenset of names
        Structural nesting: the smaller variants each one can be reduced to by sending strengths
        to no effect. A candidate order only: whether no-effect is reachable under the priors is
        tested numerically once the smaller one is fitted.
    neighbours : mapping of name to mapping of str to tuple of names
        For every variant V and every choice (or tied group of choices) that V lacks, the
        neighbouring variants that have it: ``{"edge name or a+b": ("v3",)}``. N is a neighbour of
        V if no allowed variant differs from V by a proper part of N's choices.
    claims : tuple of ClaimSplit
    out_of_reach : tuple of str
        Contested edges or nodes that cannot influence any measured readout in any condition.
    """

    mechanism: Mechanism
    contests: tuple[Contest, ...]
    variants: Mapping[str, Variant]
    contains: Mapping[str, frozenset[str]]
    neighbours: Mapping[str, Mapping[str, tuple[str, ...]]]
    claims: tuple[ClaimSplit, ...]
    out_of_reach: tuple[str, ...] = field(default=())
