"""Data of a case as a behaviour to be shown."""

from __future__ import annotations

import numpy as np

from ruleout.case import read_case
from ruleout.experiments.types import InputCourse
from ruleout.files import Section
from ruleout.survey.behaviours.resemblance import Resemblance

KEYS = ("case", "condition", "readout", "closeness", "pace")


def read_resemblance(table: Section) -> Resemblance:
    """Return the behaviour of ``[behaviour.resemblance]``.

    ``case`` is a folder beside the family file; its ``condition`` may step its one input and
    change nothing else.

    Raises
    ------
    InputError
        If the data cannot be used.
    """
    table.only(KEYS)
    case = read_case(table.path.parent / table.text("case"))
    experiments = case.experiments
    name = table.word("condition", tuple(experiments.conditions))
    readout = table.word("readout", tuple(experiments.readouts))
    condition = experiments.conditions[name]
    if len(condition.inputs) != 1:
        table.fail("condition", f"'{name}' sets {len(condition.inputs)} inputs; one is needed")
    if condition.remove or condition.clamp or condition.change or condition.cut or condition.add:
        table.fail("condition", f"'{name}' does more than to step an input; choose another")
    ((node, course),) = condition.inputs.items()
    assert experiments.data is not None, "read_case demands data"
    rows = experiments.data
    rows = rows[(rows["condition"] == name) & (rows["readout"] == readout)]
    rows = rows[np.isfinite(rows["time"])]
    means = rows.groupby("time", sort=True)["value"].mean()
    if len(means) < 3 or np.ptp(means.to_numpy()) == 0.0:
        table.fail("readout", f"'{readout}' in '{name}' has no course of three times or more")
    return Resemblance(
        times=tuple(map(float, means.index)),
        values=tuple(map(float, means)),
        resting=case.mechanism.nodes[node].resting,
        steps=_steps(table, course),
        closeness=table.number("closeness", 0.1, above=0.0),
        pace=table.number("pace", 1.0, above=0.0),
    )


def _steps(table: Section, course: InputCourse) -> tuple[tuple[float, float], ...]:
    if course.interpolated:
        table.fail("condition", "its input is interpolated; only steps can be surveyed")
    return tuple(zip(course.times, course.levels, strict=True))
