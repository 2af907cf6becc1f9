"""A variant whose solves fail is not judged, and the findings say where they fail."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from ruleout.case import Case, read_case
from ruleout.pipeline import Settings, judge
from ruleout.verdicts import NOT_JUDGED

# x' = k x^2 from 1 blows up at t = 1/k; measured to t = 5, solves fail where k > 0.2. The errors
# are so large that the data do not keep the chains away from there.
MECHANISM = """
time_unit = "min"
amount_unit = "uM"
[node.x]
kind = "pool"
start = 1.0
[edge.growth]
to = "x"
effect = "converts"
rate = "k * x ** 2"
[edge.loss]
from = "x"
effect = "converts"
contested = true
[prior]
"growth.k" = { low = 0.001, high = 1.0 }
"loss.rate" = { low = 0.001, high = 0.01 }
"""
EXPERIMENTS = """
[readout.level]
of = "x"
noise = "given"
[condition.one]
"""


@pytest.fixture
def explosive(tmp_path: Path) -> Case:
    rows = [f"one,{t},level,{1.0 + 0.01 * t},30" for t in np.linspace(0.5, 5.0, 10)]
    (tmp_path / "mechanism.toml").write_text(MECHANISM)
    (tmp_path / "experiments.toml").write_text(EXPERIMENTS)
    (tmp_path / "data.csv").write_text("condition,time,readout,value,sd\n" + "\n".join(rows) + "\n")
    return read_case(tmp_path)


def test_failing_solves_leave_a_variant_not_judged_and_are_located(
    explosive: Case, tmp_path: Path
) -> None:
    judgement = judge(explosive, Settings(seed=1, effort="quick"), out=tmp_path / "run")
    assert set(judgement.variants["verdict"]) == {NOT_JUDGED}
    assert judgement.variants["flags"].str.contains("% of solves failed").all()
    found = judgement.findings[judgement.findings["kind"] == "failed solves"]
    assert list(found["variant"]) == list(judgement.variants["variant"])
    for row in found.itertuples():
        # The loss hardly matters: only the growth rate tells failures from successes.
        assert row.subject == "growth.k"
        assert "too many to judge it: mostly at growth.k around 0." in row.message
        value = float(row.message.partition("growth.k around ")[2].split()[0])
        assert 0.2 < value < 1.0
        assert "narrow the priors of growth.k" in row.remedy


def test_where_nothing_fails_nothing_is_said(tiny_case: Path, tmp_path: Path) -> None:
    judgement = judge(read_case(tiny_case), Settings(seed=1, effort="quick"), out=tmp_path)
    assert not (judgement.findings["kind"] == "failed solves").any()
