"""Which nodes and edges can influence a measured readout at all."""

from __future__ import annotations

from collections.abc import Collection, Sequence

from ruleout.experiments.types import ALWAYS, Condition, Experiments
from ruleout.expressions import symbols
from ruleout.mechanism.types import REST, Node
from ruleout.variants.contests import cut_with_onto
from ruleout.variants.graph import Arc, pushes
from ruleout.variants.types import Wiring


def read_nodes(experiments: Experiments) -> frozenset[str]:
    """Return the nodes that some readout looks at."""
    return frozenset().union(*(symbols(r.of) for r in experiments.readouts.values()))


def measured_pairs(experiments: Experiments) -> list[tuple[str, str]]:
    """Return the pairs of condition and readout that are measured or planned.

    A readout given relative to another condition's point makes that condition count as well.
    """
    if experiments.data is not None:
        columns = experiments.data[["condition", "readout"]].drop_duplicates()
        pairs = list(columns.itertuples(index=False, name=None))
    elif experiments.plan is not None:
        own = experiments.plan.by_condition
        pairs = [
            (c, r)
            for c in experiments.conditions
            for r in (own[c].readouts if c in own else experiments.plan.readouts)
        ]
    else:
        pairs = [(c, r) for c in experiments.conditions for r in experiments.readouts]
    references = [
        (reference.condition, r)
        for _, r in pairs
        if (reference := experiments.readouts[r].relative_to) is not None and reference.condition
    ]
    return list(dict.fromkeys([*pairs, *references]))


def upstream(
    arcs: Sequence[Arc], goals: Collection[str], blocked: Collection[str] = ()
) -> frozenset[str]:
    """Return the nodes from which a directed path leads to a goal without a blocked node."""
    before: dict[str, list[str]] = {}
    for arc in arcs:
        before.setdefault(arc.target, []).append(arc.source)
    reached = {name for name in goals if name not in blocked}
    todo = list(reached)
    while todo:
        for name in before.get(todo.pop(), ()):
            if name not in reached and name not in blocked:
                reached.add(name)
                todo.append(name)
    return frozenset(reached)


def _silent(node: Node, condition: Condition) -> bool:
    """Return whether an input is zero throughout a condition."""
    course = condition.inputs.get(node.name)
    levels = () if course is None else course.levels
    return (
        node.kind == "input"
        and node.resting == 0.0
        and not any(levels)
        and not condition.clamp.get(node.name)
    )


def _effective_in(
    wiring: Wiring, arcs: Sequence[Arc], condition: Condition, goals: Collection[str]
) -> set[str]:
    """Return the nodes and edges of a wiring that can move the goals in one condition."""
    gone = {n for n, t in condition.remove.items() if t == ALWAYS}
    gone |= {n for n, node in wiring.nodes.items() if _silent(node, condition)}
    cut = cut_with_onto(wiring.edges, {e for e, t in condition.cut.items() if t == ALWAYS})
    # A clamp holds from time 0 only; before that the node takes part in what happens at rest.
    rests = any(
        condition.start.get(name, node.start) == REST
        for name, node in wiring.nodes.items()
        if node.kind != "input"
    )
    blocked = gone if rests else gone | set(condition.clamp)
    alive = [arc for arc in arcs if arc.edge not in cut and arc.source not in gone]
    reach = upstream(alive, goals, blocked)
    effective = {
        name
        for name, edge in wiring.edges.items()
        if name not in cut
        and not any(source in gone for source, _ in edge.sources)
        and not reach.isdisjoint(pushes(edge, wiring))
    }
    return effective | set(reach)


def effective(wiring: Wiring, arcs: Sequence[Arc], experiments: Experiments) -> frozenset[str]:
    """Return the nodes and edges of a wiring that can influence a measured readout.

    An edge can if it is there, with a source that is not zero, in a condition in which a directed
    path leads from a node it acts on to a node of a readout measured there. Conditions held out
    do not count: they never enter a verdict. Being able to is a matter of the graph: the effect may
    still be too small to see.
    """
    goals: dict[str, set[str]] = {}
    for condition, readout in measured_pairs(experiments):
        goals.setdefault(condition, set()).update(symbols(experiments.readouts[readout].of))
    found: set[str] = set()
    for name, nodes in goals.items():
        measured = experiments.conditions[name]
        if not measured.hold_out:
            found |= _effective_in(wiring, arcs, measured, nodes)
    return frozenset(found)
