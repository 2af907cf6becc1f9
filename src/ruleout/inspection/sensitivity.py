"""Which parameters move the readouts, and which combinations of them cannot be told apart."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.inspection.probe import Probe
from ruleout.inspection.types import Finding
from ruleout.inspection.words import listed, verb
from ruleout.kernel import Status

Array = NDArray[np.float64]
INSENSITIVE = 1e-4
"""Dimensionless sensitivity below which a parameter moves nothing."""
VANISHING = 1e-6
"""Singular values below this share of the largest may be those of directions in which truly nothing
moves: 1e-8 or less is left of one there, because a group of rows shares its steps."""
GAP = 1e-3
"""Fall from one singular value to the next that sets such directions apart; those of parameters
that are merely hard to see fall little by little."""
LEAST_SHARE = 0.2
"""Smallest weight, next to a direction's largest, of a parameter that is named."""


@dataclass(frozen=True, slots=True, eq=False)
class Sensitivities:
    """Dimensionless sensitivities of one variant at K points of its parameter space.

    Attributes
    ----------
    readouts : tuple of str, length R
    parameters : tuple of str, length D'
        Free parameters other than those of the noise.
    table : (K, R, D') array
        Root mean square of dy/d ln p over a readout's points, divided by that of y. The first
        point has every parameter at its prior median.
    matrices : (K, n, D') array
        Rows are points of the readouts, each divided by its readout's root mean square.
    """

    readouts: tuple[str, ...]
    parameters: tuple[str, ...]
    table: Array
    matrices: Array

    @property
    def moving(self) -> NDArray[np.bool_]:
        """Which parameters move some readout somewhere; shape (D',)."""
        if not self.table.size:
            return np.zeros(len(self.parameters), dtype=bool)
        # Of many points one may be off by an error in its derivatives.
        largest = np.sort(self.table.max(axis=1), axis=0)[-min(2, len(self.table))]
        return np.asarray(largest >= INSENSITIVE)


def sensitivities(probe: Probe, q: Array) -> Sensitivities:
    """Return the sensitivities of a variant at coordinates ``q``; unsolvable rows are left out."""
    mu, jacobian, status = probe.predict.derivatives(q)
    fine = (status == Status.OK) & np.isfinite(jacobian).all(axis=(1, 2)) & np.isfinite(mu).all(1)
    use = probe.points.fitted
    space = probe.catalogue.space
    steps = np.where(space.log, 1.0, space.width)[probe.structural]
    mu, jacobian = mu[fine][:, use], jacobian[fine][:, use][:, :, probe.structural] * steps
    names = probe.points.readout[use]
    readouts = tuple(dict.fromkeys(names))
    table = np.zeros((len(mu), len(readouts), jacobian.shape[2]))
    matrices = np.zeros_like(jacobian)
    for r, readout in enumerate(readouts):
        rows = names == readout
        size = np.sqrt(np.mean(mu[:, rows] ** 2, axis=1))[:, None, None]
        with np.errstate(all="ignore"):
            scaled = np.where(size > 0.0, jacobian[:, rows] / size, 0.0)
        matrices[:, rows] = scaled
        table[:, r] = np.sqrt(np.mean(scaled**2, axis=1))
    kept = tuple(
        name for name, is_kept in zip(space.names, probe.structural, strict=True) if is_kept
    )
    return Sensitivities(readouts, kept, table, matrices)


@dataclass(frozen=True, slots=True, eq=False)
class Rank:
    """Rank of the sensitivity matrix of the parameters that move something.

    Attributes
    ----------
    rank : int
        Reached at an eighth or more of the points looked at: points at which little happens accuse
        no parameter, and an error in a few derivatives acquits none.
    directions : tuple of mapping of parameter to float
        Changes (of the logarithm) that no readout sees, one per missing rank.
    straight : bool
        Whether the directions are the same at all points, as products and ratios are.
    """

    rank: int
    directions: tuple[dict[str, float], ...]
    straight: bool


def find_rank(found: Sensitivities) -> Rank:
    """Return the rank and the directions that no readout sees."""
    moving = found.moving
    names = [name for name, moves in zip(found.parameters, moving, strict=True) if moves]
    matrices = found.matrices[:, :, moving]
    if not names or not matrices.size:
        return Rank(0, (), True)
    ranks = np.array([_rank(m) for m in matrices])
    rank = int(np.sort(ranks)[::-1][(len(ranks) - 1) // 8])
    if rank == len(names):
        return Rank(rank, (), True)
    clear = matrices[ranks == rank]
    common = _null_space(np.concatenate(list(clear)))
    straight = len(common) == len(names) - rank
    null = common if straight else _null_space(clear[0])
    directions = []
    for row in _simplified(null):
        weights = dict(zip(names, row, strict=True))
        directions.append({n: w for n, w in weights.items() if abs(w) >= LEAST_SHARE})
    return Rank(rank, tuple(directions), straight)


def _rank(matrix: Array) -> int:
    """Return how many singular values stand before a clear fall to next to nothing."""
    return _clear_rank(np.asarray(np.linalg.svd(matrix, compute_uv=False), dtype=float))


def _clear_rank(singular: Array) -> int:
    if not singular[0] > 0.0:
        return 0
    falls = (singular[1:] < GAP * singular[:-1]) & (singular[1:] < VANISHING * singular[0])
    return int(np.argmax(falls)) + 1 if falls.any() else len(singular)


def _null_space(matrix: Array) -> Array:
    _, singular, directions = np.linalg.svd(matrix, full_matrices=True)
    return np.asarray(directions[_clear_rank(singular) :])


def _simplified(rows: Array) -> Array:
    """Return a basis of the same space in which each row leaves out the others' pivots."""
    rows = rows.copy()
    for k in range(len(rows)):
        _, column = divmod(int(np.argmax(np.abs(rows[k:]))), rows.shape[1])
        best = k + int(np.argmax(np.abs(rows[k:, column])))
        rows[[k, best]] = rows[[best, k]]
        rows[k] /= rows[k, column]
        for other in range(len(rows)):
            if other != k:
                rows[other] -= rows[other, column] * rows[k]
    return np.asarray(rows / np.max(np.abs(rows), axis=1, keepdims=True))


def sensitivity_findings(probe: Probe, found: Sensitivities, rank: Rank) -> Iterator[Finding]:
    """Yield findings on parameters that move nothing and on those that move alike."""
    name = probe.variant.name
    if not len(found.table):
        yield Finding(
            name,
            "integration",
            "sensitivities",
            "The equations can be solved neither at the prior medians nor at the draws tried.",
            "Narrow the priors to values at which the system can live.",
        )
        return
    still = [p for p, moves in zip(found.parameters, found.moving, strict=True) if not moves]
    if still:
        yield Finding(
            name,
            "insensitive",
            ", ".join(still),
            f"No readout moves with {listed(still)} at any of the points of the priors tried.",
            "The posterior will be the prior: fix it, or measure something that depends on it.",
        )
    for direction in rank.directions:
        names = sorted(direction)
        yield Finding(
            name,
            "not identifiable",
            ", ".join(names),
            _say_direction(direction, rank.straight),
            "Verdicts stay valid (priors are proper), but these values will not be found: fix one "
            "of them under [prior], or measure more.",
        )


def _say_direction(direction: dict[str, float], straight: bool) -> str:
    up = [n for n, w in direction.items() if w > 0]
    down = [n for n, w in direction.items() if w < 0]
    if not straight or len(direction) == 1:
        return f"Only a combination of {listed(sorted(direction))} can be seen in these readouts."
    if not up or not down:
        return f"No readout moves when {listed(up or down)} change together by suitable factors."
    return (
        f"No readout moves when {listed(up)} {verb(up, 'rise')} and {listed(down)} "
        f"{verb(down, 'fall')} to make up for it."
    )
