"""Statistics of a refit that may speak against a variant; all large when it fits badly.

`misfit` and `serial` count for the verdict, together with the edge statistics of
:mod:`ruleout.checks.edges`; the others explain where and how a variant fails.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.fitting import Posterior, Sample

Array = NDArray[np.float64]
SHORTEST_SERIES = 3


@dataclass(frozen=True, slots=True)
class Column:
    """One statistic.

    Attributes
    ----------
    check : str
        Its name.
    condition, readout : str
        Where it looks; empty where it looks everywhere.
    counts : bool
        Whether it counts for the verdict.
    rooted : bool
        Distributed like a chi-square, and so compared by its cube root (Wilson and Hilferty 1931).
    narrowest : float
        Least spread it is standardised by, in the units it is compared in. A statistic that is
        nearly constant in the pilot replicates must not drown the others by its rare values.
    """

    check: str
    condition: str = ""
    readout: str = ""
    counts: bool = False
    rooted: bool = False
    narrowest: float = 0.0


@dataclass(frozen=True, slots=True, eq=False)
class Series:
    """Points of one condition and readout (and replicate, where it is a trajectory) over time.

    Attributes
    ----------
    times : (T,) array of distinct finite times
    rows : tuple of T int arrays
        The data rows averaged at each time.
    """

    condition: str
    readout: str
    replicate: str
    times: Array
    rows: tuple[NDArray[np.intp], ...]


def series_of(posterior: Posterior, fitted: bool = True) -> list[Series]:
    """Return the time series of the fitted (or of the held-out) points, in file order."""
    points = posterior.observations.points
    trajectory = {r.name for r in posterior.observations.readouts if r.replicates == "trajectory"}
    members: dict[tuple[str, str, str], list[int]] = {}
    for i in np.flatnonzero((points.fitted == fitted) & np.isfinite(points.time)):
        replicate = points.replicate[i] if points.readout[i] in trajectory else ""
        members.setdefault((points.condition[i], points.readout[i], replicate), []).append(int(i))
    found = []
    for (condition, readout, replicate), rows in members.items():
        at = np.array(rows, dtype=np.intp)
        times = np.unique(points.time[at])
        found.append(
            Series(
                condition,
                readout,
                replicate,
                times,
                tuple(at[points.time[at] == t] for t in times),
            )
        )
    return found


class Statistics:
    """Computes every statistic of refits of one posterior, except those of edges.

    Parameters
    ----------
    posterior : Posterior
    """

    def __init__(self, posterior: Posterior) -> None:
        self.posterior = posterior
        points = posterior.observations.points
        self.series = series_of(posterior)
        self._held_out = ~points.fitted
        self._held_series = series_of(posterior, fitted=False)
        known = posterior.noise.known[posterior.observations.which]
        self._known = known & points.fitted
        long = [s for s in self.series if len(s.times) >= SHORTEST_SERIES]
        self._long = long
        self.has_serial = bool(long)
        columns = []
        if self._known.any():
            columns.append(Column("misfit", counts=True, rooted=True, narrowest=0.1))
        if long:
            columns.append(Column("serial", counts=True, narrowest=0.02))
        for s in self.series:
            name = f"{s.condition}:{s.readout}"
            columns.append(Column(f"misfit:{name}", s.condition, s.readout))
            if len(s.times) >= SHORTEST_SERIES:
                columns.append(Column(f"serial:{name}", s.condition, s.readout))
                columns.append(Column(f"peak:{name}", s.condition, s.readout))
            columns.append(Column(f"final:{name}", s.condition, s.readout))
            columns.append(Column(f"above:{name}", s.condition, s.readout))
            columns.append(Column(f"below:{name}", s.condition, s.readout))
        if self._held_out.any():
            columns.append(Column("held_out"))
        self.columns = tuple(columns)

    def __call__(self, q: Array, zeta: Array, sample: Sample, uniform: Array) -> Array:
        """Return the statistics, one column per entry of ``columns``; (B, C).

        Parameters
        ----------
        q : (B, D) array
            Refitted coordinates.
        zeta : (B, n) array
            Their predictions on the working scale.
        sample : Sample
            The data they were fitted to.
        uniform : (B, n) array
            Randomises censored residuals.
        """
        observations = self.posterior.observations
        e = self.posterior.noise.residuals(q, zeta, sample, uniform)
        logarithmic = observations.logarithmic
        with np.errstate(over="ignore"):
            fit = np.where(logarithmic, np.exp(zeta), zeta)
            data = np.where(logarithmic, np.exp(sample.z), sample.z)
        out: list[Array] = []
        if self._known.any():
            out.append(np.sum(e[:, self._known] ** 2, axis=1))
        products, squares = np.zeros(len(e)), np.zeros(len(e))
        local: list[Array] = []
        for s in self.series:
            mean = self._averages(e, s, weight=True)
            local.append(np.sum(mean**2, axis=1))
            fitted_curve = self._averages(fit, s)
            measured = self._averages(np.broadcast_to(data, fit.shape), s)
            gap = measured - fitted_curve
            if len(s.times) >= SHORTEST_SERIES:
                lagged = np.sum(mean[:, 1:] * mean[:, :-1], axis=1)
                total = np.sum(mean**2, axis=1)
                products += lagged
                squares += total
                local.append(lagged / np.maximum(total, 1e-300))
                local.append(np.abs(measured.max(axis=1) - fitted_curve.max(axis=1)))
            local.append(np.abs(gap[:, -1]))
            local.append(gap.max(axis=1))
            local.append((-gap).max(axis=1))
        if self._long:
            out.append(products / np.maximum(squares, 1e-300))
        out += local
        if self._held_out.any():
            out.append(np.sum(e[:, self._held_out] ** 2, axis=1))
        return np.stack(out, axis=1)

    @staticmethod
    def _averages(values: Array, s: Series, weight: bool = False) -> Array:
        """Return means over replicates at each time, times sqrt(count) if ``weight``; (B, T)."""
        columns = []
        for rows in s.rows:
            factor = np.sqrt(len(rows)) if weight else 1.0
            columns.append(factor * values[:, rows].mean(axis=1))
        return np.stack(columns, axis=1)
