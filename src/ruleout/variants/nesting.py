"""Which wiring can be reduced to which by sending strengths to no effect."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

import networkx as nx

from ruleout.errors import InputError
from ruleout.expressions import ZERO, substitute, symbols
from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge, Fixed, Mechanism, Prior, Tied
from ruleout.variants.contests import has_half, has_hill, matches, onto_edge, settle
from ruleout.variants.expansion import Draft, where
from ruleout.variants.rates import rate_expression
from ruleout.variants.types import Contest, Option, Wiring

_RANK = {"linear": 0, "saturating": 1, "hill": 2}


def _rate_switches_off(edge: Edge, nodes: Collection[str]) -> tuple[str, ...] | None:
    """Return parameters that, sent to zero, silence a rate expression; None if there are none."""
    rate = rate_expression(edge, nodes)
    own = sorted(symbols(rate) - set(nodes) - {"time"})
    for group in [(name,) for name in own] + [tuple(own)]:
        if group and substitute([rate], dict.fromkeys(group, ZERO))[0] is ZERO:
            return group
    return None


def strengths(edge: Edge, nodes: Collection[str]) -> tuple[str, ...] | None:
    """Return the parameters whose limits take a settled edge's effect away.

    None for an edge with no such limit: a ``necessary`` factor, or a rate expression that no
    parameter of its own silences.
    """
    name = edge.name
    if edge.rates:
        return _rate_switches_off(edge, nodes)
    if edge.effects[0] == "binds":
        return (f"{name}.rate", f"{name}.release")
    if edge.material:
        return (f"{name}.rate", f"{name}.rate_back") if edge.reversible else (f"{name}.rate",)
    if divides(edge, edge.effects[0]):
        return (f"{name}.half",)
    return None if edge.necessary else (f"{name}.strength",)


class Nesting:
    """Structural nesting of the wirings of one mechanism.

    Parameters
    ----------
    mechanism : Mechanism
    contests : sequence of Contest
    read : collection of str
        Nodes that readouts look at: a wiring with one never reduces to a wiring without it.
    """

    def __init__(
        self, mechanism: Mechanism, contests: Sequence[Contest], read: Collection[str]
    ) -> None:
        self.priors: Mapping[str, Prior] = mechanism.priors
        self.read = frozenset(read)
        self.nodes = frozenset(mechanism.nodes)
        ties = nx.Graph(
            (name, prior.to) for name, prior in self.priors.items() if isinstance(prior, Tied)
        )
        self.tied = {name: group for group in nx.connected_components(ties) for name in group}
        self.reduces = {
            contest.name: self._reductions(mechanism, contest)
            for contest in contests
            if contest.name in mechanism.edges
        }

    def _movable(self, parameters: Collection[str] | None) -> bool:
        """Return whether none of the parameters is fixed, by itself or through a tie."""
        return parameters is not None and not any(
            isinstance(self.priors.get(other), Fixed)
            for name in parameters
            for other in self.tied.get(name, (name,))
        )

    def _law_limit(self, edge: Edge, larger: Option, smaller: Option) -> bool:
        """Return whether one law of an edge is a limit of another."""
        if larger.effect != smaller.effect or larger.law is None or smaller.law is None:
            return False
        high, low = _RANK[larger.law], _RANK[smaller.law]
        one = settle(edge, larger)
        if divides(one, one.effects[0]):
            low = max(low, 1)
        if high <= low:
            return False
        if high == 2:
            prior = self.priors.get(f"{edge.name}.hill")
            if isinstance(prior, Fixed) and prior.value != 1.0:
                return False
        if low == 0:
            scale = strengths(one, self.nodes)
            return scale is not None and self._movable((f"{edge.name}.half", *scale))
        return True

    def _reductions(self, mechanism: Mechanism, contest: Contest) -> set[tuple[Option, Option]]:
        """Return pairs of options (larger, smaller), closed under going on from one to the next."""
        edge, options = mechanism.edges[contest.name], contest.options
        pairs = {
            (a, b)
            for a in options
            for b in options
            if a.present
            and a != b
            and (
                (self._fades(settle(edge, a)) if not b.present else self._law_limit(edge, a, b))
                or any(
                    matches(edge, a, large) and matches(edge, b, small)
                    for large, small in edge.contains
                )
            )
        }
        for middle in options:
            into = [a for a in options if (a, middle) in pairs]
            onward = [b for b in options if (middle, b) in pairs]
            pairs |= {(a, b) for a in into for b in onward if a != b}
        for a, b in pairs:
            if (b, a) in pairs:
                raise InputError(
                    f"'{a}' and '{b}' would contain each other; say which is the larger one",
                    where=where(mechanism, f"edge.{edge.name}.contains"),
                )
        return pairs

    def _fades(self, edge: Edge) -> bool:
        return self._movable(strengths(edge, self.nodes))

    def _tied_elsewhere(self, edge: Edge, parameters: Collection[str], survivors: Wiring) -> bool:
        """Return whether a parameter that would have to go is tied to one that stays."""
        tied = {other for name in parameters for other in self.tied.get(name, ())}
        owners = {name.partition(".")[0] for name in tied} - {edge.name}
        return any(owner in survivors.nodes or owner in survivors.edges for owner in owners)

    def _irrelevant(self, edge: Edge, smaller: Wiring) -> bool:
        """Return whether an edge acts only on what the smaller wiring lacks."""
        target = onto_edge(edge)
        if target is not None:
            return target not in smaller.edges
        if edge.material:
            return not any(name in smaller.nodes for name, _ in (*edge.sources, *edge.targets))
        return not any(name in smaller.nodes for name, _ in edge.targets)

    def _drops(self, larger: Draft, smaller: Draft, name: str) -> bool:
        """Return whether an edge that the smaller wiring lacks can be without effect."""
        edge = larger.wiring.edges[name]
        if self._irrelevant(edge, smaller.wiring):
            return True
        pairs = self.reduces.get(name)
        declared = pairs is not None and (larger.choices[name], Option(False)) in pairs
        fades = declared or self._fades(edge)
        going = strengths(edge, self.nodes) or ()
        return fades and not self._tied_elsewhere(edge, going, smaller.wiring)

    def contains(self, larger: Draft, smaller: Draft) -> bool:
        """Return whether ``larger`` can be reduced to ``smaller`` (they differ)."""
        big, small = larger.wiring, smaller.wiring
        if not (small.nodes.keys() <= big.nodes.keys() and small.edges.keys() <= big.edges.keys()):
            return False
        if self.read & (big.nodes.keys() - small.nodes.keys()):
            return False
        for name, pairs in self.reduces.items():
            a, b = larger.choices[name], smaller.choices[name]
            if a == b or not b.present:
                continue
            if (a, b) not in pairs:
                return False
            one, other = big.edges[name], small.edges[name]
            going = {f"{name}.hill"} if has_hill(one) else set()
            if has_half(one) and not has_half(other):
                going |= {f"{name}.half", *(strengths(one, self.nodes) or ())}
            if self._tied_elsewhere(one, going, small):
                return False
        return all(self._drops(larger, smaller, n) for n in big.edges.keys() - small.edges.keys())

    def relation(self, drafts: Sequence[Draft]) -> list[frozenset[int]]:
        """Return, for every wiring, the positions of those it contains, transitively closed."""
        direct = [
            {j for j, b in enumerate(drafts) if j != i and self.contains(a, b)}
            for i, a in enumerate(drafts)
        ]
        while True:
            longer = [
                below.union(*(direct[j] for j in below)) - {i} for i, below in enumerate(direct)
            ]
            if longer == direct:
                return [frozenset(below) for below in direct]
            direct = longer
