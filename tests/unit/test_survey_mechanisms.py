"""A mechanism with contested edges surveyed as a family."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from ruleout.errors import InputError
from ruleout.mechanism.types import Fixed, LogUniform
from ruleout.report.survey_page import write_survey_report
from ruleout.survey import Settings, read_family, survey
from ruleout.survey.mechanisms import VariantRoster

MECHANISM = """
title = "Two repressors"
[node.s]
kind = "input"
resting = 1.0
[node.u]
kind = "expressed"
[node.v]
kind = "expressed"
[edge.drive]
from = "s"
to = "u"
effect = "stimulates"
[edge.v_on_u]
from = "v"
to = "u"
effect = "inhibits"
law = "hill"
contested = true
[edge.u_on_v]
from = "u"
to = "v"
contested = ["inhibits", "stimulates", "absent"]
law = "hill"
[prior]
"u.loss_rate" = 1
"v.loss_rate" = "u.loss_rate"
"v_on_u.hill" = { low = 2, high = 4 }
"drive.strength" = { median = 3, fold = 10 }
"""
FAMILY = """
[family]
mechanism = "mechanism.toml"
input = "s"
output = "u"
[range]
basal = { low = 1, high = 10 }
half = { low = 0.3, high = 3 }
"u_on_v.hill" = 3
[sampling]
sets = 64
[behaviour.multistability]
level = 1
[behaviour.acceleration]
"""


@pytest.fixture
def source(tmp_path: Path):
    (tmp_path / "mechanism.toml").write_text(MECHANISM)
    (tmp_path / "family.toml").write_text(FAMILY)
    return read_family(tmp_path / "family.toml")


def test_only_mutual_inhibition_is_bistable(source):
    result = survey(source, Settings(sets=64))
    rows = result.topologies.query("behaviour == 'multistability'")
    assert len(rows) == 6
    working = rows[rows["works"]]
    assert working["edges"].tolist() == ["v_on_u; u_on_v=inhibits"]
    assert (rows["judged"] == 64).all()


def test_ranges_come_from_the_family_then_the_priors_then_the_defaults(source):
    of = source.family.range_of
    assert of("u.basal") == LogUniform(1.0, 10.0)
    assert of("u_on_v.hill") == Fixed(3.0)
    assert of("v_on_u.hill") == LogUniform(2.0, 4.0)
    assert of("u.loss_rate") == Fixed(1.0)
    assert of("drive.strength") == LogUniform(0.3, 30.0)
    assert of("u_on_v.strength") == LogUniform(0.1, 10.0)


def test_tied_parameters_move_together(source):
    roster = VariantRoster(source.family)
    member = roster.member(len(roster) - 1)
    assert "v.loss_rate" not in member.parameters
    values = np.full((1, len(member.parameters)), 0.7)
    made = member.subject(values)
    names = made.program.system.parameters
    assert made.p[0, names.index("v.loss_rate")] == 0.7
    assert made.p[0, names.index("s")] == 1.0


def test_it_can_be_drawn(source, tmp_path):
    result = survey(source, Settings(sets=32))
    write_survey_report(result, source.family, tmp_path / "out")
    assert (tmp_path / "out" / "figures" / "multistability_atlas.svg").exists()
    assert "Two repressors" in (tmp_path / "out" / "report.html").read_text()


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('output = "u"', 'output = "s"', "'s' is no node that moves"),
        ('input = "s"', 'input = "u"', "'u' is no input of this mechanism"),
        ('"u_on_v.hill" = 3', '"u_on_w.hill" = 3', "'u_on_w.hill' is no parameter"),
        ('"u_on_v.hill" = 3', "hil = 3", "'hil' has no range here"),
        ("mechanism.toml", "other.toml", "other.toml"),
    ],
)
def test_what_cannot_be_used_is_told_with_its_place(source, tmp_path, old, new, message):  # noqa: ARG001
    (tmp_path / "bad.toml").write_text(FAMILY.replace(old, new))
    with pytest.raises(InputError) as raised:
        read_family(tmp_path / "bad.toml")
    assert message in str(raised.value)
