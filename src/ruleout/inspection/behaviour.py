"""Whether states stay bounded, settle, and settle stably, under the priors."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import NDArray

from ruleout.equations import Setup, setups
from ruleout.expressions import evaluate, symbols
from ruleout.inspection.probe import Probe
from ruleout.inspection.types import Finding
from ruleout.inspection.words import listed, share_words, verb
from ruleout.kernel import Status, System, compile_system
from ruleout.kernel.conservation import conserved_totals
from ruleout.kernel.lowering import lower

Array = NDArray[np.float64]
HORIZONS = (1.0, 2.0, 10.0, 40.0)
"""Multiples of the last time at which growth is looked at."""
WITHIN = (0.8, 0.82, 0.85, 0.87, 0.9, 0.93, 0.97, 1.0)
"""Parts of each horizon whose largest level counts, so that an oscillation is not taken for growth;
unevenly spaced, so that none keeps in step with them."""
GROWING = 0.66
"""d ln x / d ln t above which a state that never settles counts as growing without bound: half way
between the slowest default relaxation (0.32 over the last two horizons) and linear growth (1)."""
REPORTED = 0.02
"""Share of prior draws from which on trouble is worth a finding."""
UNSETTLED = 0.1
"""The same for never settling, which a time course may well do."""
NEGATIVE, SMALLEST = 1e-3, 1.0
"""A level this far below zero, as a share of the node's size (at least the second), is no rounding
error."""
SCATTERED = 6
"""Starts, beside zero, from which other rest states are looked for."""


def behaviour_findings(probe: Probe, q: Array, rng: np.random.Generator) -> Iterator[Finding]:
    """Yield findings on integration, growth, steady states and rest at prior draws ``q``."""
    yield from _failures(probe, q)
    yield from _growth(probe, q)
    yield from _rests(probe, q, rng)


def _failures(probe: Probe, q: Array) -> Iterator[Finding]:
    _, status = probe.predict(q, 1e-4)
    for code in (Status.TOO_MANY_STEPS, Status.STEP_TOO_SMALL, Status.BAD_START, Status.BLOW_UP):
        share = float(np.mean(status == code))
        if share >= REPORTED:
            yield Finding(
                probe.variant.name,
                "integration",
                code.name.lower(),
                f"In {share_words(share)} prior draws the equations cannot be integrated to the "
                f"last time ({code.name.lower().replace('_', ' ')}).",
                "Narrow the priors of the fastest rates, or look for a rate expression that "
                "divides by an amount or feeds on itself.",
            )


@dataclass(frozen=True, slots=True)
class _LongRun:
    """Shares of prior draws in which a node grows or falls below zero, or a condition is restless.

    ``unbounded`` and ``negative`` are by node, ``unsettled`` by condition.
    """

    unbounded: dict[str, float]
    negative: dict[str, float]
    unsettled: dict[str, float]


def _long_run(probe: Probe, q: Array) -> _LongRun:
    """Follow every condition well beyond the last time."""
    found = _LongRun({}, {}, {})
    nodes = [name for name in probe.model.states if ":" not in name]
    if not nodes or "time" in symbols(*probe.model.rhs):
        return found
    horizons = np.array(HORIZONS) * probe.last
    samples = tuple(np.outer(horizons, WITHIN).ravel().tolist())
    conditions = probe.experiments.conditions
    # Under an interpolated input the equations depend on time: no steady state is looked for.
    forced = [
        name
        for name in probe.conditions
        if any(course.interpolated for course in conditions[name].inputs.values())
    ]
    settling = [name for name in probe.conditions if name not in forced]
    for group, times in ((settling, (*samples, inf)), (forced, samples)):
        if not group:
            continue
        readings, status = probe.levels(nodes, dict.fromkeys(group, times))(q)
        levels = readings.reshape(len(q), len(group), len(nodes), len(times))
        solved = np.isfinite(levels[..., len(samples) - 1]).all(axis=2)
        moving = solved | (status == int(Status.BLOW_UP))[:, None]
        if times[-1] == inf:
            settled = np.isfinite(levels[..., -1]).all(axis=2)
            moving &= ~settled
            restless = (solved & ~settled).mean(axis=0)
            found.unsettled.update(zip(group, restless.tolist(), strict=True))
        shape = (*levels.shape[:3], len(horizons), len(WITHIN))
        largest = np.fmax.reduce(levels[..., : len(samples)].reshape(shape), axis=4)
        slope = _last_slope(largest, horizons)
        grows = (moving[:, :, None] & (slope > GROWING)).any(axis=1).mean(axis=0)
        lowest = np.nanmin(levels, axis=3, initial=0.0)
        size = np.nanmax(np.abs(levels), axis=3, initial=SMALLEST)
        below = (lowest < -NEGATIVE * size).any(axis=1).mean(axis=0)
        for j, node in enumerate(nodes):
            found.unbounded[node] = max(found.unbounded.get(node, 0.0), float(grows[j]))
            found.negative[node] = max(found.negative.get(node, 0.0), float(below[j]))
    return found


def _growth(probe: Probe, q: Array) -> Iterator[Finding]:
    """Yield findings on unbounded, negative and never settling states."""
    name, found = probe.variant.name, _long_run(probe, q)
    growing = [node for node, share in found.unbounded.items() if share >= REPORTED]
    if growing:
        yield Finding(
            name,
            "unbounded",
            listed(growing),
            f"In {share_words(max(found.unbounded.values()))} prior draws {listed(growing)} "
            f"{verb(growing, 'grow')} without bound (followed to {HORIZONS[-1]:.0f} times the last "
            "time); living systems saturate.",
            "Give what feeds it a saturating or Hill law, give it a loss, or narrow the priors.",
        )
    falling = [node for node, share in found.negative.items() if share >= REPORTED]
    if falling:
        yield Finding(
            name,
            "negative",
            listed(falling),
            f"In {share_words(max(found.negative.values()))} prior draws {listed(falling)} "
            f"{verb(falling, 'fall')} below zero; amounts cannot.",
            "Let every rate that takes from it vanish when it is used up.",
        )
    restless = [c for c, share in found.unsettled.items() if share >= UNSETTLED]
    if restless and not growing:
        share = share_words(max(found.unsettled[c] for c in restless))
        yield Finding(
            name,
            "no steady state",
            listed(restless),
            f"In {share} prior draws no steady state is reached after the last change in "
            f"{listed(restless)}: the system keeps oscillating or drifting.",
            "Nothing to do if it should; else narrow the priors of the feedback that drives it.",
        )


def _last_slope(levels: Array, times: Array) -> Array:
    """Return d ln x / d ln t between the last two horizons reached, -inf if unknown."""
    last = np.full(levels.shape[:-1], -np.inf)
    with np.errstate(all="ignore"):
        logs = np.log(levels)
        for k in range(len(times) - 1):
            slope = (logs[..., k + 1] - logs[..., k]) / np.log(times[k + 1] / times[k])
            last = np.where(np.isfinite(slope), slope, last)
    return last


def _rests(probe: Probe, q: Array, rng: np.random.Generator) -> Iterator[Finding]:
    """Yield findings on the state reached from zero under the resting inputs."""
    wanted = dict.fromkeys(probe.conditions, (0.0,))
    prepared = setups(probe.model, probe.experiments, wanted)
    missing: dict[str, float] = {}
    unstable: dict[str, float] = {}
    several: dict[str, float] = {}
    done: dict[object, tuple[float, float, float]] = {}
    for setup in prepared:
        if setup.rest_system is None or not setup.rest_system.states:
            continue
        held = any(name.startswith("start:") for name in setup.rest_system.parameters)
        key = (setup.rest_system, setup.rest_factor, setup.rest_shift, held and setup.condition)
        if key not in done:
            done[key] = _rest_shares(probe, setup, q, rng)
        for shares, share in zip((missing, unstable, several), done[key], strict=True):
            if share >= REPORTED:
                shares[setup.condition] = share
    for kind, shares, trouble, remedy in (
        (
            "no rest",
            missing,
            "no rest state is reached from zero under the resting inputs of",
            "Give the nodes a start of their own, or a loss that lets them rest.",
        ),
        (
            "unstable rest",
            unstable,
            "the rest state reached from zero is unstable in",
            "Cells cannot stay there: give a small basal rate, or a start of their own.",
        ),
        (
            "several rests",
            several,
            "there are several stable rest states in",
            "The one reached from zero is taken; give a start if the cells rest in another.",
        ),
    ):
        if shares:
            yield Finding(
                probe.variant.name,
                kind,
                listed(list(shares)),
                f"In {share_words(max(shares.values()))} prior draws {trouble} "
                f"{listed(list(shares))}.",
                remedy,
            )


def _rest_shares(
    probe: Probe, setup: Setup, q: Array, rng: np.random.Generator
) -> tuple[float, float, float]:
    """Return the shares of draws with no rest, an unstable one and several stable ones."""
    system = setup.rest_system
    assert system is not None
    p = _rest_parameters(probe, setup, system, q)
    program = compile_system(system)
    found = program.steady(np.zeros((len(q), len(system.states))), p)
    rested = found.status == Status.OK
    missing = float(np.mean(~rested))
    unstable = float(np.mean(rested & ~found.stable))
    if len(conserved_totals(lower(system))[0]):
        # Other starts would have other totals, and so other rest states in any case.
        return missing, unstable, 0.0
    nodes = probe.variant.wiring.nodes
    fraction = np.array([n in nodes and nodes[n].kind == "switched" for n in system.states])
    u = rng.uniform(size=(len(q), SCATTERED, len(system.states)))
    size = np.maximum(np.abs(np.nan_to_num(found.states)), 1e-3)[:, None, :]
    starts = np.where(fraction, u, size * 10.0 ** (4.0 * u - 2.0))
    others = program.steady(starts.reshape(-1, len(system.states)), np.repeat(p, SCATTERED, 0))
    usable = ((others.status == Status.OK) & others.stable).reshape(len(q), SCATTERED)
    ends = others.states.reshape(starts.shape)
    first = found.states[:, None, :]
    with np.errstate(invalid="ignore"):
        apart = np.abs(ends - first) > 1e-3 * np.maximum(np.abs(ends), np.abs(first)) + 1e-9
    elsewhere = usable & apart.any(axis=2) & (rested & found.stable)[:, None]
    return missing, unstable, float(np.mean(elsewhere.any(axis=1)))


def _rest_parameters(probe: Probe, setup: Setup, system: System, q: Array) -> Array:
    """Return (B, P) parameters in force at rest."""
    values: Array = probe.catalogue.values(q)
    columns = probe.catalogue.columns
    p = np.zeros((len(q), len(system.parameters)))
    for j, name in enumerate(system.parameters):
        if ":" not in name:
            p[:, j] = values[:, columns[name]]
    p *= np.array(setup.rest_factor)
    p += np.array(setup.rest_shift)
    for j, name in enumerate(system.parameters):
        value = None
        if name.startswith("start:"):
            value = setup.starts[setup.system.states.index(name[6:])].value
        if value is not None:
            env = {
                own: values[:, columns[own]] * setup.start_factors.get(own, 1.0)
                for own in symbols(value)
            }
            p[:, j] = evaluate([value], env)[0]
    return p
