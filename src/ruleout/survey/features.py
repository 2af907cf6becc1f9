"""Structural features of wirings: edges, loops, feed-forward pairs, all as columns of flags."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import combinations, pairwise, permutations

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.enumeration import symmetries
from ruleout.survey.types import Family, Signs

Flags = NDArray[np.bool_]
Path = tuple[int, ...]
Add = Callable[[str, Flags], None]


@dataclass(frozen=True, slots=True, eq=False)
class Features:
    """Structural features of T wirings.

    Attributes
    ----------
    names : tuple of str, length F
        As they stand after 'has': ``A -> B``, ``a negative loop B-C``, ...
    have : (T, F) bool array
    searched : (F,) bool array or None
        Which of them statements may be made of; None for all. Others are counted only.
    """

    names: tuple[str, ...]
    have: Flags
    searched: Flags | None = None

    def for_statements(self) -> Features:
        """Return those that statements may be made of."""
        if self.searched is None:
            return self
        kept = np.flatnonzero(self.searched)
        return Features(tuple(self.names[k] for k in kept), self.have[:, kept])


def circuits(n: int) -> Iterator[Path]:
    """Yield every simple directed cycle of the complete graph, self-edges first."""
    for length in range(1, n + 1):
        for nodes in combinations(range(n), length):
            for rest in permutations(nodes[1:]):
                yield (nodes[0], *rest)


def paths(n: int, start: int, end: int) -> Iterator[Path]:
    """Yield every simple path between two different nodes of the complete graph, shortest first."""
    inner = [k for k in range(n) if k not in (start, end)]
    for length in range(len(inner) + 1):
        for middle in permutations(inner, length):
            yield (start, *middle, end)


def circuit_sign(signs: Signs, circuit: Path) -> Signs:
    """Return the product of signs around a cycle, 0 where it is not closed."""
    return path_sign(signs, (*circuit, circuit[0]))


def path_sign(signs: Signs, path: Path) -> Signs:
    """Return the product of signs along a path, 0 where an edge is missing."""
    product = np.ones(len(signs), dtype=np.int8)
    for a, b in pairwise(path):
        product = product * signs[:, a, b]
    return product


def circuit_signs(signs: Signs) -> tuple[Flags, Flags]:
    """Return whether each wiring has a positive, and whether it has a negative circuit."""
    plus = np.zeros(len(signs), dtype=bool)
    minus = np.zeros(len(signs), dtype=bool)
    for circuit in circuits(signs.shape[1]):
        product = circuit_sign(signs, circuit)
        plus |= product > 0
        minus |= product < 0
    return plus, minus


def off_main_path(family: Family, signs: Signs) -> Flags:
    """Return which nodes (T, n) lie on no shortest path from the input to the output."""
    n = signs.shape[1]
    off = np.ones((len(signs), n), dtype=bool)
    shortest = np.full(len(signs), n + 1)
    runs = [
        path
        for start in sorted({target for target, _ in family.drives})
        for path in ([(start,)] if start == family.output else paths(n, start, family.output))
    ]
    present = [path_sign(signs, path) != 0 for path in runs]
    for path, there in zip(runs, present, strict=True):
        shortest = np.where(there, np.minimum(shortest, len(path)), shortest)
    for path, there in zip(runs, present, strict=True):
        off[np.ix_(there & (shortest == len(path)), list(path))] = False
    return off


def find_features(family: Family, signs: Signs) -> Features:
    """Return the structural features of every wiring.

    Parameters
    ----------
    family : Family
    signs : (T, n, n) int8 array

    Notes
    -----
    Where wirings are counted up to relabelling, nodes that may be exchanged have no names of their
    own, and features that would need them are left out.

    A *proportioner* is a node on the longer one of two paths of opposite sign that leave an input
    node and meet at the output (incoherent feed-forward); a *buffer* is a node off the shortest
    path from input to output through which a negative loop runs that also runs through a node on
    it. Both words are those of Ma et al. (2009, doi:10.1016/j.cell.2009.06.013); the definitions
    here are structural only.
    """
    columns: dict[str, Flags] = {}

    def add(name: str, have: Flags) -> None:
        if name in columns:
            have = columns[name] | have
        columns[name] = have

    nodes, n = family.nodes, len(family.nodes)
    named = _named_nodes(family)
    _add_edges(family, signs, named, add)
    plus, minus = circuit_signs(signs)
    add("a positive loop", plus)
    add("a negative loop", minus)
    for circuit in circuits(n):
        product = circuit_sign(signs, circuit)
        if len(circuit) == 1:
            name = nodes[circuit[0]] if named[circuit[0]] else "a node"
            add(f"{name} stimulating itself", product > 0)
            add(f"{name} inhibiting itself", product < 0)
            continue
        for sign, word in ((1, "positive"), (-1, "negative")):
            closed = product == sign
            add(f"a {word} loop of two nodes or more", closed)
            add(f"a {word} loop of {len(circuit)} nodes", closed)
            if named[list(circuit)].all():
                add(f"a {word} loop {'-'.join(nodes[k] for k in circuit)}", closed)
    if family.source:
        _add_feed_forward(family, signs, add)
        off = off_main_path(family, signs)
        for circuit in circuits(n):
            if len(circuit) == 1:
                continue
            outside = off[:, list(circuit)]
            buffered = outside.any(axis=1) & ~outside.all(axis=1)
            product = circuit_sign(signs, circuit)
            add("a negative loop through a buffer node", buffered & (product < 0))
            add("a positive loop through a node off the main path", buffered & (product > 0))
    structural = len(columns)
    edges = np.count_nonzero(signs, axis=(1, 2))
    for k in range(1, n * n):
        add(f"more than {k} edge{'s' if k > 1 else ''}", edges > k)
    telling = [
        (name, have, k < structural)
        for k, (name, have) in enumerate(columns.items())
        if have.any() and not have.all()
    ]
    have = np.stack([h for _, h, _ in telling], axis=1) if telling else np.zeros((len(signs), 0))
    return Features(
        names=tuple(name for name, _, _ in telling),
        have=have.astype(bool),
        searched=np.array([searched for _, _, searched in telling], dtype=bool),
    )


def _named_nodes(family: Family) -> Flags:
    """Return which nodes (n,) have a name of their own."""
    named = np.ones(len(family.nodes), dtype=bool)
    if family.relabelled:
        for relabelling in symmetries(family):
            named &= np.array(relabelling) == np.arange(len(named))
    return named


def _add_edges(family: Family, signs: Signs, named: Flags, add: Add) -> None:
    for i, source in enumerate(family.nodes):
        for j, target in enumerate(family.nodes):
            if i != j and named[i] and named[j]:
                add(f"{source} -> {target}", signs[:, i, j] > 0)
                add(f"{source} -| {target}", signs[:, i, j] < 0)


def _add_feed_forward(family: Family, signs: Signs, add: Add) -> None:
    n = len(family.nodes)
    driven = dict(family.drives)
    routes: list[tuple[Path, int]] = []
    for start, sign in driven.items():
        if start != family.output:
            routes += [(path, sign) for path in paths(n, start, family.output)]
        else:
            routes.append(((start,), sign))
    for (one, sign_one), (other, sign_other) in combinations(routes, 2):
        # Two routes make a pair if they share nothing but where they part and where they meet.
        if one[0] == other[0]:
            inner, shared = set(one[1:-1]) & set(other[1:-1]), 1
            signs_before = 1
        else:
            inner, shared = set(one[:-1]) & set(other[:-1]), 0
            signs_before = sign_one * sign_other
        if inner or (shared and len(one) == len(other) == 1):
            continue
        product = path_sign(signs, one) * path_sign(signs, other) * signs_before
        add("an incoherent feed-forward to the output", product < 0)
        add("a coherent feed-forward to the output", product > 0)
