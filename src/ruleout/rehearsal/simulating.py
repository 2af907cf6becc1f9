"""Simulated data sets: what a variant would have shown in a case's experiments."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.errors import RuleoutError
from ruleout.fitting import Posterior
from ruleout.store import digest

Array = NDArray[np.float64]


def coordinates(posterior: Posterior, values: Mapping[str, float]) -> Array:
    """Return the coordinates (D,) of a truth given by name, on the natural scale.

    A parameter without a value takes its prior median; values are moved inside the priors.
    """
    space = posterior.space
    middle = space.natural(space.quantile(np.full(space.dimension, 0.5)))
    named = np.array(
        [values.get(name, m) for name, m in zip(space.names, middle, strict=True)], dtype=float
    )
    return np.clip(space.coordinate(named), space.low, space.high)


def simulate(
    case: Case,
    posterior: Posterior,
    values: Mapping[str, float],
    rng: np.random.Generator,
    sd: Array | None = None,
    noise: float = 1.0,
) -> Case:
    """Return ``case`` with its measurements replaced by simulated ones.

    Parameters
    ----------
    case : Case
        Its data say where is measured; its values are not used.
    posterior : Posterior
        Of the true variant, built for ``case``.
    values : mapping of parameter to float
        The truth, on the natural scale.
    rng : Generator
    sd : (n,) array, optional
        True standard deviation (or Student scale) of every point on the working scale; where NaN,
        or if left out, the noise model of ``posterior`` gives it.
    noise : float
        Multiplies every sd, a stated one in the data as well.

    Raises
    ------
    RuleoutError
        If the equations could not be solved there.
    """
    data = case.experiments.data
    assert data is not None
    q = coordinates(posterior, values)[None]
    zeta, _ = posterior.zeta(q)
    if not np.isfinite(zeta).all():
        raise RuleoutError("the equations of the truth could not be solved at these parameters")
    modelled, _ = posterior.noise.sigma(q, zeta, posterior.observed)
    sigma = np.broadcast_to(modelled, zeta.shape)[0]
    if sd is not None:
        sigma = np.where(np.isnan(sd), sigma, sd)
    observations = posterior.observations
    error = rng.standard_normal(len(observations.points))
    for r, readout in enumerate(observations.readouts):
        if readout.family == "student":
            column = posterior.catalogue.columns[f"{readout.name}.nu"]
            nu = posterior.catalogue.values(q)[0, column]
            mine = observations.which == r
            error[mine] /= np.sqrt(rng.chisquare(nu, size=mine.sum()) / nu)
    z = zeta[0] + noise * sigma * error
    measured = np.where(observations.logarithmic, np.exp(z), z)
    for r, readout in enumerate(observations.readouts):
        mine = observations.which == r
        measured[mine] = np.clip(
            measured[mine],
            -np.inf if readout.detection_limit is None else readout.detection_limit,
            np.inf if readout.detection_ceiling is None else readout.detection_ceiling,
        )
    simulated = data.assign(value=measured, sd=noise * data["sd"].to_numpy(dtype=float))
    return replace(
        case,
        experiments=replace(case.experiments, data=simulated),
        hashes={**case.hashes, "data.csv": digest(case.hashes, measured.tobytes(), noise)},
    )
