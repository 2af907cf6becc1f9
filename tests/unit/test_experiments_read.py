"""Everything an experiments.toml may say, what becomes of it, and what is refused."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import pytest

from ruleout.errors import InputError
from ruleout.experiments import read_experiments, readout_parameters
from ruleout.experiments.types import ALWAYS, Experiments, InputCourse, Reference
from ruleout.expressions import parse

HEAD = """\
[readout.y]
of = "kinase"
[condition.step]
input.cold = 1.0
"""
FIRST = HEAD.count("\n") + 1

Read = Callable[..., Experiments]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    def make(text: str, head: str = HEAD) -> Experiments:
        path = tmp_path / "experiments.toml"
        path.write_text(head + text, encoding="utf-8")
        return read_experiments(path)

    return make


def test_readout_defaults(read: Read) -> None:
    y = read("").readouts["y"]
    assert y.of is parse("kinase")
    assert (y.scale, y.offset, y.noise, y.family, y.replicates) == (
        1.0, 0.0, "free", "normal", "independent",
    )  # fmt: skip
    assert y.scale_by is y.relative_to is y.detection_limit is y.detection_ceiling is None


def test_readout_keys(read: Read) -> None:
    z = read(
        """
        [readout.z]
        of = { kinase = 1.0, complex = 0.5 }
        scale = "free"
        scale_by = "condition"
        relative_to = { condition = "step", time = 0 }
        offset = "free"
        noise = "free+proportional"
        family = "student"
        detection_limit = 0.02
        detection_ceiling = 5
        replicates = "batch"
        """
    ).readouts["z"]
    assert z.of is parse("kinase + 0.5 * complex")
    assert z.of_text == "kinase + 0.5 * complex"
    assert z.relative_to == Reference("step", 0.0)
    assert (z.detection_limit, z.detection_ceiling) == (0.02, 5.0)
    assert readout_parameters(z) == (
        "z.scale", "z.offset", "z.sd", "z.sd_rel", "z.nu", "z.batch_sd",
    )  # fmt: skip


def test_relative_to_the_same_condition_and_to_a_steady_state(read: Read) -> None:
    z = read('[readout.z]\nof = "a / b"\nrelative_to = { time = inf }').readouts["z"]
    assert z.relative_to == Reference(None, math.inf)


@pytest.mark.parametrize(
    ("text", "course"),
    [
        ("input.cold = 2", InputCourse((0.0,), (2.0,))),
        ("input.cold = [[0, 1.0], [15, 0.0]]", InputCourse((0.0, 15.0), (1.0, 0.0))),
        (
            "input.cold = { table = [[0, 0], [10, 5]] }",
            InputCourse((0.0, 10.0), (0.0, 5.0), interpolated=True),
        ),
    ],
)
def test_inputs_are_constant_stepped_or_interpolated(
    read: Read, text: str, course: InputCourse
) -> None:
    assert read(f"[condition.c]\n{text}").conditions["c"].inputs == {"cold": course}


def test_condition_keys(read: Read) -> None:
    c = read(
        """
        [condition."S 0.02"]
        remove = ["a"]
        cut = { e = 5 }
        clamp = { b = 0.5 }
        change = { "s.loss_rate" = 0.1, "k.basal" = [[0, 2.0], [10, 1.0]] }
        start.store = 2.0
        start.other = "free"
        add.store = [[0, 1.5], [60, 1.5]]
        free = ["s.basal"]
        hold_out = true
        """
    ).conditions["S 0.02"]
    assert c.remove == {"a": ALWAYS}
    assert c.cut == {"e": 5.0}
    assert c.clamp == {"b": 0.5}
    assert c.change == {"s.loss_rate": ((ALWAYS, 0.1),), "k.basal": ((0.0, 2.0), (10.0, 1.0))}
    assert c.start == {"store": 2.0, "other": "free"}
    assert c.add == {"store": ((0.0, 1.5), (60.0, 1.5))}
    assert c.free == ("s.basal",)
    assert c.hold_out


def test_changed_parameters_need_no_quotes(read: Read) -> None:
    c = read("[condition.c]\nchange.s.loss_rate = 0.1").conditions["c"]
    assert c.change == {"s.loss_rate": ((ALWAYS, 0.1),)}


def test_plan_with_an_exception_for_one_condition(read: Read) -> None:
    plan = read(
        """
        [readout.z]
        of = "a"
        [condition.pulse]
        [plan]
        times = [0, 5, 10, inf]
        replicates = 3
        sd = { y = 0.1 }
        [plan.pulse]
        readouts = ["z"]
        times = [1, 2]
        sd = 0.3
        """
    ).plan
    assert plan is not None
    assert plan.readouts == ("y", "z")
    assert plan.times == (0.0, 5.0, 10.0, math.inf)
    assert plan.sd == {"y": 0.1}
    pulse = plan.by_condition["pulse"]
    assert (pulse.readouts, pulse.times, pulse.replicates) == (("z",), (1.0, 2.0), 3)
    assert pulse.sd == {"y": 0.3, "z": 0.3}


def test_without_data_there_is_none(read: Read) -> None:
    experiments = read("")
    assert experiments.data is None
    assert experiments.plan is None


SLIPS = {
    "misspelt table": ("[conditions.x]\n", 0, "conditions", "did you mean 'condition'"),
    "misspelt readout key": (
        '[readout.z]\nof = "a"\nnoize = "free"', 2, "readout.z.noize", "did you mean 'noise'",
    ),
    "no expression": ("[readout.z]", 0, "readout.z.of", "'of' is missing"),
    "expression without a node": ('[readout.z]\nof = "1 + 2"', 1, "readout.z.of", "no node"),
    "bad expression": ('[readout.z]\nof = "a^2"', 1, "readout.z.of", "**"),
    "expression that is a number": ('[readout.z]\nof = 3', 1, "readout.z.of", "weights"),
    "weight that is text": ('[readout.z]\nof = { a = "b" }', 1, "readout.z.of.a", "number"),
    "scale of text": ('[readout.z]\nof = "a"\nscale = "fre"', 2, "readout.z.scale", "'free'"),
    "scale of zero": ('[readout.z]\nof = "a"\nscale = 0', 2, "readout.z.scale", "hide"),
    "own scales that are fixed": (
        '[readout.z]\nof = "a"\nscale_by = "condition"', 2, "readout.z.scale_by", 'scale = "free"',
    ),
    "unknown noise": (
        '[readout.z]\nof = "a"\nnoise = "gaussian"', 2, "readout.z.noise", "given, free",
    ),
    "unknown family": (
        '[readout.z]\nof = "a"\nfamily = "lognormel"', 2, "readout.z.family", "'lognormal'",
    ),
    "proportional lognormal": (
        '[readout.z]\nof = "a"\nnoise = "free+proportional"\nfamily = "lognormal"', 2,
        "readout.z.noise", "proportional already",
    ),
    "limits crossed": (
        '[readout.z]\nof = "a"\ndetection_limit = 2\ndetection_ceiling = 1', 3,
        "readout.z.detection_ceiling", "not above",
    ),
    "limit without a logarithm": (
        '[readout.z]\nof = "a"\nfamily = "lognormal"\ndetection_limit = 0', 3,
        "readout.z.detection_limit", "above 0",
    ),
    "reference to an unknown condition": (
        '[readout.z]\nof = "a"\nrelative_to = { condition = "stp", time = 0 }', 2,
        "readout.z.relative_to.condition", "did you mean 'step'",
    ),
    "reference before the start": (
        '[readout.z]\nof = "a"\nrelative_to = { time = -1 }', 2, "readout.z.relative_to.time",
        "at least 0",
    ),
    "reference without a time": (
        '[readout.z]\nof = "a"\nrelative_to = { condition = "step" }', 2,
        "readout.z.relative_to.time", "missing",
    ),
    "readout called exp": ('[readout.exp]\nof = "a"', 0, "readout.exp", "another name"),
    "condition with an at sign": ('[condition."a@b"]', 0, "condition.a@b", "'@'"),
    "condition with a semicolon": ('[condition."a;b"]', 0, "condition.a;b", "';'"),
    "condition without a name": ('[condition." "]', 0, "condition. ", "empty"),
    "misspelt condition key": (
        "[condition.c]\nremoved = []", 1, "condition.c.removed", "did you mean 'remove'",
    ),
    "times out of order": (
        "[condition.c]\ninput.cold = [[0, 1], [5, 2], [5, 3]]", 1, "condition.c.input.cold",
        "must increase",
    ),
    "negative time of a step": (
        "[condition.c]\ninput.cold = [[-1, 1]]", 1, "condition.c.input.cold", "at least 0",
    ),
    "a step that is no pair": (
        "[condition.c]\ninput.cold = [1, 2]", 1, "condition.c.input.cold", "a pair",
    ),
    "no steps": ("[condition.c]\ninput.cold = []", 1, "condition.c.input.cold", "expected"),
    "one point to interpolate": (
        "[condition.c]\ninput.cold = { table = [[0, 1]] }", 1, "condition.c.input.cold.table",
        "two or more",
    ),
    "level that is text": (
        '[condition.c]\ninput.cold = "high"', 1, "condition.c.input.cold", "number",
    ),
    "remove that is text": ('[condition.c]\nremove = "a"', 1, "condition.c.remove", "list"),
    "removed at a negative time": (
        "[condition.c]\nremove = { a = -1 }", 1, "condition.c.remove.a", "at least 0",
    ),
    "removed and clamped": (
        '[condition.c]\nremove = ["a"]\nclamp = { a = 1 }', 2, "condition.c.clamp.a", "keep one",
    ),
    "negative clamp": ("[condition.c]\nclamp = { a = -1 }", 1, "condition.c.clamp.a", "at least 0"),
    "negative factor": (
        '[condition.c]\nchange = { "a.rate" = -1 }', 1, "condition.c.change.a.rate", "at least 0",
    ),
    "negative dose": ("[condition.c]\nadd.a = [[0, -1]]", 1, "condition.c.add.a", "above 0"),
    "hold_out that is text": ('[condition.c]\nhold_out = "yes"', 1, "condition.c.hold_out", "true"),
    "plan without times": ("[plan]\nreplicates = 2", 0, "plan.times", "missing"),
    "plan with a falling time": ("[plan]\ntimes = [2, 1]", 1, "plan.times", "increase"),
    "plan with a negative time": ("[plan]\ntimes = [-2, 1]", 1, "plan.times", "at least 0"),
    "plan for an unknown condition": (
        "[plan]\ntimes = [1]\n[plan.stp]", 2, "plan.stp", "did you mean 'step'",
    ),
    "plan of an unknown readout": (
        '[plan]\ntimes = [1]\nreadouts = ["x"]', 2, "plan.readouts", "not one of y",
    ),
    "plan with sd of zero": ("[plan]\ntimes = [1]\nsd = 0", 2, "plan.sd", "above 0"),
    "plan without a given sd": (
        '[readout.z]\nof = "a"\nnoise = "given"\n[plan]\ntimes = [1]', 3, "plan.sd", "sd",
    ),
    "plan with half a replicate": (
        "[plan]\ntimes = [1]\nreplicates = 1.5", 2, "plan.replicates", "whole",
    ),
}  # fmt: skip


@pytest.mark.parametrize("slip", SLIPS)
def test_slip_is_named_with_its_place_and_a_remedy(tmp_path: Path, slip: str) -> None:
    text, line, field, said = SLIPS[slip]
    path = tmp_path / "experiments.toml"
    path.write_text(HEAD + text, encoding="utf-8")
    with pytest.raises(InputError) as refused:
        read_experiments(path)
    message = str(refused.value)
    assert message.startswith(f"{path}:{FIRST + line}: {field}: ")
    assert said in message
    assert "\n" not in message


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ('[readout.y]\nof = "a"', "there is no condition"),
        ("[condition.c]", "there is no readout"),
    ],
)
def test_something_must_be_measured_somewhere(read: Read, text: str, said: str) -> None:
    with pytest.raises(InputError, match=said):
        read(text, head="")
