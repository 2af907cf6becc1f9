"""All parameters of one variant: of its equations, of the readouts and of the noise."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.equations.types import Model
from ruleout.experiments.types import Experiments, Readout
from ruleout.fitting.priors import (
    Scales,
    Space,
    default_equation_prior,
    make_space,
    resolve_ties,
    scales,
)
from ruleout.mechanism.types import (
    Fixed,
    LogNormal,
    LogUniform,
    Mechanism,
    Normal,
    Prior,
    Tied,
)

Array = NDArray[np.float64]
NOISE_KINDS = ("sd", "sd_rel", "nu")


@dataclass(frozen=True, slots=True)
class Entry:
    """One parameter with its prior and where that comes from (``file``, ``default``, ``unit``)."""

    name: str
    kind: str
    unit: str
    prior: Prior
    prior_from: str


@dataclass(frozen=True, slots=True, eq=False)
class Catalogue:
    """Every parameter of a variant, free, fixed or tied, and the space of the free ones.

    ``columns`` maps a name to its column in the arrays of :meth:`values`; a tied parameter has the
    column of the one it follows.
    """

    entries: tuple[Entry, ...]
    space: Space
    columns: Mapping[str, int]
    constants: Array

    def values(self, q: Array) -> Array:
        """Return all parameters on the natural scale, (B, D) coordinates -> (B, A)."""
        free = self.space.natural(q)
        fixed = np.broadcast_to(self.constants, (len(q), len(self.constants)))
        return np.concatenate([free, fixed], axis=1)


def _readout_priors(
    readout: Readout, experiments: Experiments, known: Scales
) -> list[tuple[str, str, str, Prior]]:
    name = readout.name
    rows: list[tuple[str, str, str, Prior]] = []
    largest = known.largest.get(name, 1.0)
    spread = known.spread.get(name, 1.0)
    measured = experiments.data
    if readout.scale == "free":
        prior = LogNormal(largest, 10.0)
        if readout.scale_by is None:
            rows.append((f"{name}.scale", "scale", "", prior))
        elif measured is not None:
            column = measured.loc[measured["readout"] == name, readout.scale_by]
            rows += [
                (f"{name}.scale@{key}", "scale", "", prior) for key in dict.fromkeys(column) if key
            ]
    if readout.offset == "free":
        rows.append((f"{name}.offset", "offset", "", Normal(0.0, spread)))
    if readout.replicates == "batch" and measured is not None:
        rows.append((f"{name}.batch_sd", "batch_sd", "", LogNormal(0.1, 10.0)))
        column = measured.loc[measured["readout"] == name, "replicate"]
        rows += [
            (f"{name}.batch@{key}", "batch", "", Normal(0.0, 1.0))
            for key in dict.fromkeys(column)
            if key
        ]
    if readout.noise in ("free", "free+proportional"):
        typical = 0.2 if readout.family == "lognormal" else 0.1 * spread
        rows.append((f"{name}.sd", "sd", "", LogNormal(typical, 10.0)))
    if readout.noise == "free+proportional":
        rows.append((f"{name}.sd_rel", "sd_rel", "", LogNormal(0.1, 10.0)))
    if readout.family == "student":
        rows.append((f"{name}.nu", "nu", "", LogUniform(2.5, 50.0)))
    return rows


def catalogue(
    model: Model,
    mechanism: Mechanism,
    experiments: Experiments,
    ties: Mapping[str, str],
) -> Catalogue:
    """Return the parameters of ``model`` under the file's priors and the default table.

    Parameters
    ----------
    ties : mapping of parameter to parameter
        Those that fix units nothing else fixes; they give way to priors in the file.
    """
    known = scales(mechanism, experiments)
    given = mechanism.priors
    entries: list[Entry] = []

    def add(name: str, kind: str, unit: str, default: Prior, fallback: str = "") -> None:
        if name in given:
            entries.append(Entry(name, kind, unit, given[name], "file"))
        elif fallback in given:
            entries.append(Entry(name, kind, unit, given[fallback], "file"))
        elif name in ties:
            entries.append(Entry(name, kind, unit, Tied(ties[name]), "unit"))
        else:
            entries.append(Entry(name, kind, unit, default, "default"))

    conditions = experiments.conditions.values()
    for p in model.parameters.values():
        default = default_equation_prior(p.kind, p.source, mechanism, known)
        add(p.name, p.kind, p.unit, default)
        for c in conditions:
            if p.name in c.free:
                add(f"{p.name}@{c.name}", p.kind, p.unit, default, fallback=p.name)
    for condition in conditions:
        for node, start in condition.start.items():
            if start == "free" and f"{node}.start@{condition.name}" not in {
                e.name for e in entries
            }:
                add(
                    f"{node}.start@{condition.name}",
                    "start",
                    mechanism.amount_unit,
                    LogNormal(1.0, 30.0),
                    fallback=f"{node}.start",
                )
    for readout in experiments.readouts.values():
        for name, kind, unit, prior in _readout_priors(readout, experiments, known):
            add(name, kind, unit, prior, fallback=name.split("@")[0])
    return _close(_without_unused(entries, model, experiments))


def _without_unused(entries: list[Entry], model: Model, experiments: Experiments) -> list[Entry]:
    """Drop parameters that every measured condition replaces by an own value.

    They would be free to wander over their prior without touching any prediction.
    """
    data = experiments.data
    if data is None:
        return entries
    measured = [experiments.conditions[c] for c in dict.fromkeys(data["condition"])]
    tied_to = {e.prior.to for e in entries if isinstance(e.prior, Tied)}
    unused = {
        name
        for name in model.parameters
        if all(name in c.free for c in measured) and name not in tied_to
    }
    absent = {
        f"{name}@{c.name}"
        for c in experiments.conditions.values()
        for name in c.free
        if c not in measured
    }
    return [e for e in entries if e.name not in unused | absent]


def _close(entries: list[Entry]) -> Catalogue:
    priors = {e.name: e.prior for e in entries}
    follows = resolve_ties(priors)
    space = make_space(priors)
    columns = {name: i for i, name in enumerate(space.names)}
    constants: list[float] = []
    for name, prior in priors.items():
        if isinstance(prior, Fixed):
            columns[name] = space.dimension + len(constants)
            constants.append(prior.value)
    for name, end in follows.items():
        columns[name] = columns[end]
    return Catalogue(tuple(entries), space, columns, np.array(constants, dtype=float))
