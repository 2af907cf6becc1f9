"""Whether a variant that lacks a choice can draw the same curves as one that has it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from ruleout.inspection.probe import Probe

Array = NDArray[np.float64]
ITERATIONS = 20
MATTERS = 0.05
"""A choice matters at a draw if a readout changes by this share of its size."""
MATCHED = 0.005
"""Curves this close, as a share of a readout's size, are taken for the same."""
TRIED = 12
"""Draws at which the choice matters that are matched."""
FEWEST = 3
IMITATED = 0.9
"""Share of them that must be matched; bounds of priors stand in the way of a few."""
REACH = 3.0
"""Prior standard deviations from the centre that a match may use."""


def can_imitate(smaller: Probe, larger: Probe, q: Array) -> bool | None:
    """Return whether ``smaller`` can draw the curves of ``larger``.

    Parameters
    ----------
    smaller, larger : Probe
        ``larger`` has a choice that ``smaller`` lacks.
    q : (B, D) array
        Prior draws of ``larger``. Those at which the choice matters are matched.

    Returns
    -------
    bool or None
        None if the choice matters at too few draws to tell.

    Notes
    -----
    Levenberg-Marquardt on the noise-free curves from the shared parameters, within the priors.
    """
    use = smaller.points.fitted
    target, _ = larger.predict(q)
    start = _shared(smaller, larger, q)
    own, _ = smaller.predict(start)
    size = _sizes(smaller.points.readout, target)
    gap = _gap(own, target, size, use)
    rows = np.flatnonzero(np.isfinite(gap) & (gap > MATTERS))[:TRIED]
    if len(rows) < FEWEST:
        return None
    found = _descend(smaller, start[rows], target[rows], size[rows])
    reached, _ = smaller.predict(found)
    return bool(np.mean(_gap(reached, target[rows], size[rows], use) < MATCHED) >= IMITATED)


def _shared(smaller: Probe, larger: Probe, q: Array) -> Array:
    """Return coordinates of ``smaller``: shared ones from ``q``, others at the prior median."""
    space = smaller.catalogue.space
    out = np.repeat(space.quantile(np.full((1, space.dimension), 0.5)), len(q), axis=0)
    at = {name: j for j, name in enumerate(larger.catalogue.space.names)}
    for j, name in enumerate(space.names):
        if name in at:
            out[:, j] = q[:, at[name]]
    return out


def _sizes(readouts: Sequence[str] | NDArray[np.object_], mu: Array) -> Array:
    """Return the root mean square of every point's readout, (B, n)."""
    out = np.ones_like(mu)
    names = np.asarray(readouts, dtype=object)
    for readout in dict.fromkeys(names):
        rows = names == readout
        out[:, rows] = np.sqrt(np.mean(mu[:, rows] ** 2, axis=1, keepdims=True))
    return np.where(out > 0.0, out, 1.0)


def _gap(mu: Array, target: Array, size: Array, use: NDArray[np.bool_]) -> Array:
    """Return the largest distance relative to the readout's size, (B,); inf where unsolved."""
    with np.errstate(invalid="ignore"):
        apart = np.abs(mu - target)[:, use] / size[:, use]
    return np.where(np.isfinite(apart).all(axis=1), apart.max(axis=1, initial=0.0), np.inf)


def _descend(probe: Probe, q: Array, target: Array, size: Array) -> Array:
    space = probe.catalogue.space
    use = probe.points.fitted
    with np.errstate(invalid="ignore"):
        low = np.where(np.isfinite(space.low), space.low, space.center - REACH * space.sd)
        high = np.where(np.isfinite(space.high), space.high, space.center + REACH * space.sd)
    q = np.clip(q, low, high)
    damping = np.full(len(q), 1e-3)
    best = np.full(len(q), np.inf)
    identity = np.eye(space.dimension)
    trial = q
    for _ in range(ITERATIONS):
        if (best < MATCHED**2).all():
            break
        mu, jacobian, _ = probe.predict.derivatives(trial)
        residual = np.nan_to_num((target - mu)[:, use] / size[:, use], nan=1e6)
        cost = np.sum(residual**2, axis=1)
        better = cost < best
        damping = np.clip(np.where(better, 0.2 * damping, 8.0 * damping), 1e-10, 1e4)
        if best[0] == np.inf:
            slopes, left = np.zeros((len(q), int(use.sum()), space.dimension)), residual
        scaled = np.nan_to_num(jacobian[:, use] / size[:, use, None], posinf=0.0, neginf=0.0)
        q = np.where(better[:, None], trial, q)
        slopes = np.where(better[:, None, None], scaled, slopes)
        left = np.where(better[:, None], residual, left)
        best = np.minimum(cost, best)
        gradient = np.einsum("bnd,bn->bd", slopes, left)
        held = ((q <= low) & (gradient < 0.0)) | ((q >= high) & (gradient > 0.0))
        free = ~held
        matrix = np.swapaxes(slopes, 1, 2) @ slopes * (free[:, :, None] & free[:, None, :])
        # Parameters that move nothing here have no curvature of their own to divide by.
        floor = 1.0 + np.einsum("bdd->b", matrix)
        matrix = matrix + (damping * floor)[:, None, None] * identity
        step = np.linalg.solve(matrix, np.where(held, 0.0, gradient)[:, :, None])[:, :, 0]
        trial = np.clip(q + np.clip(step, -2.5, 2.5), low, high)
    return q


def choice_pairs(
    neighbours: Mapping[str, Mapping[str, Sequence[str]]], most: int
) -> dict[str, list[tuple[str, str]]]:
    """Return pairs (without, with) per choice, taken in turn so that every choice gets its share.

    Parameters
    ----------
    neighbours : mapping
        As in :class:`ruleout.variants.VariantSet`.
    most : int
        Pairs in all.
    """
    queues: dict[str, list[tuple[str, str]]] = {}
    for name, choices in neighbours.items():
        for choice, others in choices.items():
            queues.setdefault(choice, []).extend((name, other) for other in others)
    picked: dict[str, list[tuple[str, str]]] = {choice: [] for choice in queues}
    for rank in range(max(map(len, queues.values()), default=0)):
        for choice, pairs in queues.items():
            if rank < len(pairs) and sum(map(len, picked.values())) < most:
                picked[choice].append(pairs[rank])
    return picked
