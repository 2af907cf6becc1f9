"""Convergence and predictive accuracy, by ArviZ: the only module that speaks to it.

Ensembles are the independent chains. R-hat compares them with all their walkers. The effective
sample size of a mean is that of the ensemble averages, iteration by iteration: walkers of one
ensemble move with one another's help, so counting them as separate chains would flatter.
"""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri
from scipy.stats import rankdata

Array = NDArray[np.float64]


def _arviz() -> Any:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import arviz
    return arviz


def arviz_version() -> str:
    """Return the version of ArviZ in use."""
    return str(_arviz().__version__)


@dataclass(frozen=True, slots=True, eq=False)
class Convergence:
    """Diagnostics per parameter; all (D,).

    Attributes
    ----------
    rhat : rank-normalised split R-hat across ensembles
    ess_bulk, ess_tail : effective sample sizes of the bulk and of the 5 % and 95 % quantiles
    """

    rhat: Array
    ess_bulk: Array
    ess_tail: Array

    def reached(self, rhat: float, ess: float) -> bool:
        """Whether every parameter meets both targets."""
        return bool(
            np.all(self.rhat < rhat)
            and np.all(self.ess_bulk >= ess)
            and np.all(self.ess_tail >= ess)
        )


def _ess_of_mean(values: Array) -> float:
    """Return the effective sample size of the mean of ``values`` (E, S, W) over everything."""
    averages = values.mean(axis=2)
    spread = values.var()
    noise = averages.var(ddof=1)
    if spread == 0.0 or noise == 0.0:
        return float(values.size)
    effective = float(_arviz().ess(averages, method="mean"))
    return float(min(effective * spread / noise, float(values.size)))


def diagnose(chains: Array) -> Convergence:
    """Return convergence diagnostics.

    Parameters
    ----------
    chains : (E, S, W, D) array
        Ensembles, iterations, walkers, parameters.

    References
    ----------
    .. [1] A. Vehtari et al., Bayesian Anal. 16 (2021) 667, doi:10.1214/20-BA1221.
    """
    e, s, w, d = chains.shape
    arviz = _arviz()
    rhat, bulk, tail = np.empty(d), np.empty(d), np.empty(d)
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        for j in range(d):
            x = chains[:, :, :, j]
            if np.ptp(x) == 0.0:
                rhat[j], bulk[j], tail[j] = np.inf, 0.0, 0.0
                continue
            rhat[j] = float(arviz.rhat(x.reshape(e, s * w)))
            scores = ndtri((rankdata(x.ravel()) - 0.375) / (x.size + 0.25)).reshape(x.shape)
            bulk[j] = _ess_of_mean(scores)
            ends = np.quantile(x, [0.05, 0.95])
            tail[j] = min(_ess_of_mean((x <= end).astype(float)) for end in ends)
    return Convergence(rhat, bulk, tail)


def leave_one_out(log_likelihood: Array) -> tuple[float, float, Array, Array]:
    """Return PSIS-LOO: expected log predictive density, its standard error, pointwise, Pareto k.

    Parameters
    ----------
    log_likelihood : (E, S, n) array

    References
    ----------
    .. [1] A. Vehtari, A. Gelman, J. Gabry, Stat. Comput. 27 (2017) 1413,
       doi:10.1007/s11222-016-9696-4.
    """
    data = _inference_data({"log_likelihood": {"y": log_likelihood}, "posterior": {}})
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        result = _arviz().loo(data, pointwise=True)
    elpd = getattr(result, "elpd_loo", None)
    pointwise = getattr(result, "loo_i", None)
    if elpd is None or pointwise is None:
        elpd, pointwise = result.elpd, result.elpd_i
    return (
        float(elpd),
        float(result.se),
        np.asarray(pointwise, dtype=float),
        np.asarray(result.pareto_k, dtype=float),
    )


def _inference_data(groups: Mapping[str, Mapping[str, Array]]) -> Any:
    arviz = _arviz()
    if not groups["posterior"]:
        shape = groups["log_likelihood"]["y"].shape[:2]
        groups = {**groups, "posterior": {"draw_index": np.zeros(shape)}}
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        # Names of the old interface still answer in the new one: only the version tells.
        if int(arviz_version().split(".")[0]) < 1:
            return arviz.from_dict(**groups)
        return arviz.from_dict(groups)


def save_fit(path: Path, groups: Mapping[str, Mapping[str, Array]]) -> None:
    """Write a fit as ArviZ data in NetCDF.

    Parameters
    ----------
    groups : mapping
        ``posterior`` and ``log_likelihood`` with (chain, draw, ...) arrays,
        ``posterior_predictive`` likewise, ``observed_data``.

    Raises
    ------
    OSError
        If there is no room for the file.
    """
    # HDF5 takes the process down when the disk fills up under it: find out beforehand.
    sizes = [array.nbytes for group in groups.values() for array in group.values()]
    path.write_bytes(bytes(sum(sizes) + 4096 * len(sizes) + 65536))
    data = _inference_data(groups)
    for name in groups:
        # The same run writes the same bytes, whenever it is made.
        data[name].attrs.pop("created_at", None)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        data.to_netcdf(str(path), engine="h5netcdf")
