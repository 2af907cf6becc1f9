"""Edge statistics: how much a fit improves when a choice the variant lacks is let in.

For every neighbour N of a variant V the objective (-2 log posterior) of V's refit is compared with
that of N, fitted to the same data by a fixed, deterministic search that starts at V's refit. It is
a function of the data alone, so replicates calibrate it whatever its distribution: near no-effect,
with bounds, or for rival choices that nest nothing.

A rival that does not contain V may fit best far from V's parameters. For it the search starts from
an anchor too: the optimum of a global search on a data set drawn from V's best fit, and so as fair
to the replicates as to the data.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.stats import qmc

from ruleout.checks.statistics import Column
from ruleout.fitting import Posterior, Sample, SearchEffort, descend, search

Array = NDArray[np.float64]
Anchors = Mapping[str, Array]
ANCHOR_EFFORT = SearchEffort(screened=128, starts=8, rounds=0)
SCREENED = 16
STARTS = 3
ITERATIONS = 8
TOLERANCE = 0.02


class Edges:
    """The edge statistics of one variant.

    Parameters
    ----------
    posterior : Posterior
        Of the variant.
    neighbours : mapping of choice to posteriors
        Of the neighbouring variants that have the choice.
    """

    def __init__(self, posterior: Posterior, neighbours: Mapping[str, Sequence[Posterior]]) -> None:
        self._neighbours = [list(group) for group in neighbours.values()]
        self._space = posterior.space
        self.columns = tuple(self._column(name, group) for name, group in neighbours.items())

    def _column(self, name: str, group: Sequence[Posterior]) -> Column:
        """Return the column of one choice.

        The fall towards a variant that contains this one is like a chi-square, often of mostly
        zeros; that towards a rival is a difference of two misfits, and nearly normal.
        """
        nested = any(self._contained_in(neighbour) for neighbour in group)
        return Column(f"edge:{name}", counts=True, rooted=nested, narrowest=0.5 if nested else 1.0)

    def _contained_in(self, neighbour: Posterior) -> bool:
        return set(self._space.names) < set(neighbour.space.names)

    def anchors(self, posterior: Posterior, best: Array, seed: np.random.SeedSequence) -> Anchors:
        """Return for every rival the optimum of a global search on data drawn from ``best``.

        A neighbour with all of the variant's parameters and more needs none.
        """
        draw_seed, search_seed = seed.spawn(2)
        zeta, _ = posterior.zeta(best[None])
        generator = np.random.default_rng(draw_seed)
        data = posterior.noise.draw(best[None], zeta, posterior.observed, [generator])
        found: dict[str, Array] = {}
        for group in self._neighbours:
            for rival in group:
                if not self._contained_in(rival):
                    end = search(rival, ANCHOR_EFFORT, search_seed, data=data)
                    if np.isfinite(end.objective[0]):
                        found[rival.model.variant.name] = end.q[0]
        return found

    def __call__(self, q: Array, objective: Array, sample: Sample, anchors: Anchors) -> Array:
        """Return the fall of the objective per choice, (B, number of choices).

        Parameters
        ----------
        q : (B, D) array
            The variant's refits.
        objective : (B,) array
            Their objectives.
        sample : Sample
            The data they were fitted to, one row per refit.
        anchors : mapping of variant to (D',) array
        """
        falls = [
            np.max([self._fall(n, q, objective, sample, anchors) for n in group], axis=0)
            for group in self._neighbours
        ]
        return np.stack(falls, axis=1) if falls else np.zeros((len(q), 0))

    def _fall(
        self,
        neighbour: Posterior,
        q: Array,
        objective: Array,
        sample: Sample,
        anchors: Anchors,
    ) -> Array:
        starts = self._embed(neighbour, q)
        rows, candidates, d = starts.shape
        if candidates > 1:
            flat = starts.reshape(-1, d)
            wide = sample.repeat(candidates)
            zeta, _ = neighbour.zeta(flat, neighbour.sampling_rtol)
            flat = neighbour.noise.profile(flat, zeta, wide, neighbour.fitted)
            screened = neighbour.objective(flat, zeta, wide).reshape(rows, candidates)
            best = np.argsort(screened, axis=1, kind="stable")[:, :STARTS]
            starts = np.take_along_axis(starts, best[:, :, None], axis=1)
        anchor = anchors.get(neighbour.model.variant.name)
        if anchor is not None:
            starts = np.concatenate([starts, np.broadcast_to(anchor, (rows, 1, d))], axis=1)
        each = starts.shape[1]
        ends = descend(
            neighbour,
            starts.reshape(-1, d),
            sample.repeat(each),
            tolerance=TOLERANCE,
            iterations=ITERATIONS,
        )
        lowest = ends.objective.reshape(rows, each).min(axis=1)
        # A neighbour whose every solve failed says nothing against the variant.
        return np.where(np.isfinite(lowest), objective - lowest, 0.0)

    def _embed(self, neighbour: Posterior, q: Array) -> Array:
        """Return starts (B, K, D'): shared parameters from ``q``, new ones on a fixed grid."""
        own = {name: i for i, name in enumerate(self._space.names)}
        space = neighbour.space
        new = [j for j, name in enumerate(space.names) if name not in own]
        candidates = SCREENED if new else 1
        starts = np.empty((len(q), candidates, space.dimension))
        for j, name in enumerate(space.names):
            if name in own:
                starts[:, :, j] = q[:, own[name], None]
        if new:
            # Unscrambled Sobol points: the same grid for the data and for every replicate.
            u = 0.05 + 0.9 * qmc.Sobol(len(new), scramble=False).random(SCREENED + 1)[1:]
            grid = np.full((SCREENED, space.dimension), 0.5)
            grid[:, new] = u
            starts[:, :, new] = space.quantile(grid)[None, :, new]
        return starts
