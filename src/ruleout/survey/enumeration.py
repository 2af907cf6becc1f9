"""All wirings of a family as integer sign matrices, labelled or up to relabelling."""

from __future__ import annotations

from itertools import permutations

import numpy as np
from numpy.typing import NDArray

from ruleout.errors import InputError
from ruleout.survey.types import Family, Signs

MOST_TOPOLOGIES = 5_000_000
"""Rows that an enumeration may hold at any time."""

Flags = NDArray[np.bool_]


def enumerate_family(family: Family) -> Signs:
    """Return every wiring of a family.

    Parameters
    ----------
    family : Family

    Returns
    -------
    (T, n, n) int8 array
        ``signs[t, i, j]`` is the effect of node i on node j: 1, -1 or 0 (no edge). In order of
        their codes; with ``relabelled``, the wiring of lowest code stands for its class.

    Raises
    ------
    InputError
        If the family has more than ``MOST_TOPOLOGIES`` members on the way.
    """
    n = len(family.nodes)
    rows = np.zeros((1, 0), dtype=np.int8)
    pairs = [(i, j) for i in range(n) for j in range(n)]
    for k, (i, j) in enumerate(pairs):
        options = np.array(family.allowed[i][j], dtype=np.int8)
        if len(rows) * len(options) > MOST_TOPOLOGIES:
            raise InputError(
                f"this family has more than {MOST_TOPOLOGIES:,} wirings; lower 'most_edges', leave "
                "out self-edges or give fewer signs"
            )
        left = np.repeat(rows, len(options), axis=0)
        rows = np.column_stack([left, np.tile(options, len(rows))])
        edges = np.count_nonzero(rows, axis=1)
        possible = sum(any(family.allowed[a][b]) for a, b in pairs[k + 1 :])
        rows = rows[(edges <= family.most_edges) & (edges + possible >= family.fewest_edges)]
    signs = rows.reshape(-1, n, n)
    if family.must_reach and family.source:
        signs = signs[reaches(signs, [target for target, _ in family.drives], family.output)]
    if family.connected:
        signs = signs[is_connected(signs)]
    signs = signs[np.argsort(codes(signs))]
    return representatives(signs, symmetries(family)) if family.relabelled else signs


def codes(signs: Signs) -> NDArray[np.int64]:
    """Return the number of each wiring: its signs as base-3 digits (-, 0, +), row by row."""
    flat = signs.reshape(len(signs), signs.shape[1] ** 2).astype(np.int64) + 1
    weights = 3 ** np.arange(flat.shape[1] - 1, -1, -1, dtype=np.int64)
    return np.asarray(flat @ weights)


def label(signs: Signs) -> str:
    """Return a wiring as text, one group per source: ``+0-|00+|-00``."""
    return "|".join("".join("-0+"[s + 1] for s in row) for row in signs.tolist())


def from_label(text: str) -> Signs:
    """Return the sign matrix that :func:`label` wrote."""
    return np.array([["-0+".index(c) - 1 for c in row] for row in text.split("|")], dtype=np.int8)


def in_words(family: Family, signs: Signs) -> str:
    """Return the edges of a wiring in words: ``A -> B; B -| C``."""
    arrows = {1: "->", -1: "-|"}
    return "; ".join(
        f"{family.nodes[i]} {arrows[int(signs[i, j])]} {family.nodes[j]}"
        for i, j in np.argwhere(signs)
    )


def closure(signs: Signs) -> Flags:
    """Return which nodes a path of any length (none included) leads to, as (T, n, n) flags."""
    n = signs.shape[1]
    reach = (signs != 0) | np.eye(n, dtype=bool)
    for _ in range(max(n - 1, 1).bit_length()):
        reach = np.matmul(reach, reach)
    return np.asarray(reach)


def reaches(signs: Signs, sources: list[int], target: int) -> Flags:
    """Return whether a directed path leads from any of ``sources`` to ``target``."""
    return np.asarray(closure(signs)[:, sources, target].any(axis=1))


def is_connected(signs: Signs) -> Flags:
    """Return whether the wiring hangs together, directions aside."""
    both = signs != 0
    return np.asarray(closure((both | both.transpose(0, 2, 1)).astype(np.int8)).all(axis=(1, 2)))


def symmetries(family: Family) -> list[tuple[int, ...]]:
    """Return the relabellings that leave a family as it is, the identity first.

    Nodes that the input acts on and (where there is an input) the output keep their places; the
    others may be exchanged if the same edges may exist between them.
    """
    n = len(family.nodes)
    fixed = {target for target, _ in family.drives} | ({family.output} if family.source else set())
    allowed = [[frozenset(cell) for cell in row] for row in family.allowed]
    return [
        p
        for p in permutations(range(n))
        if all(p[i] == i for i in fixed)
        and all(allowed[p[i]][p[j]] == allowed[i][j] for i in range(n) for j in range(n))
        and all(family.starts[p[i]] == family.starts[i] for i in range(n))
    ]


def _relabelled_codes(signs: Signs, group: list[tuple[int, ...]]) -> NDArray[np.int64]:
    return np.stack([codes(signs[:, p][:, :, p]) for p in map(list, group)], axis=1)


def representatives(signs: Signs, group: list[tuple[int, ...]]) -> Signs:
    """Return the wirings that have the lowest code among their relabellings."""
    return np.asarray(signs[codes(signs) == _relabelled_codes(signs, group).min(axis=1)])


def class_sizes(signs: Signs, group: list[tuple[int, ...]]) -> NDArray[np.int64]:
    """Return how many different wirings the relabellings of each one give."""
    relabelled = np.sort(_relabelled_codes(signs, group), axis=1)
    return np.asarray(1 + np.count_nonzero(np.diff(relabelled, axis=1), axis=1))
