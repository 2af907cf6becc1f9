from __future__ import annotations

import numpy as np
import pytest

from ruleout.case import Case, read_case
from ruleout.errors import InputError
from ruleout.pipeline.tasks import Workbench
from ruleout.rehearsal import AS_GIVEN, coordinates, designs, read_variation, simulate
from ruleout.rehearsal.truths import check_stated, draw_truth
from ruleout.seeds import generator

MECHANISM = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.y]
kind = "expressed"
[edge.u_on_x]
from = "u"
to = "x"
effect = "stimulates"
[edge.x_on_y]
from = "x"
to = "y"
effect = "stimulates"
[edge.y_on_x]
from = "y"
to = "x"
effect = "inhibits"
law = "hill"
contested = true
[prior]
"x.basal" = 0
"y.basal" = 0
"""
PLAN = """
[readout.x]
of = "x"
noise = "given"
[readout.y]
of = "y"
scale = "free"
[condition.step]
input.u = 1.0
[condition.pulse]
input.u = [[0, 1.0], [5, 0.0]]
[plan]
times = [1, 2, 5, 10]
replicates = 2
sd = { x = 0.1 }
[plan.pulse]
readouts = ["y"]
times = [6, 8]
replicates = 1
[plan.truth]
"x.loss_rate" = 0.3
"""
MEASURED = """
[readout.x]
of = "x"
[condition.step]
input.u = 1.0
"""


@pytest.fixture
def planned(case_of) -> Case:  # type: ignore[no-untyped-def]
    return case_of(MECHANISM, PLAN)


@pytest.fixture
def measured(case_of, tmp_path) -> Case:  # type: ignore[no-untyped-def]
    case = case_of(MECHANISM, MEASURED)
    rows = [f"step,{t},x,{1 - 2.0**-t}" for t in (0, 1, 2, 3, 4, 5, 6, 8, 10, 12, 16)]
    (tmp_path / "data.csv").write_text("\n".join(["condition,time,readout,value", *rows]) + "\n")
    return read_case(case.folder)


def test_a_plan_becomes_points_condition_by_condition(planned: Case) -> None:
    (own,) = designs(planned)
    assert own.name == AS_GIVEN
    data = own.case.experiments.data
    assert data is not None
    step = data[data["condition"] == "step"]
    assert len(step) == 2 * 4 * 2
    assert sorted(set(step["replicate"])) == ["1", "2"]
    pulse = data[data["condition"] == "pulse"]
    assert list(pulse["readout"]) == ["y", "y"]
    assert list(pulse["time"]) == [6.0, 8.0]
    assert list(pulse["replicate"]) == ["", ""]
    assert np.all(data.loc[data["readout"] == "x", "sd"] == 0.1)
    assert data.loc[data["readout"] == "y", "sd"].isna().all()


def test_replicates_and_times_are_varied(measured: Case) -> None:
    base, two, three = designs(measured, read_variation("replicates=2,3"))
    assert [d.name for d in (base, two, three)] == [AS_GIVEN, "replicates=2", "replicates=3"]
    tables = [d.case.experiments.data for d in (base, two, three)]
    assert [len(t) for t in tables] == [11, 22, 33]
    assert len(two.sd) == 22
    few = designs(measured, read_variation("times=3"))[1].case.experiments.data
    assert list(few["time"]) == [0.0, 5.0, 16.0]
    many = designs(measured, read_variation("times=21"))[1].case.experiments.data
    assert len(many) == 21
    assert np.all(np.diff(many["time"]) > 0)


def test_noise_is_a_factor_on_every_sd(planned: Case) -> None:
    own, double = designs(planned, read_variation("noise=2"))
    bench = Workbench(own.case)
    values = {"u_on_x.strength": 1.0, "x.loss_rate": 0.3, "x_on_y.strength": 1.0, "y.sd": 0.2}
    draws = [
        simulate(d.case, bench.posterior("v1"), values, generator(5), d.sd, d.noise)
        for d in (own, double)
    ]
    clean = bench.posterior("v1").predict(coordinates(bench.posterior("v1"), values)[None])[0][0]
    single, doubled = (d.experiments.data["value"].to_numpy() - clean for d in draws)
    np.testing.assert_allclose(doubled, 2 * single, rtol=1e-9)
    stated = [d.experiments.data["sd"] for d in draws]
    np.testing.assert_allclose(stated[1].dropna(), 2 * stated[0].dropna())


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("dose=1", "cannot be varied"),
        ("replicate=1,2", "did you mean 'replicates'"),
        ("replicates=1.5", "whole number"),
        ("replicates=0", "whole number"),
        ("noise=-1", "factor above 0"),
        ("times=", "no list of numbers"),
    ],
)
def test_a_bad_variation_is_refused(text: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        read_variation(text)


def test_neither_data_nor_plan_is_refused(case_of) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(InputError, match=r"neither data.csv nor a \[plan\]"):
        designs(case_of(MECHANISM, MEASURED))


def test_noise_from_replicates_needs_planned_replicates(case_of) -> None:  # type: ignore[no-untyped-def]
    text = MEASURED.replace('of = "x"', 'of = "x"\nnoise = "replicates"')
    with pytest.raises(InputError, match="at least two"):
        designs(case_of(MECHANISM, text + "[plan]\ntimes = [1, 2, 3]\nsd = 0.1\n"))
    (own,) = designs(
        case_of(MECHANISM, text + "[plan]\ntimes = [1, 2, 3]\nsd = 0.1\nreplicates = 3\n")
    )
    assert len(own.sd) == 9


def test_stated_values_replace_prior_draws(planned: Case) -> None:
    (own,) = designs(planned)
    bench = Workbench(own.case)
    check_stated(planned, bench)
    posterior = bench.posterior("v1")
    truths = [draw_truth(planned, posterior, "v1", i, 1, None) for i in range(3)]
    assert {t["x.loss_rate"] for t in truths} == {0.3}
    assert len({t["u_on_x.strength"] for t in truths}) == 3
    assert truths[1] == draw_truth(planned, posterior, "v1", 1, 1, None)
    # Where nothing states it, noise is a tenth of the readout's range.
    curve = posterior.predict(coordinates(posterior, truths[0])[None])[0][0]
    mine = posterior.observations.points.readout == "y"
    np.testing.assert_allclose(truths[0]["y.sd"], 0.1 * np.ptp(curve[mine]), rtol=1e-9)


def test_a_stated_value_of_no_parameter_is_refused(case_of) -> None:  # type: ignore[no-untyped-def]
    case = case_of(MECHANISM, PLAN.replace('"x.loss_rate" = 0.3', '"x.los_rate" = 0.3'))
    with pytest.raises(InputError, match=r"did you mean 'x\.loss_rate'"):
        check_stated(case, Workbench(designs(case)[0].case))
