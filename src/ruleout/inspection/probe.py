"""One variant made ready for trying it at prior draws, with or without data."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from ruleout.equations import Model, build
from ruleout.experiments.types import Condition, Experiments, Readout
from ruleout.expressions import sym
from ruleout.fitting import Points, Posterior, Predictor
from ruleout.fitting.parameters import NOISE_KINDS, Catalogue, catalogue
from ruleout.fitting.priors import scales
from ruleout.mechanism.types import Mechanism
from ruleout.variants import Variant

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Probe:
    """A variant under the priors.

    Attributes
    ----------
    posterior : Posterior or None
        None where nothing was measured.
    last : float
        The last finite time that is measured, planned or at which a condition changes.
    structural : (D,) bool array
        Free parameters other than those of the noise.
    """

    variant: Variant
    model: Model
    mechanism: Mechanism
    experiments: Experiments
    catalogue: Catalogue
    points: Points
    predict: Predictor
    posterior: Posterior | None
    last: float
    structural: NDArray[np.bool_]

    @property
    def conditions(self) -> tuple[str, ...]:
        """Conditions in which something is measured or planned."""
        return tuple(dict.fromkeys(self.points.condition))

    def draws(self, count: int, rng: np.random.Generator) -> Array:
        """Return (count, D) coordinates from the prior, none further out than 99.9 %."""
        u = rng.uniform(0.0005, 0.9995, size=(count, self.catalogue.space.dimension))
        return self.catalogue.space.quantile(u)

    def levels(self, nodes: Iterable[str], times: Mapping[str, tuple[float, ...]]) -> Predictor:
        """Return a predictor of node amounts.

        Parameters
        ----------
        nodes : iterable of str
        times : mapping of condition to tuple of float

        Returns
        -------
        Predictor
            Its points run over conditions, then nodes, then times.
        """
        names = tuple(nodes)
        seen = {name: Readout(name, sym(name), name) for name in names}
        rows = [(c, n, t) for c, ts in times.items() for n in names for t in ts]
        return Predictor(
            self.model, replace(self.experiments, readouts=seen), self.catalogue, _points(rows)
        )


def _points(rows: list[tuple[str, str, float]], held_out: frozenset[str] = frozenset()) -> Points:
    condition, readout, time = zip(*rows, strict=True) if rows else ((), (), ())
    return Points(
        condition=np.array(condition, dtype=object),
        readout=np.array(readout, dtype=object),
        replicate=np.array([""] * len(rows), dtype=object),
        time=np.array(time, dtype=float),
        fitted=np.array([c not in held_out for c in condition], dtype=bool),
    )


def planned_points(experiments: Experiments) -> Points:
    """Return the points of a planned experiment; none where there is no plan either."""
    plan = experiments.plan
    if plan is None:
        return _points([])
    rows = []
    for name in experiments.conditions:
        own = plan.by_condition.get(name, plan)
        rows += [(name, readout, time) for readout in own.readouts for time in own.times]
    held_out = frozenset(c.name for c in experiments.conditions.values() if c.hold_out)
    return _points(rows, held_out)


def event_times(condition: Condition) -> Iterable[float]:
    """Yield every time at which a condition changes something; some are ``ALWAYS``."""
    for course in condition.inputs.values():
        yield from course.times
    for changes in (*condition.change.values(), *condition.add.values()):
        yield from (time for time, _ in changes)
    yield from (*condition.remove.values(), *condition.cut.values())


def make_probe(
    variant: Variant, mechanism: Mechanism, experiments: Experiments, ties: Mapping[str, str]
) -> Probe:
    """Return a variant's probe; ``ties`` fix the units that nothing else fixes."""
    model = build(variant, mechanism, experiments)
    posterior = None
    if experiments.data is not None:
        posterior = Posterior(model, mechanism, experiments, ties)
        parameters, points = posterior.catalogue, posterior.observations.points
        predict = posterior.predict
    else:
        parameters = catalogue(model, mechanism, experiments, ties)
        points = planned_points(experiments)
        predict = Predictor(model, experiments, parameters, points)
    conditions = [experiments.conditions[c] for c in dict.fromkeys(points.condition)]
    events = [t for c in conditions for t in event_times(c) if isfinite(t)]
    noise = [
        name.split("@")[0].rpartition(".")[2] in NOISE_KINDS for name in parameters.space.names
    ]
    return Probe(
        variant=variant,
        model=model,
        mechanism=mechanism,
        experiments=experiments,
        catalogue=parameters,
        points=points,
        predict=predict,
        posterior=posterior,
        last=max([scales(mechanism, experiments).last_time, *events]),
        structural=~np.array(noise, dtype=bool),
    )
