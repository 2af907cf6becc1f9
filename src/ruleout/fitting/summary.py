"""What a fit says in tables: curves with bands, residuals, parameters, quantiles."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.experiments.types import Experiments
from ruleout.fitting.observations import UNCENSORED, Points
from ruleout.fitting.posterior import Posterior
from ruleout.fitting.predict import Predictor
from ruleout.fitting.priors import describe_prior, quantiles
from ruleout.mechanism.types import Mechanism

Array = NDArray[np.float64]
BAND = (0.05, 0.5, 0.95)
GRID = 61
BAND_DRAWS = 200
LEVELS = np.linspace(0.02, 0.98, 25)
BEYOND_TIME = 1.2
"""Predictions later than this many times the last fitted time are marked (common practice)."""


@dataclass(frozen=True, slots=True, eq=False)
class FitSummary:
    """Tables of one variant's fit, with the columns of the judgement but for ``variant``."""

    curves: pd.DataFrame
    residuals: pd.DataFrame
    parameters: pd.DataFrame
    quantiles: pd.DataFrame


def _grid(posterior: Posterior, experiments: Experiments) -> tuple[Points, NDArray[np.bool_]]:
    """Return the points to draw curves through and which of them are extrapolated."""
    points = posterior.observations.points
    own_scale = {
        r.name
        for r in experiments.readouts.values()
        if r.scale_by == "replicate" or r.replicates == "batch"
    }
    keys = list(
        dict.fromkeys(
            (c, r, rep if r in own_scale else "")
            for c, r, rep in zip(points.condition, points.readout, points.replicate, strict=True)
        )
    )
    fitted_times = points.time[points.fitted & np.isfinite(points.time)]
    last_fitted = float(fitted_times.max()) if len(fitted_times) else np.inf
    highest: dict[str, float] = {}
    lowest: dict[str, float] = {}
    for condition in experiments.conditions.values():
        if not condition.hold_out:
            for node, course in condition.inputs.items():
                highest[node] = max(highest.get(node, -np.inf), *course.levels)
                lowest[node] = min(lowest.get(node, np.inf), 0.0, *course.levels)
    per_curve = max(2, min(GRID, 40_000 // max(1, len(keys))))
    rows: list[tuple[str, str, str, float]] = []
    beyond: list[bool] = []
    for c, r, rep in keys:
        mine = points.time[(points.condition == c) & (points.readout == r)]
        finite = mine[np.isfinite(mine)]
        times = list(np.linspace(0.0, finite.max(), per_curve)) if len(finite) else []
        times += [np.inf] if np.isinf(mine).any() else []
        condition = experiments.conditions[c]
        outside = condition.hold_out and any(
            level > highest.get(node, level) or level < lowest.get(node, level)
            for node, course in condition.inputs.items()
            for level in course.levels
        )
        rows += [(c, r, rep, float(t)) for t in times]
        beyond += [
            bool(outside or (np.isfinite(t) and t > BEYOND_TIME * last_fitted)) for t in times
        ]
    columns = list(zip(*rows, strict=True))
    grid = Points(
        condition=np.array(columns[0], dtype=object),
        readout=np.array(columns[1], dtype=object),
        replicate=np.array(columns[2], dtype=object),
        time=np.array(columns[3], dtype=float),
        fitted=np.ones(len(rows), dtype=bool),
    )
    return grid, np.array(beyond, dtype=bool)


def summarise(
    posterior: Posterior,
    mechanism: Mechanism,
    experiments: Experiments,
    best: Array,
    draws: Array,
    diagnostics: Mapping[str, Array],
) -> FitSummary:
    """Return the tables of one fit.

    Parameters
    ----------
    best : (D,) array
        Best-fit coordinates.
    draws : (K, D) array
        Posterior draws; the first ``BAND_DRAWS`` of them give the bands.
    diagnostics : mapping
        ``rhat``, ``ess_bulk``, ``ess_tail``, each (D,).
    """
    del mechanism
    grid, beyond = _grid(posterior, experiments)
    predictor = Predictor(posterior.model, experiments, posterior.catalogue, grid)
    curve, _ = predictor(best[None])
    cloud, _ = predictor(draws[:BAND_DRAWS], 1e-4)
    with np.errstate(all="ignore"):
        low, median, high = (
            np.nanquantile(cloud, BAND, axis=0)
            if np.isfinite(cloud).any()
            else np.full((3, len(grid)), np.nan)
        )
    curves = pd.DataFrame(
        {
            "condition": grid.condition,
            "readout": grid.readout,
            "replicate": grid.replicate,
            "time": grid.time,
            "best": curve[0],
            "median": median,
            "low": low,
            "high": high,
            "extrapolated": beyond,
        }
    )
    return FitSummary(
        curves,
        _residuals(posterior, experiments, best),
        _parameters(posterior, best, draws, diagnostics),
        _quantiles(posterior, draws),
    )


def _residuals(posterior: Posterior, experiments: Experiments, best: Array) -> pd.DataFrame:
    points = posterior.observations.points
    zeta, _ = posterior.zeta(best[None])
    sigma, _ = posterior.noise.sigma(best[None], zeta, posterior.observed)
    e = posterior.noise.residuals(best[None], zeta, posterior.observed)
    logarithmic = posterior.observations.logarithmic
    assert experiments.data is not None
    return pd.DataFrame(
        {
            "condition": points.condition,
            "readout": points.readout,
            "replicate": points.replicate,
            "time": points.time,
            "value": experiments.data["value"].to_numpy(dtype=float),
            "sd": np.broadcast_to(sigma, zeta.shape)[0],
            "fitted": np.where(logarithmic, np.exp(zeta[0]), zeta[0]),
            "standardized": e[0],
            "held_out": ~points.fitted,
            "censored": posterior.observed.censored[0] != UNCENSORED,
        }
    )


def _parameters(
    posterior: Posterior, best: Array, draws: Array, diagnostics: Mapping[str, Array]
) -> pd.DataFrame:
    space = posterior.space
    free = {name: j for j, name in enumerate(space.names)}
    values = posterior.catalogue.values(draws)
    optimum = posterior.catalogue.values(best[None])[0]
    bands = np.quantile(values, BAND, axis=0)
    limits = quantiles(space, [0.025, 0.975])
    rows = []
    for entry in posterior.catalogue.entries:
        at = posterior.catalogue.columns[entry.name]
        j = free.get(entry.name)
        rows.append(
            {
                "parameter": entry.name,
                "unit": entry.unit,
                "kind": entry.kind,
                "prior": describe_prior(entry.prior),
                "prior_from": entry.prior_from,
                "prior_low": np.nan if j is None else limits[0, j],
                "prior_high": np.nan if j is None else limits[1, j],
                "best": optimum[at],
                "median": bands[1, at],
                "low": bands[0, at],
                "high": bands[2, at],
                **{
                    key: np.nan if j is None else float(diagnostics[key][j])
                    for key in ("rhat", "ess_bulk", "ess_tail")
                },
            }
        )
    return pd.DataFrame(rows)


def _quantiles(posterior: Posterior, draws: Array) -> pd.DataFrame:
    space = posterior.space
    mine = space.natural(np.quantile(draws, LEVELS, axis=0))
    prior = quantiles(space, list(LEVELS))
    return pd.DataFrame(
        {
            "parameter": np.repeat(np.array(space.names, dtype=object), len(LEVELS)),
            "level": np.tile(LEVELS, space.dimension),
            "posterior": mine.T.ravel(),
            "prior": prior.T.ravel(),
        }
    )
