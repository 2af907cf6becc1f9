"""One variant in one condition as plain equations with numbers, ready to be written down."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import isfinite

import numpy as np

from ruleout.case import Case
from ruleout.equations import Model, Setup, build, setups, unit_ties
from ruleout.errors import InputError, did_you_mean
from ruleout.experiments.types import Condition, Experiments, Readout
from ruleout.expressions import Expr, const, substitute, sym, symbols
from ruleout.fitting import Points, Predictor
from ruleout.fitting.parameters import Catalogue, catalogue
from ruleout.fitting.priors import scales
from ruleout.inspection.probe import event_times
from ruleout.kernel import Status
from ruleout.variants import Variant, VariantSet, expand

RESTING = "rest"
"""Name of the condition in which nothing is done."""

Steps = tuple[tuple[float, float], ...]
"""Values with the time from which each holds."""


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """A variant in a condition under given parameters.

    Attributes
    ----------
    states : mapping of name to (start, rate of change)
        Over states, ``parameters``, ``courses`` and ``time``.
    parameters : mapping of name to float
        Constant in time.
    courses : mapping of name to Steps or Expr
        Levels of nodes that are no states, factors in force, switches.
    jumps : mapping of time to mapping of state to (keep, add)
        On reaching the time the state becomes ``keep * state + add``.
    readouts : mapping of name to Expr
    left_out : tuple of str
        Readouts that cannot be told at one point in time, with the reason.
    last : float
        The last time of interest.
    """

    variant: Variant
    condition: str
    states: Mapping[str, tuple[float, Expr]]
    parameters: Mapping[str, float]
    courses: Mapping[str, Steps | Expr]
    jumps: Mapping[float, Mapping[str, tuple[float, float]]]
    readouts: Mapping[str, Expr]
    left_out: tuple[str, ...]
    last: float


def find_variant(variants: VariantSet, name: str) -> Variant:
    """Return the variant called ``name``, or raise InputError."""
    known = variants.variants
    if name not in known:
        near = did_you_mean(name, known)
        raise InputError(f"there is no variant '{name}'{near}; they are {', '.join(known)}")
    return known[name]


def make_scene(
    case: Case,
    variant: str,
    condition: str | None = None,
    parameters: Mapping[str, float] | None = None,
) -> Scene:
    """Return a variant in a condition.

    Parameters
    ----------
    case : Case
    variant : str
    condition : str, optional
        At rest, with nothing done, if not given.
    parameters : mapping of name to float, optional
        On the natural scale; prior medians where a free parameter is not named.

    Raises
    ------
    InputError
        If the variant, the condition or a parameter is not known, or if there is no rest to start
        from under these parameters.
    """
    mechanism, experiments = case.mechanism, case.experiments
    variants = expand(mechanism, experiments)
    found = find_variant(variants, variant)
    model = build(found, mechanism, experiments)
    known = catalogue(model, mechanism, experiments, unit_ties(variants, experiments)[0])
    chosen = _condition(experiments, condition)
    alone = replace(experiments, conditions={chosen.name: chosen})
    last = max(
        [scales(mechanism, experiments).last_time, *(t for t in event_times(chosen) if isfinite(t))]
    )
    q = _coordinates(known, parameters or {})
    setup = _setup(model, alone, chosen.name, last)
    values = _values(known, q, setup.system.parameters)
    return _Writer(model, alone, known, setup, values, chosen, last, q).scene()


def _condition(experiments: Experiments, name: str | None) -> Condition:
    if name is None:
        return Condition(RESTING)
    if name not in experiments.conditions:
        near = did_you_mean(name, experiments.conditions)
        raise InputError(f"there is no condition '{name}'{near}")
    return experiments.conditions[name]


def _coordinates(known: Catalogue, given: Mapping[str, float]) -> np.ndarray:
    space = known.space
    q = space.quantile(np.full((1, space.dimension), 0.5))
    for name, value in given.items():
        if name not in space.names:
            near = did_you_mean(name, space.names)
            raise InputError(f"'{name}' is no free parameter of this variant{near}")
        j = space.names.index(name)
        if space.log[j] and value <= 0.0:
            raise InputError(f"{name} = {value:g} was given; it must be above 0")
        q[0, j] = np.log(value) if space.log[j] else value
    return q


def _values(known: Catalogue, q: np.ndarray, wanted: tuple[str, ...]) -> dict[str, float]:
    """Return the ordinary parameters among ``wanted``.

    A parameter that every measured condition replaces by its own stands for the first of those.
    """
    values = known.values(q)[0]
    found = {}
    for name in wanted:
        if ":" in name:
            continue
        own = [n for n in known.columns if n.partition("@")[0] == name]
        found[name] = float(values[known.columns[name if name in known.columns else own[0]]])
    return found


def _setup(model: Model, alone: Experiments, condition: str, last: float) -> Setup:
    """Return the setup whose output times are its break points and the last time."""
    (first,) = setups(model, alone, {condition: [last]})
    times = sorted({*first.protocol.breaks.tolist(), last})
    (setup,) = setups(model, alone, {condition: times})
    return setup


@dataclass(frozen=True, slots=True, eq=False)
class _Writer:
    model: Model
    alone: Experiments
    known: Catalogue
    setup: Setup
    values: Mapping[str, float]
    condition: Condition
    last: float
    q: np.ndarray

    def scene(self) -> Scene:
        """Put everything together."""
        setup, protocol = self.setup, self.setup.protocol
        courses, renamed = self._courses()
        rhs = substitute(setup.system.rhs, renamed)
        starts = self._starts()
        breaks = protocol.breaks.tolist()
        jumps: dict[float, dict[str, tuple[float, float]]] = {}
        for i, time in enumerate(breaks[1:], start=1):
            moved = {
                name: (float(protocol.keep[i, j]), float(protocol.add[i, j]))
                for j, name in enumerate(setup.system.states)
                if protocol.keep[i, j] != 1.0 or protocol.add[i, j] != 0.0
            }
            if moved:
                jumps[time] = moved
        readouts, left_out = self._readouts()
        return Scene(
            variant=self.model.variant,
            condition=self.condition.name,
            states={
                name: (starts[name], rate)
                for name, rate in zip(setup.system.states, rhs, strict=True)
            },
            parameters=dict(self.values),
            courses=courses,
            jumps=jumps,
            readouts=readouts,
            left_out=left_out,
            last=self.last,
        )

    def _courses(self) -> tuple[dict[str, Steps | Expr], dict[str, Expr]]:
        """Return what changes in time, and what stands for the system's own symbols."""
        setup, protocol = self.setup, self.setup.protocol
        breaks = protocol.breaks.tolist()
        courses: dict[str, Steps | Expr] = {}
        renamed: dict[str, Expr] = {}
        sloped = {n for n, c in self.condition.inputs.items() if c.interpolated}
        nodes = self.model.variant.wiring.nodes
        for node, levels in setup.fixed_levels.items():
            if node in nodes and node not in sloped:
                courses[node] = _shortened(breaks, levels[: len(breaks)])
        for j, name in enumerate(setup.system.parameters):
            what, _, node = name.rpartition(":")
            shift, factor = protocol.shift[:, j].tolist(), protocol.factor[:, j].tolist()
            if what in ("input", "clamp") and node not in sloped:
                renamed[name] = sym(node)
            elif what:
                courses[name] = _shortened(breaks, shift)
            elif any(f != 1.0 for f in factor):
                # The parameter keeps its name and value; what is in force has one of its own.
                courses[f"{name}:factor"] = _shortened(breaks, factor)
                renamed[name] = sym(name) * sym(f"{name}:factor")
        for node in sloped & nodes.keys():
            level, slope = f"input:{node}", f"slope:{node}"
            if level in courses:
                courses[node] = sym(level) + sym(slope) * sym("time")
        return courses, renamed

    def _starts(self) -> dict[str, float]:
        """Return the states at time 0, after what happens then."""
        names = self.setup.system.states
        if not names:
            return {}
        shown = {name: Readout(name, sym(name), name) for name in names}
        n = len(names)
        points = Points(
            condition=np.array([self.condition.name] * n, dtype=object),
            readout=np.array(names, dtype=object),
            replicate=np.array([""] * n, dtype=object),
            time=np.zeros(n),
            fitted=np.ones(n, dtype=bool),
        )
        seen = replace(self.alone, readouts=shown)
        found, status = Predictor(self.model, seen, self.known, points)(self.q)
        if status[0] != Status.OK:
            raise InputError(
                f"variant {self.model.variant.name} reaches no rest to start from under these "
                "parameters; give its nodes a start"
            )
        return dict(zip(names, found[0].tolist(), strict=True))

    def _readouts(self) -> tuple[dict[str, Expr], tuple[str, ...]]:
        told: dict[str, Expr] = {}
        left_out = []
        gone = {
            name: const(0.0)
            for r in self.alone.readouts.values()
            for name in symbols(r.of)
            if name not in self.model.variant.wiring.nodes
        }
        for name, readout in self.alone.readouts.items():
            if readout.relative_to is not None:
                left_out.append(f"{name} (relative to another point)")
                continue
            (value,) = substitute([readout.of], gone)
            told[name] = value * self._number(readout, "scale") + self._number(readout, "offset")
        return told, tuple(left_out)

    def _number(self, readout: Readout, part: str) -> float:
        given = getattr(readout, part)
        if given != "free":
            return float(given)
        wanted = f"{readout.name}.{part}"
        for name in (f"{wanted}@{self.condition.name}", wanted):
            if name in self.known.columns:
                return float(self.known.values(self.q)[0, self.known.columns[name]])
        return 1.0 if part == "scale" else 0.0


def _shortened(breaks: list[float], values: tuple[float, ...] | list[float]) -> Steps:
    """Return steps without those at which nothing changes."""
    kept: list[tuple[float, float]] = []
    for time, value in zip(breaks, values, strict=True):
        if not kept or kept[-1][1] != value:
            kept.append((time, float(value)))
    return tuple(kept)
