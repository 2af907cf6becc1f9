"""How a condition bends the equations: systems, break points, doses and rest."""

from __future__ import annotations

from collections.abc import Collection, Hashable, Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ruleout.equations.assembly import Assembly, Bend
from ruleout.equations.courses import factor_at, level_at, piece_at
from ruleout.equations.starts import owned, resting_level, state_start
from ruleout.equations.types import Model, Setup, Start, Structure
from ruleout.experiments.types import ALWAYS, Condition, Experiments
from ruleout.expressions import ZERO, Expr, substitute, sym, symbols
from ruleout.kernel.types import Protocol, System

Array = NDArray[np.float64]


def without_basal(model: Model) -> frozenset[str]:
    """Return the nodes of a model that have no basal term."""
    return frozenset(n for n in model.variant.wiring.nodes if f"{n}.basal" not in model.parameters)


def structure(model: Model, condition: Condition) -> Structure:
    """Return what a condition changes in the shape of the equations.

    A node removed at time 0 that feeds a delay stays a state, because what is under way still
    arrives.
    """
    nodes, edges = model.variant.wiring.nodes, model.variant.wiring.edges
    moving = {name for name, node in nodes.items() if node.kind != "input"}
    feeding = {name for e in edges.values() if e.delay is not False for name, _ in e.sources}
    removed = {
        name
        for name, time in condition.remove.items()
        if name in moving and (time == ALWAYS or (time <= 0.0 and name not in feeding))
    }
    clamped = (moving & condition.clamp.keys()) - removed
    cut = {name for name, time in condition.cut.items() if name in edges and time <= 0.0}
    return Structure(
        removed=frozenset(removed),
        clamped=frozenset(clamped),
        cut=frozenset(cut),
        switched_nodes=frozenset((moving & condition.remove.keys()) - removed - clamped),
        switched_edges=frozenset((edges.keys() & condition.cut.keys()) - cut),
        sloped=frozenset(
            name
            for name, course in condition.inputs.items()
            if name in nodes and course.interpolated and name not in condition.clamp
        ),
    )


class _Systems:
    """The systems of one model, each put together once for all conditions alike in shape."""

    def __init__(self, model: Model) -> None:
        self.model = model
        self.wiring = model.variant.wiring
        self.inputs = [name for name, node in self.wiring.nodes.items() if node.kind == "input"]
        self._made: dict[Hashable, dict[str, Expr]] = {}

    def _assembled(self, bend: Bend, wanted: Collection[str] = ()) -> dict[str, Expr]:
        return Assembly(self.wiring, without_basal(self.model), bend).equations(wanted)

    def _system(self, equations: Mapping[str, Expr], condition: Condition) -> System:
        """Return a system whose parameters are those that occur, specials last."""
        parameters = self.model.parameters
        free = {p: sym(f"{p}@{condition.name}") for p in condition.free if p in parameters}
        rhs = substitute(equations.values(), free) if free else tuple(equations.values())
        found = symbols(*rhs) - equations.keys() - {"time"}
        ordinary = [free[p].name if p in free else p for p in parameters]
        special = sorted(name for name in found if ":" in name)
        return System(
            states=tuple(equations),
            parameters=(*(p for p in ordinary if p in found), *special),
            rhs=rhs,
        )

    def main(self, condition: Condition) -> System:
        """Return the equations from time 0 on."""
        shape = structure(self.model, condition)
        if shape not in self._made:
            levels: dict[str, Expr] = {name: sym(f"input:{name}") for name in self.inputs}
            for name in shape.sloped:
                levels[name] = levels[name] + sym(f"slope:{name}") * sym("time")
            levels.update({name: sym(f"clamp:{name}") for name in shape.clamped})
            levels.update(dict.fromkeys(shape.removed, ZERO))
            bend = Bend(levels, shape.cut, shape.switched_nodes, shape.switched_edges)
            self._made[shape] = self._assembled(bend)
        return self._system(self._made[shape], condition)

    def rest(self, condition: Condition, states: Mapping[str, Start]) -> System | None:
        """Return the equations under which the states that start at rest settle.

        Only what those states depend on is kept. Anything with a given start is held there: as the
        parameter ``start:STATE`` if it is a state of the main system, else by its value.
        """
        wanted = [name for name, start in states.items() if start.rest]
        if not wanted:
            return None
        levels: dict[str, Expr] = {name: sym(f"input:{name}") for name in self.inputs}
        for name, node in self.wiring.nodes.items():
            if condition.remove.get(name) == ALWAYS and node.kind != "input":
                levels[name] = ZERO
            elif node.kind != "input":
                levels |= self._held(name, condition, states)
        cut = frozenset(name for name, time in condition.cut.items() if time == ALWAYS)
        key = (tuple(levels.items()), cut, tuple(states.items()))
        if key not in self._made:
            equations = self._assembled(Bend(levels, cut), wanted)
            held: dict[str, Expr] = {"time": ZERO}
            for name in [name for name in equations if ":" in name]:
                held |= self._held(name, condition, states)
            settling = {name: rhs for name, rhs in equations.items() if name not in held}
            rhs = substitute(settling.values(), held)
            self._made[key] = _needed(dict(zip(settling, rhs, strict=True)), wanted)
        return self._system(self._made[key], condition)

    def _held(
        self, name: str, condition: Condition, states: Mapping[str, Start]
    ) -> dict[str, Expr]:
        """Return what stands for a state at rest if it has a given start."""
        start = state_start(name, self.wiring, condition)
        if start.value is None:
            return {}
        return {name: sym(f"start:{name}") if name in states else start.value}


def _needed(equations: Mapping[str, Expr], wanted: Iterable[str]) -> dict[str, Expr]:
    """Return the equations of the states that ``wanted`` ones depend on."""
    needed = set(wanted)
    todo = list(needed)
    while todo:
        for name in (symbols(equations[todo.pop()]) & equations.keys()) - needed:
            needed.add(name)
            todo.append(name)
    return {name: rhs for name, rhs in equations.items() if name in needed}


@dataclass(frozen=True, slots=True)
class _Course:
    """What a condition does over time to everything that is no state or is multiplied."""

    model: Model
    condition: Condition

    def gone(self, name: str, time: float) -> bool:
        """Return whether a node has been removed, or an edge cut, by a time."""
        condition = self.condition
        since = condition.remove.get(name, condition.cut.get(name))
        return since is not None and since <= time

    def level(self, name: str, time: float) -> float:
        """Return the amount of an input, a clamped or a removed node at a time."""
        condition = self.condition
        if self.gone(name, time):
            return 0.0
        if name in condition.clamp:
            return condition.clamp[name]
        node = self.model.variant.wiring.nodes.get(name)
        if node is None or node.kind != "input":
            return 0.0
        return level_at(condition.inputs.get(name), time, node.resting)

    def special(self, parameter: str, time: float) -> float:
        """Return the value of a special parameter from a break point on."""
        what, _, name = parameter.partition(":")
        if what == "on":
            return 0.0 if self.gone(name, time) else 1.0
        course = self.condition.inputs.get(name)
        if what in ("input", "slope") and course is not None and course.interpolated:
            level, slope = (0.0, 0.0) if self.gone(name, time) else piece_at(course, time)
            return slope if what == "slope" else level - slope * time
        return self.level(name, time)

    def factor(self, parameter: str, time: float) -> float:
        """Return the factor on a parameter from a break point on; before time 0 at rest."""
        return factor_at(self.condition.change.get(parameter.partition("@")[0], ()), time)

    def breaks(self, last: float) -> list[float]:
        """Return time 0 and every later time, up to ``last``, at which something changes."""
        condition = self.condition
        events = [t for course in condition.inputs.values() for t in course.times]
        events += [t for course in condition.change.values() for t, _ in course]
        events += [t for course in condition.add.values() for t, _ in course]
        events += [*condition.remove.values(), *condition.cut.values()]
        return sorted({0.0, *(float(t) for t in events if 0.0 < t <= last)})


def _protocol(system: System, course: _Course, times: Array) -> Protocol:
    last = float(times[-1]) if len(times) else 0.0
    breaks = course.breaks(last)
    factor = np.zeros((len(breaks), len(system.parameters)))
    shift = np.zeros_like(factor)
    for j, name in enumerate(system.parameters):
        for i, b in enumerate(breaks):
            if ":" in name:
                shift[i, j] = course.special(name, b)
            else:
                factor[i, j] = course.factor(name, b)
    keep = np.ones((len(breaks), len(system.states)))
    add = np.zeros_like(keep)
    for j, name in enumerate(system.states):
        for i, b in enumerate(breaks):
            if course.gone(name, b):
                keep[i, j] = 0.0
            else:
                doses = course.condition.add.get(name, ())
                add[i, j] = sum(amount for t, amount in doses if t == b)
    return Protocol(
        breaks=np.array(breaks),
        factor=factor,
        shift=shift,
        keep=keep,
        add=add,
        times=times,
    )


def _setup(systems: _Systems, condition: Condition, read: Iterable[str], times: Array) -> Setup:
    course = _Course(systems.model, condition)
    system = systems.main(condition)
    states = {name: state_start(name, systems.wiring, condition) for name in system.states}
    rest = systems.rest(condition, states)
    nodes = systems.wiring.nodes
    fixed = [n for n in dict.fromkeys((*nodes, *read)) if n not in states]
    lasting = {
        owned(sym(p), condition).name: factor_at(changes, ALWAYS)
        for p, changes in condition.change.items()
    }
    rest_parameters = rest.parameters if rest else ()

    def at_rest(parameter: str) -> tuple[float, float]:
        what, _, name = parameter.rpartition(":")
        if what == "input":
            return 0.0, resting_level(nodes[name], condition)
        return course.factor(parameter, ALWAYS), 0.0

    return Setup(
        condition=condition.name,
        system=system,
        protocol=_protocol(system, course, times),
        starts=tuple(states.values()),
        start_factors={name: f for name, f in lasting.items() if f != 1.0},
        rest_system=rest,
        rest_factor=tuple(at_rest(p)[0] for p in rest_parameters),
        rest_shift=tuple(at_rest(p)[1] for p in rest_parameters),
        fixed_levels={n: tuple(course.level(n, float(t)) for t in times) for n in fixed},
    )


def setups(
    model: Model, experiments: Experiments, times_by_condition: Mapping[str, ArrayLike]
) -> list[Setup]:
    """Return one setup for each condition asked for, in their order.

    Parameters
    ----------
    model : Model
    experiments : Experiments
    times_by_condition : mapping of condition to (M,) array_like
        Output times, increasing, none negative; the last may be ``inf``.

    Returns
    -------
    list of Setup
        Conditions that change the shape of the equations alike have equal systems.

    Raises
    ------
    ValueError
        If output times are not increasing or start before 0.
    """
    read = sorted({name for r in experiments.readouts.values() for name in symbols(r.of)})
    systems = _Systems(model)
    found = []
    for name, given in times_by_condition.items():
        times = np.array(given, dtype=float)
        if times.ndim != 1 or (times < 0.0).any() or (times[1:] <= times[:-1]).any():
            raise ValueError(f"output times of '{name}' must increase from 0 on, got {times}")
        found.append(_setup(systems, experiments.conditions[name], read, times))
    return found
