"""A variant as SBML Level 3 Version 2 core.

States are species with rate rules, so that the file says exactly what was judged, whatever the
rate laws; what a condition does becomes assignment rules piecewise in time, and events.

References
----------
.. [1] M. Hucka et al., J. Integr. Bioinform. 16 (2019) 20190021, doi:10.1515/jib-2019-0021.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from html import escape
from pathlib import Path
from typing import Any

from ruleout.case import Case
from ruleout.errors import InputError
from ruleout.exchange.formulas import from_time, steps, to_mathml
from ruleout.exchange.library import libsbml
from ruleout.exchange.scene import Scene, make_scene
from ruleout.expressions import Expr, const, sym

COMPARTMENT = "system"
SECONDS = {
    "s": 1.0, "sec": 1.0, "second": 1.0, "seconds": 1.0,
    "min": 60.0, "minute": 60.0, "minutes": 60.0,
    "h": 3600.0, "hr": 3600.0, "hour": 3600.0, "hours": 3600.0,
    "d": 86400.0, "day": 86400.0, "days": 86400.0,
}  # fmt: skip
"""Time units that SBML can be told; under any other name the unit stands in the notes alone."""


def write_sbml(
    case: Case,
    variant_name: str,
    path: Path | str,
    parameters: Mapping[str, float] | None = None,
    condition: str | None = None,
) -> None:
    """Write a variant as SBML Level 3 Version 2 core.

    Parameters
    ----------
    case : Case
    variant_name : str
    path : path
        File to write.
    parameters : mapping of name to float, optional
        Free parameters on the natural scale; prior medians where not given.
    condition : str, optional
        Inputs, removals, clamps, cuts, changes, doses and starts of this condition go into the
        file. Without it everything is at rest.

    Raises
    ------
    InputError
        If a name is not known, no rest exists, python-libsbml is missing or the file cannot be
        written.

    Notes
    -----
    States that start at rest get the numbers reached under ``parameters``: core SBML has no word
    for rest. Readouts are parameters with assignment rules; those relative to another point in time
    are named in the notes.
    """
    library = libsbml()
    document = _document(make_scene(case, variant_name, condition, parameters), case)
    path = Path(path)
    text = library.writeSBMLToString(document)
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise InputError(
            f"this file cannot be written ({error.strerror})", where=str(path)
        ) from error


class _Names:
    """Identifiers: each name gets one, valid and its own."""

    def __init__(self) -> None:
        self.ids: dict[str, str] = {}
        self._taken: set[str] = {COMPARTMENT, "time_unit"}

    def add(self, name: str) -> str:
        """Return the identifier of ``name``, made when first asked for."""
        if name not in self.ids:
            plain = re.sub(r"[^A-Za-z0-9_]", "_", name)
            if not re.match(r"[A-Za-z_]", plain):
                plain = f"_{plain}"
            while plain in self._taken:
                plain += "_"
            self._taken.add(plain)
            self.ids[name] = plain
        return self.ids[name]


def _document(scene: Scene, case: Case) -> Any:
    library = libsbml()
    document = library.SBMLDocument(3, 2)
    model = document.createModel()
    names = _Names()
    model.setId(names.add(f"{case.name}_{scene.variant.name}"))
    title = f"{case.mechanism.title}: {scene.variant.name}, {scene.condition}"
    model.setName(_printable(title))
    model.setNotes(_notes(scene, case))
    _set_time_unit(model, case.mechanism.time_unit)
    compartment = model.createCompartment()
    compartment.setId(COMPARTMENT)
    compartment.setConstant(True)
    compartment.setSize(1.0)
    compartment.setSpatialDimensions(3)
    for name in (*scene.states, *scene.courses, *scene.parameters):
        names.add(name)
    for name in scene.readouts:
        names.add(f"readout:{name}")
    _add_states(model, scene, names)
    for name, value in scene.parameters.items():
        _add_parameter(model, names.ids[name], name, value)
    for name, course in scene.courses.items():
        _add_course(model, names, name, course)
    for name, formula in scene.readouts.items():
        shown = names.ids[f"readout:{name}"]
        _add_parameter(model, shown, name, None)
        _add_rule(model.createAssignmentRule(), shown, to_mathml(formula, names.ids))
    _add_jumps(model, scene, names)
    return document


def _add_states(model: Any, scene: Scene, names: _Names) -> None:
    for name, (start, rate) in scene.states.items():
        species = model.createSpecies()
        species.setId(names.ids[name])
        species.setName(name)
        species.setCompartment(COMPARTMENT)
        species.setInitialAmount(start)
        species.setHasOnlySubstanceUnits(True)
        species.setBoundaryCondition(False)
        species.setConstant(False)
        _add_rule(model.createRateRule(), names.ids[name], to_mathml(rate, names.ids))


def _add_parameter(model: Any, identifier: str, name: str, value: float | None) -> None:
    """Add a parameter; one without a value follows from a rule."""
    parameter = model.createParameter()
    parameter.setId(identifier)
    parameter.setName(name)
    parameter.setConstant(value is not None)
    if value is not None:
        parameter.setValue(value)


def _add_course(
    model: Any, names: _Names, name: str, course: tuple[tuple[float, float], ...] | Expr
) -> None:
    if isinstance(course, Expr):
        math = to_mathml(course, names.ids)
    elif len(course) == 1:
        _add_parameter(model, names.ids[name], name, course[0][1])
        return
    else:
        math = steps([(time, to_mathml(const(level), {})) for time, level in course])
    _add_parameter(model, names.ids[name], name, None)
    _add_rule(model.createAssignmentRule(), names.ids[name], math)


def _add_rule(rule: Any, variable: str, math: Any) -> None:
    rule.setVariable(variable)
    rule.setMath(math)


def _add_jumps(model: Any, scene: Scene, names: _Names) -> None:
    for number, (time, moved) in enumerate(scene.jumps.items(), start=1):
        event = model.createEvent()
        event.setId(names.add(f"event_{number}"))
        event.setUseValuesFromTriggerTime(True)
        trigger = event.createTrigger()
        trigger.setInitialValue(False)
        trigger.setPersistent(True)
        trigger.setMath(from_time(time))
        for name, (keep, add) in moved.items():
            assignment = event.createEventAssignment()
            assignment.setVariable(names.ids[name])
            assignment.setMath(to_mathml(sym(name) * keep + add, names.ids))


def _set_time_unit(model: Any, unit: str) -> None:
    seconds = SECONDS.get(unit.lower())
    if seconds is None:
        return
    library = libsbml()
    definition = model.createUnitDefinition()
    definition.setId("time_unit")
    definition.setName(unit)
    part = definition.createUnit()
    part.setKind(library.UNIT_KIND_SECOND)
    part.setExponent(1.0)
    part.setScale(0)
    part.setMultiplier(seconds)
    model.setTimeUnits("time_unit")


def _notes(scene: Scene, case: Case) -> str:
    mechanism = case.mechanism
    lines: list[str] = [
        f"Variant {scene.variant.name} of: {mechanism.title}",
        f"Choices: {scene.variant.label or 'nothing in dispute'}",
        f"Condition: {scene.condition}",
        f"Time in {mechanism.time_unit}, amounts in {mechanism.amount_unit}",
    ]
    if scene.left_out:
        lines.append(f"Readouts left out: {', '.join(scene.left_out)}")
    return _paragraphs(lines)


def _paragraphs(lines: Iterable[str]) -> str:
    inner = "".join(f"<p>{escape(_printable(line))}</p>" for line in lines)
    return f'<body xmlns="http://www.w3.org/1999/xhtml">{inner}</body>'


def _printable(text: str) -> str:
    """Return text without the control characters that XML cannot hold."""
    return "".join(c for c in text if c.isprintable())
