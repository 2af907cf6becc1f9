"""Variants written as SBML mean what was judged: re-simulated from the file, by SciPy alone."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import libsbml
import numpy as np
import pytest
from scipy.integrate import solve_ivp

from ruleout.case import Case, read_case
from ruleout.equations import build, unit_ties
from ruleout.errors import InputError
from ruleout.exchange import import_sbml, write_sbml
from ruleout.exchange.scene import make_scene
from ruleout.fitting import Posterior
from ruleout.mechanism import read_mechanism
from ruleout.mechanism.types import Fixed, LogNormal, Tied
from ruleout.variants import expand

DEMOS = Path(__file__).parents[2] / "mechanisms_demo"

MECHANISM = """
title = "Every construct <at> once & \\"more\\""
time_unit = "h"
amount_unit = "nM"
[node.signal]
kind = "input"
resting = 0.1
[node.ramp]
kind = "input"
[node.receptor]
kind = "switched"
acts_on = "saturating"
[node.gene]
kind = "expressed"
[node.store]
kind = "pool"
start = 3.0
[node.enzyme]
kind = "pool"
start = "free"
[node.complex]
kind = "pool"
start = 0.0
[node.waste]
kind = "pool"
start = "0.5 * spill.k"
[edge.on]
from = "signal"
to = "receptor"
effect = "stimulates"
law = "saturating"
[edge.slow]
from = "receptor"
to = "gene"
effect = "stimulates"
law = "hill"
delay = true
stages = 2
[edge.brake]
from = "gene"
to = "receptor"
effect = "inhibits"
law = "hill"
contested = true
[edge.push]
from = "ramp"
onto = "slow"
effect = "stimulates"
[edge.pair]
from = ["store", "enzyme"]
to = "complex"
effect = "binds"
[edge.turn]
from = "complex"
to = { enzyme = 1, waste = 2 }
effect = "converts"
[edge.spill]
from = "waste"
effect = "converts"
rate = "k * max(waste, 0) / (1 + sqrt(waste ** 2 + 1)) * exp(-0.01 * time) * (1 + min(gene, 2))"
[prior]
"signal_like.x" = 1.0
""".replace('"signal_like.x" = 1.0\n', '"spill.k" = { median = 0.2, fold = 3 }\n')

EXPERIMENTS = """
[readout.gene]
of = "gene"
scale = "free"
offset = 0.25
[readout.ratio]
of = "receptor / (receptor + signal + 0.1)"
[readout.waste]
of = "waste"
[readout.fold]
of = "gene"
relative_to = { condition = "plain", time = 0 }
[condition.plain]
input.signal = 1.0
[condition.pulses]
input.signal = [[0, 1.0], [3, 0.0], [5, 0.4]]
input.ramp = { table = [[0, 0.0], [4, 2.0], [6, 1.0]] }
[condition.acute]
input.signal = 0.5
change = { "gene.loss_rate" = [[2, 3.0], [6, 1.0]], "pair.rate" = 0.5 }
add.store = [[0, 1.5], [4, 2.0]]
cut = { push = 3 }
[condition.gone]
input.signal = 1.0
remove = { gene = 4 }
clamp = { enzyme = 0.7 }
start.store = 2.0
[condition.mutant]
input.signal = 1.0
remove = ["receptor"]
cut = ["pair"]
"""
TIMES = (0.0, 0.5, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> Case:
    folder = tmp_path_factory.mktemp("everything")
    (folder / "mechanism.toml").write_text(MECHANISM)
    (folder / "experiments.toml").write_text(EXPERIMENTS)
    rows = ["condition,time,readout,value"]
    for condition in ("plain", "pulses", "acute", "gone", "mutant"):
        rows += [f"{condition},{t},{r},1.0" for r in ("gene", "ratio", "waste") for t in TIMES]
    (folder / "data.csv").write_text("\n".join(rows) + "\n")
    return read_case(folder)


def python_of(node: Any) -> str:
    """Write MathML, by its own definition, as a Python expression of a mapping v."""
    kind = node.getType()
    if kind in (libsbml.AST_REAL, libsbml.AST_INTEGER, libsbml.AST_REAL_E):
        return repr(float(node.getValue()))
    if kind in (libsbml.AST_NAME, libsbml.AST_NAME_TIME):
        name = "time" if kind == libsbml.AST_NAME_TIME else node.getName()
        return f"v[{name!r}]"
    args = [python_of(node.getChild(i)) for i in range(node.getNumChildren())]
    if kind == libsbml.AST_FUNCTION_PIECEWISE:
        pieces = zip(args[:-1:2], args[1::2], strict=True)
        return "(" + "".join(f"{value} if {when} else " for value, when in pieces) + args[-1] + ")"
    if kind == libsbml.AST_MINUS and len(args) == 1:
        return f"(-{args[0]})"
    if kind == libsbml.AST_FUNCTION_ROOT:
        return f"({args[1]} ** (1.0 / {args[0]}))"
    signs = {
        libsbml.AST_PLUS: "+",
        libsbml.AST_TIMES: "*",
        libsbml.AST_MINUS: "-",
        libsbml.AST_DIVIDE: "/",
        libsbml.AST_FUNCTION_POWER: "**",
        libsbml.AST_RELATIONAL_GEQ: ">=",
        libsbml.AST_RELATIONAL_GT: ">",
    }
    if kind in signs:
        return "(" + f" {signs[kind]} ".join(args) + ")"
    functions = {
        libsbml.AST_FUNCTION_EXP: "exp",
        libsbml.AST_FUNCTION_LN: "log",
        libsbml.AST_FUNCTION_MAX: "max",
        libsbml.AST_FUNCTION_MIN: "min",
    }
    return f"{functions[kind]}({', '.join(args)})"


def function_of(node: Any) -> Callable[[dict[str, float]], float]:
    found: Callable[[dict[str, float]], float] = eval(
        f"lambda v: {python_of(node)}", {"exp": math.exp, "log": math.log, "min": min, "max": max}
    )
    return found


def limits_in(node: Any) -> set[float]:
    found = set()
    if node.getType() == libsbml.AST_RELATIONAL_GEQ:
        found.add(float(node.getChild(1).getValue()))
    for i in range(node.getNumChildren()):
        found |= limits_in(node.getChild(i))
    return found


class Simulation:
    """An SBML file as a function of time."""

    def __init__(self, path: Path) -> None:
        self.document = libsbml.readSBML(str(path))
        model = self.model = self.document.getModel()
        self.constants = {
            p.getId(): p.getValue()
            for p in (model.getParameter(i) for i in range(model.getNumParameters()))
            if p.getConstant()
        }
        species = [model.getSpecies(i) for i in range(model.getNumSpecies())]
        self.states = [s.getId() for s in species]
        self.start = [s.getInitialAmount() for s in species]
        rules = [model.getRule(i) for i in range(model.getNumRules())]
        self.rates = {r.getVariable(): function_of(r.getMath()) for r in rules if r.isRate()}
        self.assigned = {
            r.getVariable(): function_of(r.getMath()) for r in rules if r.isAssignment()
        }
        self.events = [model.getEvent(i) for i in range(model.getNumEvents())]
        triggers = [e.getTrigger().getMath() for e in self.events]
        maths = [*(r.getMath() for r in rules), *triggers]
        self.limits = sorted(set().union(*(limits_in(m) for m in maths)))
        self.order: list[str] = []
        self.environment(0.0, self.start)

    def environment(self, t: float, y: Any) -> dict[str, float]:
        env = {**self.constants, **dict(zip(self.states, y, strict=True)), "time": t}
        for name in self.order:
            env[name] = self.assigned[name](env)
        while len(self.order) < len(self.assigned):
            # The first time, rules are put in the order in which they can be evaluated.
            before = len(self.order)
            for name, rule in self.assigned.items():
                if name not in self.order:
                    try:
                        env[name] = rule(env)
                    except KeyError:
                        continue
                    self.order.append(name)
            assert len(self.order) > before, "assignment rules in a circle"
        return env

    def slopes(self, clock: float, y: Any) -> list[float]:
        env = self.environment(clock, y)
        return [self.rates[name](env) for name in self.states]

    def run(self, times: tuple[float, ...], wanted: str) -> list[float]:
        """Return a named parameter at the times, integrating from break to break."""
        stops = sorted({*times, *(limit for limit in self.limits if limit <= times[-1])})
        t, y, found = 0.0, list(self.start), {}
        for stop in stops:
            if stop > t and y:

                def right(now: float, state: Any, a: float = t, b: float = stop) -> list[float]:
                    # Rules that switch at the ends of the interval keep the value of its inside.
                    return self.slopes(min(max(now, a), b - 1e-9 * (b - a)), state)

                solved = solve_ivp(right, (t, stop), y, method="LSODA", rtol=1e-9, atol=1e-12)
                assert solved.success
                y = list(solved.y[:, -1])
            t = stop
            for event in self.events:
                if t > 0.0 and limits_in(event.getTrigger().getMath()) == {t}:
                    env = self.environment(t, y)
                    for i in range(event.getNumEventAssignments()):
                        assignment = event.getEventAssignment(i)
                        at = self.states.index(assignment.getVariable())
                        y[at] = function_of(assignment.getMath())(env)
            if t in times:
                found[t] = self.environment(t, y)[wanted]
        return [found[t] for t in times]


def predicted(case: Case, variant: str, condition: str, readout: str) -> tuple[Any, Any]:
    """Return times and values of a readout at the prior medians, by the kernel."""
    variants = expand(case.mechanism, case.experiments)
    model = build(variants.variants[variant], case.mechanism, case.experiments)
    ties = unit_ties(variants, case.experiments)[0]
    posterior = Posterior(model, case.mechanism, case.experiments, ties)
    median = posterior.space.quantile(np.full((1, posterior.space.dimension), 0.5))
    values, status = posterior.predict(median, 1e-9)
    assert status[0] == 0
    points = posterior.observations.points
    rows = (points.condition == condition) & (points.readout == readout)
    order = np.argsort(points.time[rows], kind="stable")
    times, first = np.unique(points.time[rows][order], return_index=True)
    return times, values[0, rows][order][first]


def check_valid(path: Path) -> None:
    document = libsbml.readSBML(str(path))
    document.checkConsistency()
    errors = [document.getError(i) for i in range(document.getNumErrors())]
    assert not [e.getMessage() for e in errors if e.getSeverity() >= libsbml.LIBSBML_SEV_ERROR]


@pytest.mark.parametrize("condition", ["plain", "pulses", "acute", "gone", "mutant"])
@pytest.mark.parametrize("variant", ["v1", "v2"])
def test_every_construct_is_reproduced_from_the_file(
    everything: Case, tmp_path: Path, variant: str, condition: str
) -> None:
    path = tmp_path / "model.xml"
    write_sbml(everything, variant, path, condition=condition)
    check_valid(path)
    simulation = Simulation(path)
    for readout in ("gene", "ratio", "waste"):
        times, wanted = predicted(everything, variant, condition, readout)
        found = simulation.run(tuple(times), f"readout_{readout}")
        # Two solvers at 1e-9, whose local errors add up.
        np.testing.assert_allclose(found, wanted, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("demo", ["frost_relay", "lantern_gene", "salt_sense", "spore_wake"])
def test_demos_are_reproduced_from_the_file(demo: str, tmp_path: Path) -> None:
    case = read_case(DEMOS / demo)
    variant = list(expand(case.mechanism, case.experiments).variants)[-1]
    for condition in case.experiments.conditions:
        path = tmp_path / f"{condition}.xml"
        write_sbml(case, variant, path, condition=condition)
        check_valid(path)
        simulation = Simulation(path)
        for readout in case.experiments.readouts:
            times, wanted = predicted(case, variant, condition, readout)
            if len(times):
                found = simulation.run(tuple(times), f"readout_{readout}")
                np.testing.assert_allclose(found, wanted, rtol=1e-6, atol=1e-8)


def test_without_a_condition_nothing_moves_from_rest(tmp_path: Path) -> None:
    case = read_case(DEMOS / "lantern_gene")
    path = tmp_path / "rest.xml"
    write_sbml(case, "v1", path)
    check_valid(path)
    found = Simulation(path).run((0.0, 5.0, 50.0), "readout_activator")
    assert found[0] > 0.0
    # Rest is found to rounding error; integration may leave it by its tolerance.
    np.testing.assert_allclose(found, found[0], rtol=1e-7)


def test_given_parameters_stand_in_the_file(tmp_path: Path) -> None:
    case = read_case(DEMOS / "frost_relay")
    path = tmp_path / "model.xml"
    write_sbml(case, "v1", path, {"sensor.loss_rate": 0.37})
    assert 'name="sensor.loss_rate" value="0.37"' in path.read_text()


def test_what_a_file_cannot_tell_is_named_in_its_notes(everything: Case, tmp_path: Path) -> None:
    path = tmp_path / "model.xml"
    write_sbml(everything, "v1", path, condition="plain")
    text = path.read_text()
    assert "Readouts left out: fold" in text
    assert "&lt;at&gt;" in text
    assert make_scene(everything, "v1", "plain").left_out == ("fold (relative to another point)",)


@pytest.mark.parametrize(
    ("arguments", "named"),
    [
        ({"variant_name": "v9"}, "v9"),
        ({"variant_name": "v1", "condition": "step_"}, "did you mean 'step'"),
        ({"variant_name": "v1", "parameters": {"sensor.los_rate": 1.0}}, "sensor.loss_rate"),
        ({"variant_name": "v1", "parameters": {"sensor.loss_rate": -1.0}}, "above 0"),
    ],
)
def test_unknown_names_are_refused(tmp_path: Path, arguments: dict[str, Any], named: str) -> None:
    case = read_case(DEMOS / "frost_relay")
    with pytest.raises(InputError, match=named):
        write_sbml(case, path=tmp_path / "model.xml", **arguments)
    assert not (tmp_path / "model.xml").exists()


def test_a_folder_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be written"):
        write_sbml(read_case(DEMOS / "frost_relay"), "v1", tmp_path / "no" / "model.xml")


NETWORK = """<?xml version="1.0" encoding="UTF-8"?>
<sbml xmlns="http://www.sbml.org/sbml/level3/version2/core" level="3" version="2">
<model id="net" name="A network" timeUnits="second">
<listOfCompartments>
 <compartment id="cell" size="2" spatialDimensions="3" constant="true"/>
</listOfCompartments>
<listOfSpecies>
 <species id="A" compartment="cell" initialConcentration="1.5" hasOnlySubstanceUnits="false"
  boundaryCondition="false" constant="false"/>
 <species id="B" compartment="cell" initialAmount="0" hasOnlySubstanceUnits="true"
  boundaryCondition="false" constant="false"/>
 <species id="time_" compartment="cell" initialAmount="0.2" hasOnlySubstanceUnits="true"
  boundaryCondition="true" constant="true"/>
</listOfSpecies>
<listOfParameters>
 <parameter id="k" value="0.3" constant="true"/>
 <parameter id="zero" value="0" constant="true"/>
</listOfParameters>
<listOfReactions>
 <reaction id="first" reversible="false">
  <listOfReactants>
   <speciesReference species="A" stoichiometry="2" constant="true"/></listOfReactants>
  <listOfProducts><speciesReference species="B" stoichiometry="1" constant="true"/></listOfProducts>
  <listOfModifiers><modifierSpeciesReference species="time_"/></listOfModifiers>
  <kineticLaw><math xmlns="http://www.w3.org/1998/Math/MathML">
   <apply><times/><ci>cell</ci><ci>k</ci><ci>A</ci><ci>time_</ci></apply></math></kineticLaw>
 </reaction>
 <reaction id="second" reversible="false">
  <listOfReactants>
   <speciesReference species="B" stoichiometry="1" constant="true"/></listOfReactants>
  <kineticLaw><math xmlns="http://www.w3.org/1998/Math/MathML">
   <apply><plus/><apply><times/><ci>k</ci><ci>km</ci><ci>B</ci></apply><ci>zero</ci></apply></math>
   <listOfLocalParameters><localParameter id="km" value="4"/></listOfLocalParameters></kineticLaw>
 </reaction>
</listOfReactions>
EXTRA
</model></sbml>
"""


def read_back(text: str, folder: Path) -> Any:
    (folder / "mechanism.toml").write_text(text)
    return read_mechanism(folder / "mechanism.toml")


def test_a_reaction_network_becomes_a_mechanism(tmp_path: Path) -> None:
    path = tmp_path / "net.xml"
    path.write_text(NETWORK.replace("EXTRA", ""))
    found = read_back(import_sbml(path), tmp_path)
    assert found.title == "A network"
    assert found.time_unit == "s"
    kinds = {name: (n.kind, n.start) for name, n in found.nodes.items()}
    assert kinds == {"A": ("pool", 3.0), "B": ("pool", 0.0), "time_": ("input", "rest")}
    assert found.nodes["time_"].resting == 0.2
    first = found.edges["first"]
    assert (first.sources, first.targets) == ((("A", 2.0),), (("B", 1.0),))
    # The concentration of A is its amount over the compartment's size, 2.
    assert first.rates == (("", "2 * k * (A / 2) * time_"),)
    assert found.priors["first.k"] == LogNormal(0.3, 10.0)
    assert found.priors["second.k"] == Tied("first.k")
    assert found.priors["second.km"] == LogNormal(4.0, 10.0)
    assert found.priors["second.zero"] == Fixed(0.0)


TRUE = '<math xmlns="http://www.w3.org/1998/Math/MathML"><true/></math>'
ONE = '<math xmlns="http://www.w3.org/1998/Math/MathML"><cn>1</cn></math>'


@pytest.mark.parametrize(
    ("extra", "named"),
    [
        (
            '<listOfEvents><event id="dose" useValuesFromTriggerTime="true"><trigger '
            f'initialValue="true" persistent="true">{TRUE}</trigger><listOfEventAssignments>'
            f'<eventAssignment variable="B">{ONE}</eventAssignment></listOfEventAssignments>'
            "</event></listOfEvents>",
            "event 'dose'",
        ),
        (
            f"<listOfConstraints><constraint>{TRUE}</constraint></listOfConstraints>",
            "constraint 1",
        ),
    ],
)
def test_what_is_not_understood_is_named(tmp_path: Path, extra: str, named: str) -> None:
    path = tmp_path / "net.xml"
    # Core SBML wants constraints before reactions and events after them.
    if "Constraint" in extra:
        text = NETWORK.replace("<listOfReactions>", f"{extra}<listOfReactions>")
    else:
        text = NETWORK.replace("EXTRA", extra)
    path.write_text(text.replace("EXTRA", ""))
    with pytest.raises(InputError, match=named):
        import_sbml(path)


def test_rules_are_named(tmp_path: Path) -> None:
    path = tmp_path / "net.xml"
    rule = f'<listOfRules><rateRule variable="speed">{ONE}</rateRule></listOfRules>'
    speed = '<parameter id="speed" value="1" constant="false"/></listOfParameters>' + rule
    path.write_text(NETWORK.replace("</listOfParameters>", speed).replace("EXTRA", ""))
    with pytest.raises(InputError, match="rate rule for 'speed'"):
        import_sbml(path)


def test_formulas_without_a_counterpart_are_named(tmp_path: Path) -> None:
    path = tmp_path / "net.xml"
    law = "<apply><times/><ci>k</ci><ci>km</ci><ci>B</ci></apply>"
    path.write_text(NETWORK.replace(law, "<apply><floor/><ci>B</ci></apply>").replace("EXTRA", ""))
    with pytest.raises(InputError, match="'floor' in a formula of reaction 'second'"):
        import_sbml(path)


@pytest.mark.parametrize(
    ("text", "named"),
    [
        ("", "empty"),
        ("not xml", "no valid SBML"),
        ("<sbml/>", "no valid SBML|no model"),
        ('<!DOCTYPE x [<!ENTITY a "b">]><sbml/>', "document type"),
    ],
)
def test_other_files_are_refused(tmp_path: Path, text: str, named: str) -> None:
    path = tmp_path / "net.xml"
    path.write_text(text)
    with pytest.raises(InputError, match=named):
        import_sbml(path)


def test_our_own_files_name_their_rules_when_read_back(tmp_path: Path) -> None:
    """Variants are written with rate rules, which are no reaction network."""
    path = tmp_path / "model.xml"
    write_sbml(read_case(DEMOS / "frost_relay"), "v1", path)
    with pytest.raises(InputError, match="rate rule for 'sensor'"):
        import_sbml(path)
