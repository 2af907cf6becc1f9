"""Reading ``[condition.NAME]``."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.experiments.types import ALWAYS, Condition, InputCourse
from ruleout.files import Section, describe

KEYS = (
    "input", "remove", "clamp", "change", "cut", "start", "add", "free", "hold_out",
)  # fmt: skip
HINTS = {
    "inputs": "write input.NODE = 1.0",
    "dose": "write add.NODE = [[time, amount]]",
    "knockout": 'write remove = ["NODE"]',
}


def read_condition(name: str, table: Section) -> Condition:
    """Return a condition; that its names exist is checked against the mechanism.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(KEYS, HINTS)
    clamp = table.section("clamp")
    condition = Condition(
        name=name,
        inputs=_read_inputs(table),
        remove=_read_times(table, "remove"),
        clamp={node: clamp.number(node, low=0.0) for node in clamp.values},
        change=_read_changes(table),
        cut=_read_times(table, "cut"),
        start=_read_starts(table),
        add=_read_doses(table),
        free=table.names("free"),
        hold_out=table.flag("hold_out"),
    )
    for node in condition.clamp:
        if node in condition.remove:
            clamp.fail(node, f"'{node}' is removed in this condition as well; keep one of the two")
    return condition


def _read_inputs(table: Section) -> dict[str, InputCourse]:
    inner = table.section("input")
    courses = {}
    for node, value in inner.values.items():
        if isinstance(value, Mapping):
            course = inner.section(node)
            course.only(("table",))
            points = course.course("table", course.values.get("table"), "level")
            if len(points) < 2:
                course.fail("table", "one point was given; two or more are needed to interpolate")
        elif isinstance(value, list):
            points = inner.course(node, value, "level")
        else:
            points = ((0.0, inner.as_number(node, value)),)
        times, levels = zip(*points, strict=True)
        courses[node] = InputCourse(times, levels, interpolated=isinstance(value, Mapping))
    return courses


def _read_times(table: Section, key: str) -> dict[str, float]:
    """Return names with the time from which they are gone; a list means at rest as well."""
    if isinstance(table.values.get(key), Mapping):
        inner = table.section(key)
        return {name: inner.number(name, low=0.0) for name in inner.values}
    return dict.fromkeys(table.names(key), ALWAYS)


def _read_changes(table: Section) -> dict[str, tuple[tuple[float, float], ...]]:
    inner = table.section("change")
    changes: dict[str, tuple[tuple[float, float], ...]] = {}
    for parameter, value in table.parameters("change").items():
        if isinstance(value, list):
            changes[parameter] = inner.course(parameter, value, "factor")
        else:
            changes[parameter] = ((ALWAYS, inner.as_number(parameter, value)),)
        for _, factor in changes[parameter]:
            inner.as_number(parameter, factor, low=0.0)
    return changes


def _read_starts(table: Section) -> dict[str, float | str]:
    inner = table.section("start")
    return {
        node: value if isinstance(value, str) else inner.as_number(node, value, low=0.0)
        for node, value in inner.values.items()
    }


def _read_doses(table: Section) -> dict[str, tuple[tuple[float, float], ...]]:
    inner = table.section("add")
    doses = {}
    for node, value in inner.values.items():
        doses[node] = inner.course(node, value, "amount")
        for _, amount in doses[node]:
            if amount <= 0:
                inner.fail(node, f"amount {describe(amount)} was given; a dose is above 0")
    return doses
