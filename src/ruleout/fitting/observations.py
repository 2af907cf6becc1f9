"""The data as arrays: working scale, censoring, replicate groups and series."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ruleout.experiments.types import Experiments, Readout

Array = NDArray[np.float64]
UNCENSORED, BELOW, ABOVE = 0, -1, 1


@dataclass(frozen=True, slots=True, eq=False)
class Points:
    """Where something is measured: n rows of condition, readout, time and replicate.

    Attributes
    ----------
    condition, readout, replicate : (n,) object arrays of str
    time : (n,) array
    fitted : (n,) bool array
        False in held-out conditions.
    """

    condition: NDArray[np.object_]
    readout: NDArray[np.object_]
    replicate: NDArray[np.object_]
    time: Array
    fitted: NDArray[np.bool_]

    def __len__(self) -> int:
        return len(self.time)


@dataclass(frozen=True, slots=True, eq=False)
class Sample:
    """Values at the points on the working scale: the logarithm where the family is lognormal.

    Attributes
    ----------
    z : (R, n) array
        Working values; of a censored point the limit.
    censored : (R, n) int8 array
        ``BELOW``, ``ABOVE`` or ``UNCENSORED``.
    sd : (R, n) array
        Stated or pure-error standard deviation on the working scale; NaN where it is free.
    """

    z: Array
    censored: NDArray[np.int8]
    sd: Array

    def take(self, rows: NDArray[np.intp] | NDArray[np.bool_]) -> Sample:
        """Return the data sets at ``rows``; a single data set serves all rows."""
        if len(self.z) == 1:
            return self
        return Sample(self.z[rows], self.censored[rows], self.sd[rows])

    def repeat(self, times: int) -> Sample:
        """Return every data set ``times`` times in a row."""
        if len(self.z) == 1:
            return self
        return Sample(
            np.repeat(self.z, times, axis=0),
            np.repeat(self.censored, times, axis=0),
            np.repeat(self.sd, times, axis=0),
        )


def working(values: Array, logarithmic: NDArray[np.bool_]) -> Array:
    """Return ``values`` on the working scale; non-positive ones become NaN where logarithmic."""
    with np.errstate(invalid="ignore", divide="ignore"):
        logs = np.log(np.where(values > 0, values, np.nan))
    return np.where(logarithmic, logs, values)


@dataclass(frozen=True, slots=True, eq=False)
class Observations:
    """Measured points with what the noise model needs to know about them.

    Attributes
    ----------
    points : Points
    readouts : tuple of Readout
    which : (n,) int array
        Index of each point's readout in ``readouts``.
    logarithmic : (n,) bool array
    limit, ceiling : (n,) arrays
        Detection limits on the working scale; -inf and inf where there is none.
    observed : Sample
        The data, one row; its ``sd`` holds given or pure-error values.
    groups : (n,) int array
        Points that repeat one another (same condition, readout and time) share a number.
    """

    points: Points
    readouts: tuple[Readout, ...]
    which: NDArray[np.intp]
    logarithmic: NDArray[np.bool_]
    limit: Array
    ceiling: Array
    observed: Sample
    groups: NDArray[np.intp]

    def censor(self, z: Array) -> tuple[Array, NDArray[np.int8]]:
        """Return working values moved to the limit where beyond it, and the censoring code."""
        code = np.where(z <= self.limit, BELOW, np.where(z >= self.ceiling, ABOVE, UNCENSORED))
        return np.clip(z, self.limit, self.ceiling), code.astype(np.int8)

    def pure_error(self, z: Array) -> tuple[Array, NDArray[np.intp]]:
        """Return sum of squares within replicate groups and its degrees of freedom.

        Parameters
        ----------
        z : (R, n) array of working values

        Returns
        -------
        squares : (R, number of readouts) array
        df : (number of readouts,) int array
            Over fitted points only.
        """
        squares = np.zeros((len(z), len(self.readouts)))
        df = np.zeros(len(self.readouts), dtype=np.intp)
        for r in range(len(self.readouts)):
            rows = np.flatnonzero((self.which == r) & self.points.fitted)
            _, member = np.unique(self.groups[rows], return_inverse=True)
            count = np.bincount(member)
            of_group = (member[:, None] == np.arange(len(count))).astype(float)
            residual = z[:, rows] - (z[:, rows] @ of_group / count)[:, member]
            squares[:, r] = np.sum(residual**2, axis=1)
            df[r] = np.sum(count - 1)
        return squares, df

    def with_pure_error(self, sample: Sample) -> Sample:
        """Return ``sample`` with the sd of ``replicates`` noise estimated from itself."""
        by_replicates = [r.noise == "replicates" for r in self.readouts]
        if not any(by_replicates):
            return sample
        squares, df = self.pure_error(sample.z)
        with np.errstate(invalid="ignore", divide="ignore"):
            sd = np.sqrt(squares / df)
        replaced = np.array(by_replicates)[self.which]
        return replace(sample, sd=np.where(replaced, sd[:, self.which], sample.sd))


def observe(experiments: Experiments) -> Observations:
    """Return the measured data of ``experiments`` as arrays."""
    data = experiments.data
    if data is None:
        raise ValueError("there are no data to observe")
    names = list(dict.fromkeys(data["readout"]))
    readouts = tuple(experiments.readouts[name] for name in names)
    which = np.array([names.index(name) for name in data["readout"]], dtype=np.intp)
    points = Points(
        condition=data["condition"].to_numpy(dtype=object),
        readout=data["readout"].to_numpy(dtype=object),
        replicate=data["replicate"].to_numpy(dtype=object),
        time=data["time"].to_numpy(dtype=float),
        fitted=np.array(
            [not experiments.conditions[c].hold_out for c in data["condition"]], dtype=bool
        ),
    )
    logarithmic = np.array([r.family == "lognormal" for r in readouts], dtype=bool)[which]
    limits = [
        [np.nan if v is None else v for v in (r.detection_limit, r.detection_ceiling)]
        for r in readouts
    ]
    bounds = working(np.array(limits, dtype=float).reshape(-1, 2)[which], logarithmic[:, None])
    values = data["value"].to_numpy(dtype=float)
    # A value of zero under a lognormal detection limit has no logarithm but is plainly below it.
    limit = np.where(np.isnan(bounds[:, 0]), -np.inf, bounds[:, 0])
    ceiling = np.where(np.isnan(bounds[:, 1]), np.inf, bounds[:, 1])
    z = working(values, logarithmic)
    z = np.where(np.isnan(z) & np.isfinite(limit), limit, z)
    sd = data["sd"].to_numpy(dtype=float)
    given = np.array([r.noise == "given" for r in readouts], dtype=bool)[which]
    keys = [
        f"{c}\x1f{r}\x1f{t!r}"
        for c, r, t in zip(data["condition"], data["readout"], points.time, strict=True)
    ]
    _, groups = np.unique(keys, return_inverse=True)
    observations = Observations(
        points=points,
        readouts=readouts,
        which=which,
        logarithmic=logarithmic,
        limit=limit,
        ceiling=ceiling,
        observed=Sample(z[None], np.zeros((1, len(z)), dtype=np.int8), z[None]),
        groups=groups.astype(np.intp),
    )
    clipped, code = observations.censor(z[None])
    sample = Sample(clipped, code, np.where(given, sd, np.nan)[None])
    return replace(observations, observed=observations.with_pure_error(sample))
