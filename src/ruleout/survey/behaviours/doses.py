"""Steady outputs along the input, swept up and down."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.behaviours.base import Array, Subject, rest

Flags = NDArray[np.bool_]


def sweep(subject: Subject, levels: Array, start: Array | None = None) -> tuple[Array, Flags]:
    """Return steady states along rising or falling inputs, each from the one before.

    Parameters
    ----------
    subject : Subject
        M parameter sets.
    levels : (L,) or (M, L) array
    start : (M, N) array, optional

    Returns
    -------
    states : (M, L, N) array
    settled : (M,) bool array
        Whether every flow of the row settled.
    """
    count = len(subject.p)
    levels = np.broadcast_to(levels, (count, levels.shape[-1]))
    states = np.full((count, levels.shape[1], len(subject.start)), np.nan)
    settled = np.ones(count, dtype=bool)
    here = np.broadcast_to(subject.start, (count, len(subject.start))) if start is None else start
    for k in range(levels.shape[1]):
        live = np.flatnonzero(settled)
        found, good, _ = rest(subject, subject.at_input(levels[:, k])[live], here[live])
        settled[live[~good]] = False
        states[live, k] = found
        here = states[:, k]
    return states, settled
