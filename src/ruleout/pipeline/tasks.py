"""The pieces of work of a run: pure functions of a case, a variant and arrays.

Each returns a dict of arrays, so that it can be stored as it is, and runs in any process. What a
process needs again and again (models, compiled systems) is kept on its workbench.
"""

from __future__ import annotations

import threading
import warnings
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.checks import Checker
from ruleout.equations import build, unit_ties
from ruleout.fitting import Posterior, SearchEffort, descend, search
from ruleout.fitting.search import AGREEMENT, Search
from ruleout.seeds import sequence
from ruleout.variants import VariantSet, alternatives, expand

Arrays = dict[str, NDArray[Any]]
REACH = 0.1
"""Curves closer than this many sd cannot be told apart."""
REACH_DRAWS = 256


class Workbench:
    """Everything derived from a case that tasks share within a process, in threads as well."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self._making = threading.RLock()
        self._posteriors: dict[str, Posterior] = {}
        self._checkers: dict[str, Checker] = {}

    @cached_property
    def variants(self) -> VariantSet:
        """The variants of the case's mechanism."""
        return expand(self.case.mechanism, self.case.experiments)

    @cached_property
    def ties(self) -> dict[str, str]:
        """Parameters tied because nothing fixes their node's unit."""
        return unit_ties(self.variants, self.case.experiments)[0]

    def posterior(self, name: str) -> Posterior:
        """Return the posterior of the variant called ``name``."""
        with self._making:
            if name not in self._posteriors:
                mechanism, experiments = self.case.mechanism, self.case.experiments
                model = build(self.variants.variants[name], mechanism, experiments)
                self._posteriors[name] = Posterior(model, mechanism, experiments, self.ties)
            return self._posteriors[name]

    def checker(self, name: str) -> Checker:
        """Return the checker of the variant called ``name``."""
        with self._making:
            if name not in self._checkers:
                neighbours = {
                    choice: [self.posterior(n) for n in names]
                    for choice, names in alternatives(self.variants, name).items()
                }
                self._checkers[name] = Checker(self.posterior(name), neighbours)
            return self._checkers[name]


_bench: Workbench | None = None
_changing = threading.Lock()


def bench_of(case: Case) -> Workbench:
    """Return this process's workbench for ``case``, made anew when the case changes."""
    global _bench
    with _changing:
        if _bench is None or _bench.case.hashes != case.hashes:
            _bench = Workbench(case)
        return _bench


_quiet_tasks = 0
_silence = warnings.catch_warnings()


@contextmanager
def _without_warnings() -> Iterator[None]:
    """Silence warnings until the last of the tasks that run side by side is done.

    On leaving, a silence of each task's own would bring back what it found, which in threads may
    be the silence of another one.
    """
    global _quiet_tasks, _silence
    with _changing:
        if _quiet_tasks == 0:
            _silence = warnings.catch_warnings()
            _silence.__enter__()
            warnings.simplefilter("ignore")
        _quiet_tasks += 1
    try:
        yield
    finally:
        with _changing:
            _quiet_tasks -= 1
            if _quiet_tasks == 0:
                _silence.__exit__(None, None, None)


def run_task(function: Callable[..., Arrays], case: Case, *arguments: Any) -> Arrays:
    """Run one piece of work in this process, without warnings from wide-prior arithmetic."""
    with _without_warnings(), np.errstate(all="ignore"):
        return function(bench_of(case), *arguments)


def search_fit(bench: Workbench, name: str, effort: SearchEffort, seed: int) -> Arrays:
    """Search for the variant's best fit."""
    found = search(bench.posterior(name), effort, sequence(seed, name, "search"))
    return {
        "q": found.q,
        "objective": found.objective,
        "agree": np.array(found.agree),
        "starts": np.array(found.starts),
    }


def start_chain(bench: Workbench, name: str, found: Arrays, ensemble: int, seed: int) -> Arrays:
    """Scatter the walkers of one ensemble."""
    from ruleout.fitting.sampler import start_walkers

    optima = Search(found["q"], found["objective"], int(found["agree"]), int(found["starts"]))
    walkers = start_walkers(bench.posterior(name), optima, sequence(seed, name, "chain", ensemble))
    return {
        "end_q": walkers.q,
        "end_log_density": walkers.log_density,
        "end_key": walkers.key,
        "end_tail": walkers.tail,
    }


def extend_chain(bench: Workbench, name: str, before: Arrays, stored: int, thin: int) -> Arrays:
    """Advance one ensemble by a block."""
    from ruleout.fitting.sampler import Walkers, run_block

    walkers = Walkers(
        before["end_q"], before["end_log_density"], before["end_key"], before["end_tail"]
    )
    block = run_block(bench.posterior(name), walkers, stored, thin)
    return {
        "chain": block.chain,
        "log_density": block.log_density,
        "end_q": block.walkers.q,
        "end_log_density": block.walkers.log_density,
        "end_key": block.walkers.key,
        "end_tail": block.walkers.tail,
        "solved": np.array(block.solved),
        "failed": np.array(block.failed),
        "failed_at": block.failed_at,
    }


def polish(bench: Workbench, name: str, found: Arrays, leading: NDArray[np.float64]) -> Arrays:
    """Descend from draws of every ensemble and join the ends to the search's."""
    posterior = bench.posterior(name)
    if posterior.space.dimension:
        ends = descend(posterior, leading, posterior.observed, tolerance=1e-4, iterations=60)
        q = np.concatenate([found["q"], ends.q])
        objective = np.concatenate([found["objective"], ends.objective])
    else:
        q, objective = found["q"], found["objective"]
    order = np.argsort(objective, kind="stable")
    polished = int(np.sum(objective[len(found["q"]) :] < objective[order[0]] + AGREEMENT))
    searched = found["objective"][0] < objective[order[0]] + AGREEMENT
    agree = (int(found["agree"]) if searched else 0) + polished
    return {
        "q": q[order],
        "objective": objective[order],
        "agree": np.array(agree),
        "starts": found["starts"] + len(leading),
    }


def rival_anchors(bench: Workbench, name: str, best: NDArray[np.float64], seed: int) -> Arrays:
    """Find where searches of the variant's rivals start, by rival."""
    return dict(bench.checker(name).anchors(best, sequence(seed, name, "anchors")))


def observed_statistics(
    bench: Workbench, name: str, best: NDArray[np.float64], anchors: Arrays, seed: int
) -> Arrays:
    """Evaluate every statistic on the data."""
    found = bench.checker(name).observed(best, sequence(seed, name, "observed"), anchors)
    return {"values": found.values, "objective": found.objective}


def replicate_statistics(
    bench: Workbench,
    name: str,
    draws: NDArray[np.float64],
    anchors: Arrays,
    purpose: str,
    first: int,
    seed: int,
) -> Arrays:
    """Evaluate every statistic on one replicate per draw; streams are numbered from ``first``."""
    seeds = [sequence(seed, name, purpose, first + i) for i in range(len(draws))]
    found = bench.checker(name).replicated(draws, seeds, anchors)
    return {"values": found.values}


def reachable(bench: Workbench, larger: str, smaller: str, best: NDArray[np.float64]) -> Arrays:
    """Return in which share of the larger's own prior it predicts what the smaller does.

    The rest stays at the smaller's best fit; 'the same' is within ``REACH`` sd at every point.
    """
    big, small = bench.posterior(larger), bench.posterior(smaller)
    own = {name: i for i, name in enumerate(small.space.names)}
    u = np.random.default_rng(sequence(0, larger, smaller, "reach")).uniform(
        size=(REACH_DRAWS, big.space.dimension)
    )
    q = big.space.quantile(u)
    for j, name in enumerate(big.space.names):
        if name in own:
            q[:, j] = best[own[name]]
    target, _ = small.zeta(best[None])
    sigma, _ = small.noise.sigma(best[None], target, small.observed)
    zeta, _ = big.zeta(q, big.sampling_rtol)
    gap = np.max(np.abs(zeta - target) / sigma, axis=1)
    return {"share": np.array(np.mean(gap < REACH))}


def match(
    bench: Workbench, name: str, best: NDArray[np.float64], other: str, other_best: NDArray[Any]
) -> Arrays:
    """Return the largest distance, in sd, between two variants' best-fit curves."""
    a, b = bench.posterior(name), bench.posterior(other)
    za, _ = a.zeta(best[None])
    zb, _ = b.zeta(other_best[None])
    sigma, _ = a.noise.sigma(best[None], za, a.observed)
    return {"gap": np.array(np.max(np.abs(za - zb) / sigma))}


def summarise_fit(
    bench: Workbench,
    name: str,
    best: NDArray[np.float64],
    draws: NDArray[np.float64],
    diagnostics: Mapping[str, NDArray[np.float64]],
) -> Arrays:
    """Return curves, residuals, parameters and quantiles as columns, ``table/column``."""
    from ruleout.fitting.summary import summarise

    case = bench.case
    summary = summarise(
        bench.posterior(name), case.mechanism, case.experiments, best, draws, diagnostics
    )
    out: Arrays = {}
    for table in ("curves", "residuals", "parameters", "quantiles"):
        out |= _columns(getattr(summary, table), f"{table}/")
    return out


def _columns(table: pd.DataFrame, prefix: str = "") -> Arrays:
    """Return a table's columns as arrays that can be stored without pickling."""
    columns = {name: table[name].to_numpy() for name in table.columns}
    return {
        f"{prefix}{name}": values.astype(str) if values.dtype.kind in "OTU" else values
        for name, values in columns.items()
    }


def inspect(bench: Workbench, seed: int) -> Arrays:
    """Return the findings before fitting, column by column."""
    from ruleout.inspection import inspect_case

    return _columns(inspect_case(bench.case, seed).findings)


def likelihood(bench: Workbench, name: str, draws: NDArray[np.float64], kept: int) -> Arrays:
    """Return leave-one-out accuracy from (E, S, D) draws, and the first ``kept`` draws' terms."""
    from ruleout.fitting.convergence import leave_one_out

    posterior = bench.posterior(name)
    flat = draws.reshape(-1, draws.shape[-1])
    zeta, _ = posterior.zeta(flat)
    loglik = posterior.noise.loglik(flat, zeta, posterior.observed)[:, posterior.fitted]
    shape = draws.shape[:2]
    terms = loglik.reshape(*shape, -1)
    usable = np.isfinite(terms).all() and terms.shape[-1] > 1
    elpd, _, pointwise, k = (
        leave_one_out(terms) if usable else (np.nan, np.nan, np.zeros(0), np.zeros(0))
    )
    return {
        "elpd": np.array(elpd),
        "pointwise": pointwise,
        "pareto_k": k,
        "draws": draws[:, :kept],
        "log_likelihood": terms[:, :kept],
        "prediction": zeta.reshape(*shape, -1)[:, :kept],
    }
