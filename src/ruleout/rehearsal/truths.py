"""Where the parameters of a true variant come from: posterior draws, the file or the priors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.errors import InputError, did_you_mean
from ruleout.fitting import Posterior
from ruleout.fitting.parameters import NOISE_KINDS
from ruleout.pipeline.tasks import Workbench
from ruleout.rehearsal.simulating import coordinates
from ruleout.seeds import generator
from ruleout.verdicts import Judgement

Array = NDArray[np.float64]
Values = dict[str, float]
TYPICAL_SHARE, TYPICAL_LOG_SD = 0.1, 0.2
"""Noise where nothing states it: a share of the range, or a spread of the logarithm."""


@dataclass(frozen=True, slots=True, eq=False)
class Fitted:
    """What a judged run says of the parameters.

    Attributes
    ----------
    best : mapping of variant to values
        Best fits, on the natural scale.
    draws : mapping of variant to mapping of parameter to (N,) array
        Posterior draws, on the natural scale.
    """

    best: Mapping[str, Values]
    draws: Mapping[str, Mapping[str, Array]]


def fitted(case: Case, judgement: Judgement, folder: Path) -> Fitted:
    """Return best fits and posterior draws of a run of ``case``.

    Raises
    ------
    InputError
        If the run is of other files, or its fits are missing.
    """
    if dict(judgement.meta["inputs"]) != dict(case.hashes):
        raise InputError(
            "this run judged other files than the case holds now; judge the case again",
            where=str(folder),
        )
    table = judgement.parameters
    best: dict[str, Values] = {}
    draws: dict[str, dict[str, Array]] = {}
    for name, rows in table.groupby("variant", sort=False):
        best[str(name)] = dict(zip(rows["parameter"], rows["best"].astype(float), strict=True))
        path = folder / "fits" / f"{name}.nc"
        if path.exists():
            draws[str(name)] = _read_draws(path)
    if not draws:
        raise InputError(
            "this run holds no fits to simulate from; judge the case again", where=str(folder)
        )
    return Fitted(best, draws)


def _read_draws(path: Path) -> dict[str, Array]:
    import h5py

    with h5py.File(path) as file:
        group = file["posterior"]
        return {
            name: np.asarray(group[name][()], dtype=float).ravel()
            for name in group
            if group[name].ndim == 2
        }


def check_stated(case: Case, bench: Workbench) -> None:
    """Raise InputError where the plan states a value of a parameter that no variant has."""
    plan = case.experiments.plan
    stated = plan.truth if plan is not None else {}
    known = {
        entry.name
        for name in bench.variants.variants
        for entry in bench.posterior(name).catalogue.entries
    }
    for name in stated:
        if name not in known:
            raise InputError(
                f"'{name}' is no parameter of any variant{did_you_mean(name, known)}",
                where=f"{case.folder / 'experiments.toml'}: plan.truth",
            )


def draw_truth(
    case: Case, posterior: Posterior, variant: str, i: int, seed: int, run: Fitted | None
) -> Values:
    """Return the parameters that data set ``i`` of a true variant is simulated with.

    Parameters
    ----------
    case : Case
    posterior : Posterior
        Of the variant, on the case's own design.
    variant : str
    i : int
    seed : int
    run : Fitted, optional
        The truth is one of its posterior draws; without it, a draw from the priors in which the
        values that ``[plan.truth]`` states replace the drawn ones.

    Returns
    -------
    dict
        Values of the free parameters, on the natural scale.
    """
    rng = generator(seed, "truth", variant, i)
    if run is not None:
        draws = run.draws[variant]
        count = len(next(iter(draws.values()), np.zeros(1)))
        at = int(rng.integers(count))
        return {name: float(values[at]) for name, values in draws.items()}
    space = posterior.space
    u = rng.uniform(size=space.dimension)
    noise = np.array([name.rsplit(".", 1)[1] in NOISE_KINDS for name in space.names], dtype=bool)
    q = space.quantile(np.where(noise, 0.5, u))
    values = dict(zip(space.names, map(float, space.natural(q)), strict=True))
    plan = case.experiments.plan
    stated = plan.truth if plan is not None else {}
    values |= {name: value for name, value in stated.items() if name in values}
    return values | _typical_noise(case, posterior, values, stated)


def _typical_noise(
    case: Case, posterior: Posterior, values: Values, stated: Mapping[str, float]
) -> Values:
    """Return a free sd in proportion to each readout's range, unless the file says otherwise.

    Before anything is measured the default prior of an sd knows no scale to refer to.
    """
    zeta = posterior.zeta(coordinates(posterior, values)[None])[0][0]
    found = {}
    for r, readout in enumerate(posterior.observations.readouts):
        name = f"{readout.name}.sd"
        if name in values and name not in stated and name not in case.mechanism.priors:
            mine = zeta[posterior.observations.which == r]
            width = float(np.ptp(mine)) or float(np.max(np.abs(mine)))
            if readout.family == "lognormal":
                found[name] = TYPICAL_LOG_SD
            elif np.isfinite(width) and width > 0:
                found[name] = TYPICAL_SHARE * width
    return found
