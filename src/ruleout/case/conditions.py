"""Conditions held against the mechanism."""

from __future__ import annotations

from ruleout.case.context import MECHANISM, Context
from ruleout.experiments import readout_parameters
from ruleout.experiments.types import Condition
from ruleout.expressions import parse, symbols
from ruleout.mechanism.types import FREE, REST, Fixed


def check_condition(context: Context, condition: Condition) -> None:
    """Raise InputError where a condition names what is not there or asks the impossible."""
    _check_inputs(context, condition)
    _check_holds(context, condition)
    _check_changes(context, condition)
    _check_free(context, condition)
    _check_starts(context, condition)
    _check_doses(context, condition)


def _kind(context: Context, node: str, field: str) -> str:
    context.known(node, context.mechanism.nodes, field, "node")
    return context.mechanism.nodes[node].kind


def _moving_kind(context: Context, node: str, field: str) -> str:
    kind = _kind(context, node, field)
    if kind == "input":
        context.refuse(field, f"'{node}' is an input; set its level with input.{node}")
    return kind


def _check_inputs(context: Context, condition: Condition) -> None:
    edges = context.mechanism.edges.values()
    regulators = {name for edge in edges if not edge.material for name, _ in edge.sources}
    for node, course in condition.inputs.items():
        field = f"condition.{condition.name}.input.{node}"
        kind = _kind(context, node, field)
        if kind != "input":
            context.refuse(
                field, f"'{node}' is {kind}, no input; use clamp.{node}, start.{node} or add.{node}"
            )
        if node in regulators and min(course.levels) < 0:
            context.refuse(
                field,
                f"level {min(course.levels):g} was given; an input that stimulates or inhibits is "
                "0 or more",
            )
        if node in condition.clamp or node in condition.remove:
            context.refuse(field, f"'{node}' is clamped or removed here as well; keep one of them")


def _check_holds(context: Context, condition: Condition) -> None:
    field = f"condition.{condition.name}"
    for node in condition.remove:
        _kind(context, node, f"{field}.remove")
    for node, level in condition.clamp.items():
        if _kind(context, node, f"{field}.clamp.{node}") == "switched" and level > 1:
            context.refuse(
                f"{field}.clamp.{node}",
                f"{level:g} was given; a switched node is a fraction, from 0 to 1",
            )
    for edge in condition.cut:
        context.known(edge, context.mechanism.edges, f"{field}.cut", "edge")


def _check_changes(context: Context, condition: Condition) -> None:
    for parameter, course in condition.change.items():
        field = f"condition.{condition.name}.change.{parameter}"
        context.known(parameter, context.roles, field, "parameter")
        if context.roles[parameter].positive and not all(factor for _, factor in course):
            context.refuse(
                field, "a factor of 0 leaves this parameter without a meaning; give one above 0"
            )


def _check_free(context: Context, condition: Condition) -> None:
    field = f"condition.{condition.name}.free"
    priors = context.mechanism.priors
    of_readouts = {
        name for r in context.experiments.readouts.values() for name in readout_parameters(r)
    }
    for parameter in condition.free:
        if parameter in of_readouts:
            context.refuse(
                field,
                f"'{parameter}' belongs to a readout; an own scale is written "
                'scale_by = "condition" there',
            )
        context.known(parameter, context.roles, field, "parameter")
        own = priors.get(f"{parameter}@{condition.name}", priors.get(parameter))
        if isinstance(own, Fixed):
            context.refuse(
                field,
                f"'{parameter}' is fixed in {MECHANISM}; give it a prior there, or leave it out "
                "here",
            )


def _check_starts(context: Context, condition: Condition) -> None:
    for node, start in condition.start.items():
        field = f"condition.{condition.name}.start.{node}"
        kind = _moving_kind(context, node, field)
        if start == REST and kind == "pool":
            context.refuse(
                field, "a pool has no rest of its own; give a number, 'free' or an expression"
            )
        if isinstance(start, float) and kind == "switched" and start > 1:
            context.refuse(
                field, f"{start:g} was given; a switched node is a fraction, from 0 to 1"
            )
        if isinstance(start, str) and start not in (REST, FREE):
            for name in sorted(symbols(parse(start, where=context.where(field)))):
                context.known(name, context.roles, field, "parameter")


def _check_doses(context: Context, condition: Condition) -> None:
    for node in condition.add:
        field = f"condition.{condition.name}.add.{node}"
        if _moving_kind(context, node, field) == "switched":
            context.refuse(
                field,
                f"'{node}' is switched, a fraction; amounts are added to pools and expressed nodes",
            )
        if node in condition.clamp or node in condition.remove:
            context.refuse(field, f"'{node}' is clamped or removed here; nothing can be added")
