"""How working wirings stand to each other: which are minimal, which differ by one edge."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.enumeration import codes
from ruleout.survey.types import Signs

Flags = NDArray[np.bool_]
_CHUNK = 512


def _masks(signs: Signs) -> NDArray[np.int64]:
    """Return one bit for each possible edge and sign."""
    flat = signs.reshape(len(signs), signs.shape[1] ** 2)
    both = np.concatenate([flat > 0, flat < 0], axis=1)
    weights = np.left_shift(np.int64(1), np.arange(both.shape[1], dtype=np.int64))
    return np.asarray(both.astype(np.int64) @ weights)


def find_minimal(signs: Signs, works: Flags) -> Flags:
    """Return which working wirings contain no smaller working one.

    Parameters
    ----------
    signs : (T, n, n) int8 array
        n up to 5, so that the edges fit the bits of an integer.
    works : (T,) bool array
    """
    at = np.flatnonzero(works)
    masks = _masks(signs[at])
    minimal = np.zeros(len(signs), dtype=bool)
    for first in range(0, len(at), _CHUNK):
        mine = masks[first : first + _CHUNK, None]
        inside = (masks[None] & ~mine) == 0
        minimal[at[first : first + _CHUNK]] = inside.sum(axis=1) == 1
    return minimal


def find_links(signs: Signs, works: Flags) -> NDArray[np.int64]:
    """Return the pairs of working wirings that differ in one edge, added, taken or turned.

    Returns
    -------
    (L, 2) int64 array
        Row numbers, the smaller first.
    """
    at = np.flatnonzero(works)
    mine = codes(signs[at])
    order = np.argsort(mine)
    known = mine[order]
    flat = signs[at].reshape(len(at), signs.shape[1] ** 2).astype(np.int64)
    size = flat.shape[1]
    found = []
    for k in range(size):
        weight = 3 ** (size - 1 - k)
        for value in (-1, 0, 1):
            other = mine + (value - flat[:, k]) * weight
            place = np.minimum(np.searchsorted(known, other), max(len(known) - 1, 0))
            hit = (
                (flat[:, k] < value) & (known[place] == other) if len(known) else np.zeros(0, bool)
            )
            found.append(np.column_stack([at[hit], at[order[place[hit]]]]))
    pairs = np.sort(np.concatenate(found), axis=1)
    return pairs[np.lexsort((pairs[:, 1], pairs[:, 0]))]
