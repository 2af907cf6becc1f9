"""How working wirings stand to each other: which are minimal, which differ by one edge."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Flags = NDArray[np.bool_]
Choices = NDArray[np.int8]
_CHUNK = 512


def find_minimal(choices: Choices, works: Flags) -> Flags:
    """Return which working wirings contain no smaller working one.

    Parameters
    ----------
    choices : (T, K) int8 array
        What each wiring chooses; one contains another that differs from it by absences (0) only.
    works : (T,) bool array
    """
    at = np.flatnonzero(works)
    mine = choices[at]
    values = [v for v in np.unique(mine) if v]
    chosen = np.concatenate([mine == v for v in values], axis=1) if values else mine != 0
    has, lacks = chosen.astype(np.float32), (~chosen).astype(np.float32)
    minimal = np.zeros(len(choices), dtype=bool)
    for first in range(0, len(at), _CHUNK):
        # Entry (a, b): choices of b that a lacks. None lacking: b is contained in a.
        missing = lacks[first : first + _CHUNK] @ has.T
        minimal[at[first : first + _CHUNK]] = (missing == 0.0).sum(axis=1) == 1
    return minimal


def find_links(choices: Choices, works: Flags) -> NDArray[np.int64]:
    """Return the pairs of working wirings that differ in one choice, added, taken or changed.

    Returns
    -------
    (L, 2) int64 array
        Row numbers, the smaller first.
    """
    at = np.flatnonzero(works)
    found = [np.empty((0, 2), dtype=np.int64)]
    for k in range(choices.shape[1] if len(at) else 0):
        others = np.delete(choices[at], k, axis=1)
        group = np.unique(others, axis=0, return_inverse=True)[1].ravel()
        order = np.argsort(group, kind="stable")
        sorted_group = group[order]
        for step in range(1, len(at)):
            same = sorted_group[:-step] == sorted_group[step:]
            if not same.any():
                break
            found.append(np.column_stack([at[order[:-step][same]], at[order[step:][same]]]))
    pairs = np.sort(np.concatenate(found), axis=1)
    return pairs[np.lexsort((pairs[:, 1], pairs[:, 0]))]
