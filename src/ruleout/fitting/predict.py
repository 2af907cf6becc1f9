"""From coordinates to predicted readouts and their derivatives, in batches.

All conditions that share their equations go through one kernel call; starts at rest that several
conditions share are found once.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.equations import setups
from ruleout.equations.types import Model, Setup, Start
from ruleout.experiments.types import Experiments, Readout
from ruleout.expressions import ZERO, const, evaluate, substitute, symbols
from ruleout.fitting.observations import Points
from ruleout.fitting.parameters import NOISE_KINDS, Catalogue
from ruleout.kernel import Status, compile_system
from ruleout.kernel.types import System

Array = NDArray[np.float64]
STEP = 1e-6
"""Relative step of forward differences; the kernel keeps the step sequence shared."""


@dataclass(frozen=True, slots=True, eq=False)
class _Group:
    """Conditions that share a system."""

    system: System
    setups: tuple[Setup, ...]
    columns: NDArray[np.intp]


@dataclass(frozen=True, slots=True, eq=False)
class _Rest:
    """A rest to be found once for several conditions, after the example of one of them."""

    setup: Setup
    system: System
    conditions: tuple[str, ...]
    columns: NDArray[np.intp]
    factor: Array
    shift: Array


def _rests_at_zero(setup: Setup) -> bool:
    """Return whether zero, from where rest is sought, is a steady state for all parameters."""
    system = setup.rest_system
    assert system is not None
    known = dict.fromkeys(system.states, ZERO)
    for name, factor, shift in zip(
        system.parameters, setup.rest_factor, setup.rest_shift, strict=True
    ):
        if factor == 0.0:
            known[name] = const(shift)
    return all(rate is ZERO for rate in substitute(system.rhs, known))


def _columns(names: Sequence[str], catalogue: Catalogue) -> NDArray[np.intp]:
    """Return columns in the value array; specials (input:, on:, ...) get the zero column."""
    zero = catalogue.space.dimension + len(catalogue.constants)
    return np.array(
        [zero if ":" in name else catalogue.columns[name] for name in names], dtype=np.intp
    )


class Predictor:
    """Predicts the readouts at given points under one model.

    Parameters
    ----------
    model : Model
    experiments : Experiments
    catalogue : Catalogue
    points : Points
        Where to predict; n rows.
    atol : float
        Absolute tolerance per unit of ``rtol``, in units of the states.
    """

    def __init__(
        self,
        model: Model,
        experiments: Experiments,
        catalogue: Catalogue,
        points: Points,
        atol: float = 1e-3,
    ) -> None:
        self.catalogue = catalogue
        self.points = points
        self.atol = atol
        self.dynamic = self._dynamic(model, experiments)
        times = self._times(experiments, points)
        prepared = setups(model, experiments, times)
        self._setups = {s.condition: s for s in prepared}
        self._places = {
            s.condition: {name: j for j, name in enumerate(s.system.states)} for s in prepared
        }
        groups: dict[System, list[Setup]] = {}
        for setup in prepared:
            groups.setdefault(setup.system, []).append(setup)
        self._groups = [
            _Group(
                system,
                tuple(members),
                _columns(system.parameters, catalogue),
            )
            for system, members in groups.items()
        ]
        self._given_starts = [
            (s, j, start)
            for s in prepared
            for j, start in enumerate(s.starts)
            if not start.rest and start.value is not None and start.value is not ZERO
        ]
        self._rests = self._plan_rests(prepared)
        self._plan_readouts(experiments, times)

    def _dynamic(self, model: Model, experiments: Experiments) -> NDArray[np.bool_]:
        """Return which free parameters change the states, not only the readouts."""
        own = set(model.parameters)
        readouts = set(experiments.readouts)
        return np.array(
            [
                name.split("@")[0] in own or name.split(".")[0] not in readouts
                for name in self.catalogue.space.names
            ],
            dtype=bool,
        )

    @staticmethod
    def _times(experiments: Experiments, points: Points) -> dict[str, Array]:
        wanted: dict[str, set[float]] = {}
        for c, r, t in zip(points.condition, points.readout, points.time, strict=True):
            wanted.setdefault(c, set()).add(t)
            reference = experiments.readouts[r].relative_to
            if reference is not None:
                wanted.setdefault(reference.condition or c, set()).add(reference.time)
        return {c: np.array(sorted(ts)) for c, ts in wanted.items()}

    def _plan_rests(self, prepared: Sequence[Setup]) -> list[_Rest]:
        """Return every distinct rest to be found, with the conditions that share it."""
        shared: dict[object, list[Setup]] = {}
        for setup in prepared:
            if setup.rest_system is None or _rests_at_zero(setup):
                continue
            held = any(p.startswith("start:") for p in setup.rest_system.parameters)
            key = (
                setup.rest_system,
                setup.rest_factor,
                setup.rest_shift,
                setup.condition if held else "",
            )
            shared.setdefault(key, []).append(setup)
        return [
            _Rest(
                members[0],
                members[0].rest_system,
                tuple(s.condition for s in members),
                _columns(members[0].rest_system.parameters, self.catalogue),
                np.array(members[0].rest_factor),
                np.array(members[0].rest_shift),
            )
            for members in shared.values()
            if members[0].rest_system is not None
        ]

    def _plan_readouts(self, experiments: Experiments, times: Mapping[str, Array]) -> None:
        """Lay out the distinct (condition, readout, time) triples and what turns them into rows."""
        keys: dict[tuple[str, str], list[int]] = {}
        points = self.points
        for i, (c, r) in enumerate(zip(points.condition, points.readout, strict=True)):
            keys.setdefault((c, r), []).append(i)
        self._curves: list[tuple[Readout, str, NDArray[np.intp], NDArray[np.intp]]] = []
        for (c, r), rows in keys.items():
            at = np.searchsorted(times[c], points.time[rows])
            self._curves.append((experiments.readouts[r], c, np.array(rows), at.astype(np.intp)))
        self._times_of = times
        n = len(points)
        zero = self.catalogue.space.dimension + len(self.catalogue.constants)
        self._scale_column = np.full(n, zero + 1)
        self._offset_column = np.full(n, zero)
        self._batch_column = np.full(n, zero)
        self._batch_sd_column = np.full(n, zero)
        self._scale_constant = np.ones(n)
        self._offset_constant = np.zeros(n)
        columns = self.catalogue.columns
        for i, (c, r, rep) in enumerate(
            zip(points.condition, points.readout, points.replicate, strict=True)
        ):
            readout = experiments.readouts[r]
            if readout.scale == "free":
                key = {None: "", "condition": f"@{c}", "replicate": f"@{rep}"}[readout.scale_by]
                self._scale_column[i] = columns.get(f"{r}.scale{key}", zero + 1)
            else:
                self._scale_constant[i] = readout.scale
            if readout.offset == "free":
                self._offset_column[i] = columns[f"{r}.offset"]
            else:
                self._offset_constant[i] = readout.offset
            if f"{r}.batch@{rep}" in columns:
                self._batch_column[i] = columns[f"{r}.batch@{rep}"]
                self._batch_sd_column[i] = columns[f"{r}.batch_sd"]

    def _values(self, q: Array) -> Array:
        """Return (B, A + 2): all parameters, then a column of 0 and one of 1."""
        values = self.catalogue.values(q)
        pad = np.broadcast_to(np.array([0.0, 1.0]), (len(q), 2))
        return np.concatenate([values, pad], axis=1)

    def _start_value(self, start: Start, setup: Setup, values: Array) -> Array | float:
        assert start.value is not None
        if start.value.op == "const":
            return start.value.value
        env = {
            name: values[:, self.catalogue.columns[name]] * setup.start_factors.get(name, 1.0)
            for name in symbols(start.value)
        }
        return np.asarray(evaluate([start.value], env)[0], dtype=float)

    def _starts(self, values: Array, group: int) -> tuple[dict[str, Array], NDArray[np.int8]]:
        """Return the starting states of every condition and the status of finding them."""
        rows = len(values)
        status = np.zeros(rows, dtype=np.int8)
        starts = {
            s.condition: np.zeros((rows, len(s.system.states))) for s in self._setups.values()
        }
        for setup, j, start in self._given_starts:
            starts[setup.condition][:, j] = self._start_value(start, setup, values)
        for rest in self._rests:
            setup, system = rest.setup, rest.system
            p = values[:, rest.columns] * rest.factor + rest.shift
            for j, name in enumerate(system.parameters):
                if name.startswith("start:"):
                    at = setup.system.states.index(name[6:])
                    p[:, j] = starts[setup.condition][:, at]
            program = compile_system(system)
            found = program.steady(np.zeros((rows, len(system.states))), p, group=group)
            status = np.where(status == Status.OK, found.status, status)
            for condition in rest.conditions:
                target = self._setups[condition]
                for j, start in enumerate(target.starts):
                    if start.rest:
                        at = system.states.index(target.system.states[j])
                        starts[condition][:, j] = found.states[:, at]
        return starts, status

    def _levels(
        self, values: Array, rtol: float, group: int
    ) -> tuple[dict[str, Array], NDArray[np.int8]]:
        """Solve every condition: states (B, M, N) by condition, and the worst status (B,)."""
        rows = len(values)
        starts, status = self._starts(values, group)
        levels: dict[str, Array] = {}
        for g in self._groups:
            count = len(g.setups)
            p = np.tile(values[:, g.columns], (count, 1))
            y0 = np.concatenate([starts[s.condition] for s in g.setups])
            which = np.repeat(np.arange(count), rows)
            if g.system.states:
                solution = compile_system(g.system).solve(
                    y0,
                    p,
                    [s.protocol for s in g.setups],
                    which,
                    rtol=rtol,
                    atol=self.atol * rtol,
                    group=group,
                )
                states = solution.states.reshape(count, rows, *solution.states.shape[1:])
                outcome = solution.status.reshape(count, rows)
                for row in outcome:
                    status = np.where(status == Status.OK, row, status)
                for k, setup in enumerate(g.setups):
                    levels[setup.condition] = states[k]
            else:
                for setup in g.setups:
                    levels[setup.condition] = np.zeros((rows, len(setup.protocol.times), 0))
        return levels, status

    def _read(self, values: Array, levels: Mapping[str, Array]) -> Array:
        """Return predicted readouts (B, n) from the states of every condition."""
        out = np.empty((len(values), len(self.points)))
        with np.errstate(all="ignore"):
            for readout, condition, rows, at in self._curves:
                curve = self._amount(readout, condition, levels)
                if readout.relative_to is not None:
                    ref = readout.relative_to
                    where = ref.condition or condition
                    base = self._amount(readout, where, levels)
                    k = int(np.searchsorted(self._times_of[where], ref.time))
                    curve = curve / base[:, k : k + 1]
                out[:, rows] = curve[:, at]
            scale = values[:, self._scale_column] * self._scale_constant
            if (self._batch_column != self._batch_sd_column).any():
                batch = values[:, self._batch_column] * values[:, self._batch_sd_column]
                scale = scale * np.exp(batch)
            return out * scale + values[:, self._offset_column] + self._offset_constant

    def _amount(self, readout: Readout, condition: str, levels: Mapping[str, Array]) -> Array:
        """Return the readout's expression over the output times of one condition, (B, M)."""
        setup, states = self._setups[condition], levels[condition]
        times = len(setup.protocol.times)
        places = self._places[condition]
        amounts = {
            name: states[:, :times, places[name]]
            if name in places
            else np.array(setup.fixed_levels[name])[None]
            for name in symbols(readout.of)
        }
        if readout.of.op == "sym":
            value = amounts[readout.of.name]
        else:
            value = np.asarray(evaluate([readout.of], amounts)[0], dtype=float)
        shape = (len(states), times)
        return value if value.shape == shape else np.broadcast_to(value, shape)

    def __call__(self, q: Array, rtol: float = 1e-6) -> tuple[Array, NDArray[np.int8]]:
        """Predict the readouts.

        Parameters
        ----------
        q : (B, D) array of coordinates
        rtol : float

        Returns
        -------
        mu : (B, n) array
            NaN where the integration failed.
        status : (B,) int8 array of kernel statuses
        """
        values = self._values(q)
        levels, status = self._levels(values, rtol, 1)
        return self._read(values, levels), status

    def derivatives(self, q: Array, rtol: float = 1e-6) -> tuple[Array, Array, NDArray[np.int8]]:
        """Predict the readouts and their derivatives by coordinate.

        Returns
        -------
        mu : (B, n) array
        jacobian : (B, n, D) array
        status : (B,) int8 array
        """
        b, d = q.shape
        moving = np.flatnonzero(self.dynamic)
        copies = 1 + len(moving)
        step = STEP * np.where(
            self.catalogue.space.log, 1.0, np.maximum(self.catalogue.space.width, np.abs(q))
        )
        spread = np.repeat(q[:, None, :], copies, axis=1)
        spread[:, 1 + np.arange(len(moving)), moving] += step[:, moving]
        values = self._values(spread.reshape(b * copies, d))
        levels, status = self._levels(values, rtol, copies)
        mu = self._read(values, levels).reshape(b, copies, -1)
        base = mu[:, 0]
        jacobian = np.zeros((b, base.shape[1], d))
        if copies > 1:
            jacobian[:, :, moving] = np.moveaxis(mu[:, 1:] - base[:, None], 1, 2)
        still = [
            j
            for j, name in enumerate(self.catalogue.space.names)
            if not self.dynamic[j] and name.split("@")[0].rsplit(".", 1)[1] not in NOISE_KINDS
        ]
        if still:
            first = {condition: states[::copies] for condition, states in levels.items()}
            for j in still:
                moved = q.copy()
                moved[:, j] += step[:, j]
                jacobian[:, :, j] = self._read(self._values(moved), first) - base
        return base, jacobian / step[:, None, :], status.reshape(b, copies).max(axis=1)
