"""The parameters that priors and conditions may name are those that occur in some variant."""

from __future__ import annotations

from pathlib import Path

from ruleout.case import read_case
from ruleout.equations import build
from ruleout.mechanism import parameter_names
from ruleout.variants import expand

MECHANISM = """\
[node.cold]
kind = "input"
[node.drug]
kind = "input"
[node.sensor]
kind = "switched"
acts_on = "saturating"
[node.kinase]
kind = "switched"
basal = 0
[node.gene]
kind = "expressed"
[node.store]
kind = "pool"
start = "free"
[node.bin]
kind = "pool"
[node.complex]
kind = "pool"
[edge.a]
from = "cold"
to = "sensor"
law = ["linear", "hill"]
contested = ["stimulates", "inhibits", "absent"]
delay = true
[edge.b]
from = "sensor"
to = "kinase"
effect = "stimulates"
acts_on = "saturating"
[edge.c]
from = "kinase"
to = "gene"
effect = "stimulates"
law = "hill"
necessary = true
[edge.d]
from = "gene"
to = "sensor"
effect = "stimulates"
on = "loss"
contested = true
[edge.e]
from = "store"
to = "bin"
effect = "converts"
law = ["linear", "saturating"]
[edge.f]
from = "drug"
onto = "e"
effect = "inhibits"
law = "hill"
contested = true
[edge.g]
from = "drug"
onto = "b"
effect = "stimulates"
law = "saturating"
[edge.h]
from = ["bin", "gene"]
to = "complex"
effect = "binds"
[edge.i]
from = "complex"
effect = "converts"
rate = { x = "k * complex / (m + complex)", y = "q * complex" }
[edge.j]
from = "store"
to = "gene"
effect = "converts"
reversible = true
law = "hill"
[edge.k]
from = "gene"
to = "kinase"
effect = "inhibits"
on = "loss"
"""
EXPERIMENTS = """\
[readout.y]
of = "kinase + gene + bin"
[condition.step]
input.cold = 1.0
"""


def test_named_parameters_are_those_of_the_variants_equations(tmp_path: Path) -> None:
    (tmp_path / "mechanism.toml").write_text(MECHANISM, encoding="utf-8")
    (tmp_path / "experiments.toml").write_text(EXPERIMENTS, encoding="utf-8")
    case = read_case(tmp_path, require_data=False)
    variants = expand(case.mechanism, case.experiments).variants.values()
    models = [build(v, case.mechanism, case.experiments) for v in variants]
    found = set().union(*(model.parameters for model in models))
    # Its basal term is fixed at zero, which leaves no trace in the equations.
    assert set(parameter_names(case.mechanism)) - {"kinase.basal"} == found
