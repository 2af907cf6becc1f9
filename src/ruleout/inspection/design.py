"""What the experiments can speak of at all: a matter of the graph, the conditions and the times."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from ruleout.experiments.types import Condition, Experiments
from ruleout.fitting import describe_prior
from ruleout.fitting.priors import scales
from ruleout.inspection.probe import Probe
from ruleout.inspection.types import Finding
from ruleout.inspection.words import listed, verb
from ruleout.mechanism import parameter_names
from ruleout.mechanism.types import Node
from ruleout.variants import VariantSet
from ruleout.variants.graph import drivers

POINTS_PER_PARAMETER = 3
WIDEST_SPAN = 1e4
"""Last time over shortest interval from which on default rates span more than six decades."""


def design_findings(
    variants: VariantSet, experiments: Experiments, unit_sentences: tuple[str, ...]
) -> Iterator[Finding]:
    """Yield findings on contested choices and units that no fit is needed for."""
    if not variants.contests:
        yield Finding(
            "",
            "nothing contested",
            "",
            "Nothing in this mechanism is in dispute: the one wiring is judged on its own.",
            "Mark what is in dispute with contested = true.",
        )
    if experiments.data is None and experiments.plan is None:
        yield Finding(
            "",
            "no data",
            "",
            "There are neither data nor a plan, so that nothing is known of times and readouts.",
            "Add data.csv, or a [plan] with the times to measure at.",
        )
    for name in variants.out_of_reach:
        yield Finding(
            "",
            "out of reach",
            name,
            f"{name} cannot influence any readout in any condition: it is beyond these data.",
            "Measure something downstream of it, or leave it out of the dispute.",
        )
    yield from _unperturbed(variants, experiments)
    for sentence in unit_sentences:
        fixed = "is set equal" in sentence
        yield Finding(
            "",
            "units",
            "",
            sentence,
            "Nothing to do: no prediction changes." if fixed else "",
        )


def touched(condition: Condition, nodes: Mapping[str, Node]) -> frozenset[str]:
    """Return the nodes and edges on which a condition acts itself."""
    found = {
        name
        for name, course in condition.inputs.items()
        if name in nodes and any(level != nodes[name].resting for level in course.levels)
    }
    found |= condition.remove.keys() | condition.clamp.keys() | condition.cut.keys()
    found |= condition.start.keys()
    found |= {name for name, doses in condition.add.items() if any(n for _, n in doses)}
    found |= {
        parameter.partition(".")[0]
        for parameter, course in condition.change.items()
        if any(factor != 1.0 for _, factor in course)
    }
    return frozenset(found)


def _measured(experiments: Experiments) -> list[Condition]:
    conditions = [c for c in experiments.conditions.values() if not c.hold_out]
    if experiments.data is None:
        return conditions
    names = set(experiments.data["condition"])
    return [c for c in conditions if c.name in names]


def _unperturbed(variants: VariantSet, experiments: Experiments) -> Iterator[Finding]:
    """Yield a finding on the contested edges that no fitted condition acts on."""
    mechanism = variants.mechanism
    acted_on = frozenset().union(*(touched(c, mechanism.nodes) for c in _measured(experiments)))
    alone: dict[str, list[str]] = {}
    for contest in variants.contests:
        name = contest.name
        if name not in mechanism.edges or name in variants.out_of_reach:
            continue
        sources: dict[str, int] = {}
        for variant in variants.variants.values():
            if name in variant.wiring.edges:
                sources |= drivers(variant.wiring.edges[name], variant.wiring)
        if sources and acted_on.isdisjoint({name, *sources}):
            alone[name] = list(sources)
    if alone:
        origins = listed([f"{edge} (from {listed(sources)})" for edge, sources in alone.items()])
        nodes = listed(list(dict.fromkeys(n for sources in alone.values() for n in sources)))
        yield Finding(
            "",
            "not perturbed",
            ", ".join(alone),
            "No condition acts on a contested edge itself or on where it comes from, so that the "
            f"data speak of correlation alone: {origins}.",
            f"Add conditions that remove, clamp, dose or change {nodes}, or that cut the edge.",
        )


def parameter_findings(probe: Probe) -> Iterator[Finding]:
    """Yield findings on how many parameters there are, and on default priors that know little."""
    name = probe.variant.name
    points = int(probe.points.fitted.sum())
    count = int(probe.structural.sum())
    if points and count > points / POINTS_PER_PARAMETER:
        yield Finding(
            name,
            "many parameters",
            "",
            f"There are fewer than {POINTS_PER_PARAMETER} data points for each free parameter "
            f"({points} in all).",
            "Fix what is known from elsewhere under [prior], or measure more.",
        )
    yield from _own_names(probe)
    yield from _time_scale(probe)


def _own_names(probe: Probe) -> Iterator[Finding]:
    roles = parameter_names(probe.mechanism)
    own = [
        entry
        for entry in probe.catalogue.entries
        if entry.prior_from == "default"
        and (role := roles.get(entry.name.partition("@")[0])) is not None
        and role.part == "own"
    ]
    if own:
        names = [entry.name for entry in own]
        yield Finding(
            probe.variant.name,
            "default prior",
            ", ".join(names),
            f"{listed(names)} {verb(names, 'stand')} in a rate expression, where nothing tells the "
            f"unit, under a default prior ({describe_prior(own[0].prior)}).",
            "Give every such parameter a prior of its own under [prior].",
        )


def _time_scale(probe: Probe) -> Iterator[Finding]:
    defaults = [e for e in probe.catalogue.entries if (e.kind, e.prior_from) == ("rate", "default")]
    if not defaults:
        return
    known = scales(probe.mechanism, probe.experiments)
    unit = probe.mechanism.time_unit
    if not any(np.isfinite(t) and t > 0 for t in probe.points.time):
        yield Finding(
            probe.variant.name,
            "time scale",
            "",
            f"No time after 0 sets the scale of the default rate priors ({defaults[0].name} and "
            f"others: {describe_prior(defaults[0].prior)} per {unit}); steady states show only "
            "ratios of rates.",
            "Give the rates priors of their own; fix one of them if only steady states are known.",
        )
    elif known.last_time / known.shortest_interval > WIDEST_SPAN:
        yield Finding(
            probe.variant.name,
            "time scale",
            "",
            f"Times span from intervals of {known.shortest_interval:g} to {known.last_time:g} "
            f"{unit}, so that default rate priors cover "
            f"{np.log10(100 * known.last_time / known.shortest_interval):.0f} decades.",
            "Give the rates priors of their own.",
        )
