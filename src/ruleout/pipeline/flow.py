"""The way of one variant through search, chains and checks, as coroutines over one task queue.

All numbers come from tasks keyed by identity; what runs when, and where, decides nothing.
"""

from __future__ import annotations

import asyncio
from collections.abc import Callable
from concurrent.futures import BrokenExecutor, Executor
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.checks import Column, Tally, maximum, standardise, standardised, tally
from ruleout.fitting.convergence import Convergence, diagnose
from ruleout.pipeline import tasks
from ruleout.pipeline.settings import BATCH, ENSEMBLES, Settings
from ruleout.pipeline.tasks import Arrays, Workbench
from ruleout.progress import Progress
from ruleout.seeds import generator
from ruleout.store import Store, digest, software
from ruleout.variants import alternatives

Array = NDArray[np.float64]
CLOSE = 0.5
"""Best draws this far, per parameter, above the least objective are as close as draws come: twice
the log density of a normal posterior lies one per parameter below its peak on average."""
POLISHED = 6
"""Draws of each ensemble, besides its best, from which the best fit is sought once more."""
FAILED_SHARE = 0.02
"""With a larger share of failed solves inside the priors a variant is not judged."""


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """A variant's fit.

    Attributes
    ----------
    best : (D,) array
    objective : float
        -2 log posterior at the best fit, up to a constant shared by variants.
    agree, starts : int
        Searches that agree on the best objective, and how many were made.
    chains : (E, S, W, D) array
        Kept half of every ensemble.
    log_density : (E, S, W) array
    diagnostics : Convergence
    converged : bool
    failed_share : float
        Of solves inside the priors.
    failed_at : (F, D) array
        Where some of them failed.
    """

    best: Array
    objective: float
    agree: int
    starts: int
    chains: Array
    log_density: Array
    diagnostics: Convergence
    converged: bool
    failed_share: float
    failed_at: Array = field(default_factory=lambda: np.zeros((0, 0)))

    @property
    def trusted(self) -> bool:
        """Whether verdicts may rest on this fit."""
        return (
            self.converged
            and self.agree >= 2
            and np.isfinite(self.objective)
            and self.failed_share <= FAILED_SHARE
        )

    def draws(self, chooser: np.random.Generator, count: int) -> Array:
        """Return posterior draws with replacement, (count, D)."""
        pool = self.chains.reshape(-1, self.chains.shape[-1])
        return np.asarray(pool[chooser.integers(len(pool), size=count)])


@dataclass(frozen=True, slots=True, eq=False)
class Checks:
    """The outcome of a variant's checks.

    Attributes
    ----------
    columns : tuple of Column, length C
    observed : (C,) array
    replicated : (R, C) array
        Replicates that entered the decision.
    tally : Tally or None
        None where nothing counts.
    decisive : Column or None
        The counting statistic that stands out most in the data.
    failed_share : float
        Of replicates.
    """

    columns: tuple[Column, ...]
    observed: Array
    replicated: Array
    tally: Tally | None
    decisive: Column | None
    failed_share: float


class Flow:
    """Runs tasks through an executor and the store.

    Parameters
    ----------
    case, settings, store, executor, progress
    """

    def __init__(
        self,
        case: Case,
        settings: Settings,
        store: Store,
        executor: Executor,
        progress: Progress,
    ) -> None:
        self.case = case
        self.settings = settings
        self.store = store
        self.executor = executor
        self.progress = progress
        self.bench: Workbench = tasks.bench_of(case)
        self.whole = digest(software(), sorted(case.hashes.items()), settings.seed)
        self._data = digest(
            case.hashes.get("data.csv", ""),
            case.experiments.readouts,
            case.experiments.conditions,
        )

    async def run(self, function: Callable[..., Arrays], *arguments: Any) -> Arrays:
        """Run a task in the executor without storing its result."""
        loop = asyncio.get_running_loop()
        try:
            return await loop.run_in_executor(
                self.executor, tasks.run_task, function, self.case, *arguments
            )
        except BrokenExecutor:
            # Python 3.11 prints a traceback if the other tasks are cancelled while they fail too.
            await asyncio.sleep(0.2)
            raise

    async def piece(
        self, key: str, fingerprint: str, function: Callable[..., Arrays], *arguments: Any
    ) -> Arrays:
        """Return a stored piece, or run its task and store it."""
        found = self.store.get(key, fingerprint)
        if found is None:
            found = await self.run(function, *arguments)
            self.store.put(key, fingerprint, found)
        return found

    def fingerprint(self, name: str) -> str:
        """Return the digest of all that a variant's fit depends on."""
        posterior = self.bench.posterior(name)
        return digest(
            software(),
            self._data,
            posterior.model.rhs,
            sorted((k, v.rest, v.value) for k, v in posterior.model.starts.items()),
            posterior.catalogue.entries,
            self.settings.seed,
            self.settings.spent,
            name,
        )

    async def fit(self, name: str) -> Fit:
        """Search, sample until the ensembles agree, and polish the best draws."""
        effort, seed = self.settings.spent, self.settings.seed
        fingerprint = self.fingerprint(name)
        found = await self.piece(
            f"{name}/search", fingerprint, tasks.search_fit, name, effort.search, seed
        )
        self.progress.advance(name, note="searched")
        if not np.isfinite(found["objective"][0]):
            return _unfitted(found)
        if found["q"].shape[1] == 0:
            return _nothing_free(found)
        blocks = await asyncio.gather(
            *(
                self.piece(
                    f"{name}/chain-{e}-000",
                    fingerprint,
                    tasks.start_chain,
                    name,
                    found,
                    e,
                    seed,
                )
                for e in range(ENSEMBLES)
            )
        )
        history: list[list[Arrays]] = []
        kept, density, diagnostics, converged = None, None, None, False
        if not all(np.isfinite(b["end_log_density"]).all() for b in blocks):
            return _unfitted(found)
        for number in range(1, effort.most_blocks + 1):
            blocks = await asyncio.gather(
                *(
                    self.piece(
                        f"{name}/chain-{e}-{number:03d}",
                        fingerprint,
                        tasks.extend_chain,
                        name,
                        blocks[e],
                        effort.stored,
                        effort.thin,
                    )
                    for e in range(ENSEMBLES)
                )
            )
            history.append(list(blocks))
            self.progress.advance(name, note=f"block {number}")
            if number < 2:
                continue
            late = history[number // 2 :]
            kept = np.stack(
                [np.concatenate([b[e]["chain"] for b in late]) for e in range(ENSEMBLES)]
            )
            density = np.stack(
                [np.concatenate([b[e]["log_density"] for b in late]) for e in range(ENSEMBLES)]
            )
            diagnostics = await self._diagnose(kept)
            converged = diagnostics.reached(effort.rhat, effort.ess)
            if converged:
                break
        assert kept is not None
        assert density is not None
        assert diagnostics is not None
        leading = np.concatenate([_polished_from(kept[e], density[e]) for e in range(ENSEMBLES)])
        polished = await self.piece(
            f"{name}/polish", fingerprint, tasks.polish, name, found, leading
        )
        solved = sum(int(b["solved"]) for row in history for b in row)
        failed = sum(int(b["failed"]) for row in history for b in row)
        return Fit(
            polished["q"][0],
            float(polished["objective"][0]),
            max(
                int(polished["agree"]),
                _ensembles_at(polished["objective"][0], density, kept.shape[-1], converged),
            ),
            int(polished["starts"]),
            kept,
            density,
            diagnostics,
            converged,
            failed / max(1, solved),
            np.concatenate([b["failed_at"] for row in history for b in row]),
        )

    async def _diagnose(self, chains: Array) -> Convergence:
        found = await self.run(diagnose_task, chains)
        return Convergence(found["rhat"], found["ess_bulk"], found["ess_tail"])

    async def check(self, name: str, fit: Fit) -> Checks:
        """Compare the data's statistics with those of refitted replicates, as many as needed."""
        effort, seed = self.settings.spent, self.settings.seed
        neighbours = alternatives(self.bench.variants, name)
        fingerprint = digest(
            self.fingerprint(name),
            [(c, [self.fingerprint(n) for n in names]) for c, names in neighbours.items()],
        )
        checker = self.bench.checker(name)
        columns, counting = checker.columns, checker.counting
        decisive_columns = tuple(columns[j] for j in counting)
        anchors = await self.piece(
            f"{name}/anchors", fingerprint, tasks.rival_anchors, name, fit.best, seed
        )
        found = await self.piece(
            f"{name}/observed",
            fingerprint,
            tasks.observed_statistics,
            name,
            fit.best,
            anchors,
            seed,
        )
        observed = found["values"][0]
        pilot_draws = fit.draws(generator(seed, name, "pilot draws"), effort.pilot)
        pilot, _ = await self._replicates(name, fingerprint, pilot_draws, anchors, "pilot")
        if not len(counting):
            return Checks(columns, observed, pilot, None, None, 0.0)
        if len(pilot) < effort.pilot // 2 or not np.isfinite(observed).all():
            return Checks(columns, observed, pilot, None, None, 1.0)
        standard = standardise(pilot[:, counting], decisive_columns)
        extreme = maximum(observed[None, counting], decisive_columns, standard)[0]
        most = effort.most_replicates
        draws = fit.draws(generator(seed, name, "replicate draws"), most)
        values = np.zeros((0, len(columns)))
        asked, failed = 0, 0
        outcome: Tally | None = None
        while outcome is None and asked < most:
            ahead = BATCH if asked == 0 else min(4 * BATCH, most - asked)
            fresh, lost = await self._replicates(
                name, fingerprint, draws[asked : asked + ahead], anchors, "replicate", asked
            )
            asked += ahead
            failed += lost
            values = np.concatenate([values, fresh])
            exceeds = maximum(values[:, counting], decisive_columns, standard) >= extreme
            outcome = tally(exceeds, self.settings.alpha, effort.least_replicates, most)
            self.progress.advance(name, note=f"{asked} replicates")
        if outcome is None:
            # Failed replicates left fewer than the cap: decide on what there is.
            outcome = Tally(int(exceeds.sum()), len(exceeds), decided=False)
        z = standardised(observed[None, counting], decisive_columns, standard)[0]
        return Checks(
            columns,
            observed,
            values[: outcome.replicates],
            outcome,
            decisive_columns[int(np.argmax(z))],
            failed / asked,
        )

    async def _replicates(
        self,
        name: str,
        fingerprint: str,
        draws: Array,
        anchors: Arrays,
        purpose: str,
        first: int = 0,
    ) -> tuple[Array, int]:
        """Return the statistics of replicates whose integration succeeded, and how many failed."""
        parts = await asyncio.gather(
            *(
                self.piece(
                    f"{name}/{purpose}-{first + i:05d}",
                    fingerprint,
                    tasks.replicate_statistics,
                    name,
                    draws[i : i + BATCH],
                    anchors,
                    purpose,
                    first + i,
                    self.settings.seed,
                )
                for i in range(0, len(draws), BATCH)
            )
        )
        values = np.concatenate([p["values"] for p in parts])
        good = np.isfinite(values).all(axis=1)
        return values[good], int((~good).sum())


def _ensembles_at(objective: float, density: Array, dimension: int, converged: bool) -> int:
    """Return how many converged ensembles came as close to the best fit as draws do.

    Where the best fit lies on an edge, such as a fold of the rest state, descents stop short of it
    at places of their own, and only the chains can tell that there is no better mode elsewhere.
    """
    if not converged:
        return 0
    return int(np.sum(-2.0 * density.max(axis=(1, 2)) < objective + CLOSE * dimension))


def _polished_from(chain: Array, density: Array) -> Array:
    """Return the best draw of one ensemble and some spread over the rest, (K, D)."""
    draws = chain.reshape(-1, chain.shape[-1])
    spread = np.linspace(0, len(draws) - 1, POLISHED).astype(int)
    return np.concatenate([draws[[np.argmax(density)]], draws[spread]])


def diagnose_task(bench: Workbench, chains: Array) -> Arrays:
    """Run the convergence diagnostics as a task."""
    del bench
    found = diagnose(chains)
    return {"rhat": found.rhat, "ess_bulk": found.ess_bulk, "ess_tail": found.ess_tail}


def _unfitted(found: Arrays) -> Fit:
    d = found["q"].shape[1]
    bad = np.full(d, np.nan)
    empty = np.zeros((ENSEMBLES, 0, 1, d))
    return Fit(
        found["q"][0],
        float("inf"),
        0,
        int(found["starts"]),
        empty,
        empty[..., 0],
        Convergence(bad, bad, bad),
        False,
        1.0,
    )


def _nothing_free(found: Arrays) -> Fit:
    """Return the fit of a variant without free parameters: one point, known for certain."""
    none = np.zeros(0)
    chains = np.zeros((ENSEMBLES, 100, 1, 0))
    return Fit(
        none,
        float(found["objective"][0]),
        int(found["agree"]),
        int(found["starts"]),
        chains,
        np.full(chains.shape[:3], -0.5 * found["objective"][0]),
        Convergence(none, none, none),
        True,
        0.0,
    )
