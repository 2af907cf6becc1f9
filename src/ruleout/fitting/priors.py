"""Priors as numbers: coordinates, densities, quantiles and the table of defaults.

Coordinates: a parameter with a lognormal or log-uniform prior is sampled in its natural
logarithm, one with a normal or flat prior on its natural scale. In its coordinate every prior is
either normal or uniform, which is all that the search and the sampler need to know.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from ruleout.errors import InputError
from ruleout.experiments.types import Experiments
from ruleout.mechanism.types import (
    Fixed,
    LogNormal,
    LogUniform,
    Mechanism,
    Normal,
    Prior,
    Tied,
    Uniform,
)

Array = NDArray[np.float64]
NORMAL_95 = 1.959963984540054


@dataclass(frozen=True, slots=True, eq=False)
class Space:
    """The free parameters of one variant and their priors.

    Attributes
    ----------
    names : tuple of str, length D
    log : (D,) bool array
        Whether the coordinate is the natural logarithm.
    center, sd : (D,) arrays
        Of normal priors in the coordinate; ``sd`` is inf for uniform ones.
    low, high : (D,) arrays
        Bounds of uniform priors in the coordinate, infinite for normal ones.
    """

    names: tuple[str, ...]
    log: NDArray[np.bool_]
    center: Array
    sd: Array
    low: Array
    high: Array

    @property
    def dimension(self) -> int:
        """Number of free parameters."""
        return len(self.names)

    @property
    def precision(self) -> Array:
        """Prior precision per coordinate: 1/sd², 0 where uniform; shape (D,)."""
        return 1.0 / self.sd**2

    @property
    def width(self) -> Array:
        """Typical prior width per coordinate (sd, or that of the uniform); shape (D,)."""
        bounded = np.isfinite(self.low)
        return np.where(bounded, (self.high - self.low) / np.sqrt(12.0), self.sd)

    def natural(self, q: Array) -> Array:
        """Return parameters on the natural scale from coordinates, any leading shape."""
        with np.errstate(over="ignore"):
            return np.where(self.log, np.exp(np.where(self.log, q, 0.0)), q)

    def coordinate(self, value: Array) -> Array:
        """Return coordinates from values on the natural scale."""
        return np.where(self.log, np.log(np.where(self.log, value, 1.0)), value)

    def inside(self, q: Array) -> NDArray[np.bool_]:
        """Return whether each row lies within all uniform priors; (..., D) -> (...)."""
        return np.asarray(np.all((q >= self.low) & (q <= self.high), axis=-1))

    def penalty(self, q: Array) -> Array:
        """Return -2 log prior up to a constant (inf outside); (..., D) -> (...)."""
        z = (q - self.center) / self.sd
        return np.where(self.inside(q), np.sum(z * z, axis=-1), np.inf)

    def quantile(self, u: Array) -> Array:
        """Return coordinates at prior quantiles ``u`` in (0, 1); any leading shape."""
        bounded = np.isfinite(self.low)
        with np.errstate(invalid="ignore"):
            flat = self.low + u * (self.high - self.low)
            return np.where(bounded, flat, self.center + self.sd * ndtri(u))

    def on_bound(self, q: Array, tolerance: float = 1e-6) -> NDArray[np.bool_]:
        """Return which coordinates lie on a bound of a uniform prior; (..., D) -> (..., D)."""
        with np.errstate(invalid="ignore"):
            slack = tolerance * (self.high - self.low)
            return (q <= self.low + slack) | (q >= self.high - slack)


def make_space(priors: Mapping[str, Prior]) -> Space:
    """Return the space of the free parameters among ``priors``, in their order."""
    rows: list[tuple[str, bool, float, float, float, float]] = []
    for name, prior in priors.items():
        match prior:
            case LogNormal(median, fold):
                sd = np.log(fold) / NORMAL_95
                rows.append((name, True, np.log(median), sd, -np.inf, np.inf))
            case LogUniform(low, high):
                rows.append((name, True, 0.0, np.inf, np.log(low), np.log(high)))
            case Normal(mean, sd):
                rows.append((name, False, mean, sd, -np.inf, np.inf))
            case Uniform(low, high):
                rows.append((name, False, 0.0, np.inf, low, high))
            case _:
                continue
    columns = list(zip(*rows, strict=True)) if rows else [()] * 6
    floats = [np.array(c, dtype=float) for c in columns[2:]]
    return Space(tuple(columns[0]), np.array(columns[1], dtype=bool), *floats)


def resolve_ties(priors: Mapping[str, Prior]) -> dict[str, str]:
    """Return for every tied parameter the untied one it follows; InputError on a cycle."""
    ends: dict[str, str] = {}
    for name, prior in priors.items():
        seen = [name]
        while isinstance(prior, Tied):
            if prior.to in seen:
                raise InputError(
                    f"these parameters are tied in a circle: {', '.join(seen)}; "
                    "give one of them a prior",
                    where=f"mechanism.toml: prior.{name}",
                )
            if prior.to not in priors:
                raise InputError(
                    f"tied to '{prior.to}', which is no parameter of this variant; "
                    "tie it to a parameter that is always there",
                    where=f"mechanism.toml: prior.{seen[-1]}",
                )
            seen.append(prior.to)
            prior = priors[prior.to]
        if len(seen) > 1:
            ends[name] = seen[-1]
    return ends


@dataclass(frozen=True, slots=True)
class Scales:
    """What the experiments say about time and size, for default priors.

    ``last_time`` is T, ``shortest_interval`` d: the shortest interval between times of a series.
    With no finite time beyond 0 both are 1: nothing in the data sets the time scale.
    """

    last_time: float
    shortest_interval: float
    inputs: Mapping[str, float]
    largest: Mapping[str, float]
    spread: Mapping[str, float]


def scales(mechanism: Mechanism, experiments: Experiments) -> Scales:
    """Return the scales that the table of default priors refers to."""
    inputs = {}
    for name, node in mechanism.nodes.items():
        if node.kind == "input":
            used = [
                level
                for condition in experiments.conditions.values()
                for level in (condition.inputs[name].levels if name in condition.inputs else ())
                if level > 0
            ]
            inputs[name] = float(np.exp(np.mean(np.log(used)))) if used else 1.0
    times, largest, spread = [0.0], {}, {}
    intervals: list[float] = []
    if experiments.data is not None:
        data = experiments.data
        times += [t for t in data["time"] if np.isfinite(t)]
        for _, series in data.groupby(["condition", "readout"], sort=False):
            steps = np.diff(np.unique(series["time"][np.isfinite(series["time"])]))
            intervals += list(steps)
        for readout, values in data.groupby("readout", sort=False)["value"]:
            top = float(values.abs().max())
            width = float(values.max() - values.min())
            largest[str(readout)] = top if top > 0 else 1.0
            spread[str(readout)] = width if width > 0 else (top if top > 0 else 1.0)
    elif experiments.plan is not None:
        plans = [experiments.plan, *experiments.plan.by_condition.values()]
        for plan in plans:
            finite = [t for t in plan.times if np.isfinite(t)]
            times += finite
            intervals += list(np.diff(np.unique(finite)))
    last = max(times) or 1.0
    return Scales(last, min(intervals, default=last), inputs, largest, spread)


def default_equation_prior(kind: str, source: str, mechanism: Mechanism, known: Scales) -> Prior:
    """Return the default prior of a parameter of the equations.

    Rates: log-uniform on [0.1/T, 10/d]. Levels and free starts: lognormal about 1 within a factor
    30. A half: about the geometric mean of the non-zero inputs used (input source), 0.3 (switched
    source) or 1, within a factor 30. Hill exponents: log-uniform 1-4. Delays: log-uniform on
    [d/10, T].
    """
    match kind:
        case "rate":
            return LogUniform(0.1 / known.last_time, 10.0 / known.shortest_interval)
        case "hill":
            return LogUniform(1.0, 4.0)
        case "delay":
            return LogUniform(0.1 * known.shortest_interval, known.last_time)
        case "half":
            node = mechanism.nodes.get(source)
            if node is not None and node.kind == "input":
                return LogNormal(known.inputs[source], 30.0)
            return LogNormal(0.3 if node is not None and node.kind == "switched" else 1.0, 30.0)
    return LogNormal(1.0, 30.0)


def describe_prior(prior: Prior) -> str:
    """Return the prior in words, for tables."""
    match prior:
        case LogNormal(median, fold):
            return f"lognormal, median {median:.4g}, 95 % within a factor {fold:.4g}"
        case LogUniform(low, high):
            return f"log-uniform, {low:.4g} to {high:.4g}"
        case Normal(mean, sd):
            return f"normal, mean {mean:.4g}, sd {sd:.4g}"
        case Uniform(low, high):
            return f"flat, {low:.4g} to {high:.4g}"
        case Fixed(value):
            return f"fixed at {value:.6g}"
        case Tied(to):
            return f"equal to {to}"


def quantiles(space: Space, levels: Sequence[float]) -> Array:
    """Return prior quantiles on the natural scale, shape (len(levels), D)."""
    u = np.repeat(np.asarray(levels, dtype=float)[:, None], space.dimension, axis=1)
    return space.natural(space.quantile(u))
