"""One simulated data set through the verdict pipeline, best fits in place of posterior draws."""

from __future__ import annotations

import asyncio
from collections.abc import Callable, Mapping
from concurrent.futures import Executor, Future
from dataclasses import dataclass, replace
from math import ceil
from pathlib import Path
from types import MappingProxyType
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray
from scipy.stats import qmc

from ruleout.case import Case
from ruleout.fitting import Posterior, SearchEffort, search
from ruleout.fitting.convergence import Convergence
from ruleout.pipeline import Effort, Settings
from ruleout.pipeline.flow import Fit, Flow
from ruleout.pipeline.settings import ENSEMBLES
from ruleout.pipeline.variants import Settled, settle_variants
from ruleout.progress import Silent
from ruleout.seeds import sequence
from ruleout.store import Arrays, Store

Array = NDArray[np.float64]
SCATTERED = 8
"""Starts of a variant that has parameters of which the truth knows nothing."""

EFFORTS: Final[Mapping[str, Effort]] = MappingProxyType(
    {
        name: Effort(
            search=SearchEffort(screened=screened, starts=starts, rounds=3),
            pilot=pilot,
            least_replicates=replicates,
            most_replicates=replicates,
        )
        for name, screened, starts, pilot, replicates in (
            ("quick", 64, 6, 20, 39),
            ("standard", 128, 10, 40, 199),
            ("thorough", 256, 20, 40, 999),
        )
    }
)
"""Work per simulated data set. With 39 replicates, too, a Monte Carlo test at 5 % has exactly that
size; few replicates cost a little power, as p-values near alpha are decided by chance.

References
----------
.. [1] A. C. A. Hope, J. R. Stat. Soc. B 30 (1968) 582, doi:10.1111/j.2517-6161.1968.tb00759.x.
"""


@dataclass(frozen=True, slots=True)
class Spending(Settings):
    """Settings that spend a rehearsal's effort."""

    @property
    def spent(self) -> Effort:
        """The effort's numbers, with replicates enough to reject at alpha at all."""
        effort = EFFORTS[self.effort]
        replicates = max(effort.most_replicates, ceil(2 / self.alpha) - 1)
        return replace(effort, least_replicates=replicates, most_replicates=replicates)


class _Inline(Executor):
    """Runs every task at once, in this thread."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        future: Future[Any] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


class _NoStore(Store):
    """Keeps nothing: a judged data set is one piece as a whole."""

    def __init__(self) -> None:
        super().__init__(Path())

    def get(self, key: str, fingerprint: str) -> None:  # noqa: ARG002
        return None

    def put(self, key: str, fingerprint: str, arrays: Arrays) -> None:
        pass


class _Simulated(Flow):
    """Judges simulated data: the best fit stands for every posterior draw.

    Parameters
    ----------
    case : Case
        With simulated data.
    settings : Settings
    known : mapping of variant to tuple of mappings
        Parameter values to start searches from, such as the truth.
    """

    def __init__(
        self, case: Case, settings: Settings, known: Mapping[str, tuple[Mapping[str, float], ...]]
    ) -> None:
        super().__init__(case, settings, _NoStore(), _Inline(), Silent())
        self._known = known

    def fingerprint(self, name: str) -> str:
        return name

    async def fit(self, name: str) -> Fit:
        posterior = self.bench.posterior(name)
        starts = [_embedded(posterior, values) for values in self._known.get(name, ())]
        found = search(
            posterior,
            self.settings.spent.search,
            sequence(self.settings.seed, name, "search"),
            np.concatenate(starts) if starts and posterior.space.dimension else None,
        )
        best = found.q[0]
        d = len(best)
        none, one = np.full(d, np.nan), np.ones(d)
        return Fit(
            best,
            float(found.objective[0]),
            found.agree,
            found.starts,
            np.broadcast_to(best, (ENSEMBLES, 1, 1, d)),
            np.full((ENSEMBLES, 1, 1), -0.5 * found.objective[0]),
            Convergence(one, none, none),
            converged=True,
            failed_share=0.0,
        )


def _embedded(posterior: Posterior, values: Mapping[str, float]) -> Array:
    """Return starts (K, D) that share the parameters in ``values``, the others scattered."""
    space = posterior.space
    shared = np.array([name in values for name in space.names], dtype=bool)
    new = np.flatnonzero(~shared)
    count = SCATTERED if len(new) else 1
    u = np.full((count, space.dimension), 0.5)
    if len(new):
        # Unscrambled Sobol points, but for the first, which is 0.
        u[:, new] = (
            0.05 + 0.9 * qmc.Sobol(len(new), scramble=False).random(2 * SCATTERED)[1 : count + 1]
        )
    q = space.quantile(u)
    given = np.array([values.get(name, 1.0) for name in space.names])
    q[:, shared] = space.coordinate(given)[shared]
    return np.clip(q, space.low, space.high)


def judge_simulated(
    case: Case,
    settings: Settings,
    known: Mapping[str, tuple[Mapping[str, float], ...]],
) -> Settled:
    """Return the verdicts of the pipeline on simulated data.

    The same searches, statistics, refitted replicates, coherence and claims as in `judge`; only
    the posterior draws that replicates start from are replaced by the best fit.

    Parameters
    ----------
    case : Case
        From `simulate`.
    settings : Settings
        ``settings.seed`` is that of this data set.
    known : mapping of variant to tuple of mappings
        Parameter values, on the natural scale, to start the variant's search from, beside the
        scattered starts.
    """
    return asyncio.run(settle_variants(_Simulated(case, settings, known)))
