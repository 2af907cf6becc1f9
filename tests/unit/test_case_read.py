"""The three files of a case held against each other."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

import pytest

from ruleout.case import Case, read_case
from ruleout.errors import InputError
from ruleout.mechanism.types import LogUniform, Tied

MECHANISM = """\
time_unit = "min"
[node.cold]
kind = "input"
[node.sensor]
kind = "switched"
[node.maker]
kind = "expressed"
[node.store]
kind = "pool"
[edge.a]
from = "cold"
to = "sensor"
effect = "stimulates"
law = "hill"
contested = true
[edge.drain]
from = "store"
effect = "converts"
"""
EXPERIMENTS = """\
[readout.y]
of = "sensor"
scale = "free"
scale_by = "condition"
offset = "free"
[condition.step]
input.cold = 1.0
[condition.pulse]
input.cold = [[0, 1.0], [15, 0.0]]
free = ["sensor.loss_rate"]
start.store = "free"
"""
DATA = "condition,time,readout,value\nstep,0,y,0.1\nstep,10,y,0.5\npulse,5,y,0.4\n"

Make = Callable[..., Path]


@pytest.fixture
def make(tmp_path: Path) -> Make:
    def write(mechanism: str = "", experiments: str = "", data: str | None = DATA) -> Path:
        folder = tmp_path / "frost"
        folder.mkdir(exist_ok=True)
        (folder / "mechanism.toml").write_text(MECHANISM + mechanism, encoding="utf-8")
        (folder / "experiments.toml").write_text(EXPERIMENTS + experiments, encoding="utf-8")
        if data is not None:
            (folder / "data.csv").write_text(data, encoding="utf-8")
        return folder

    return write


def refusal(folder: Path) -> str:
    with pytest.raises(InputError) as refused:
        read_case(folder)
    message = str(refused.value)
    assert "\n" not in message
    return message


def test_a_case_is_named_after_its_folder_and_keeps_the_hashes_of_its_files(make: Make) -> None:
    folder = make()
    case = read_case(folder)
    assert isinstance(case, Case)
    assert case.name == case.mechanism.title == "frost"
    assert list(case.mechanism.edges) == ["a", "drain"]
    assert case.experiments.data is not None
    assert len(case.experiments.data) == 3
    assert case.hashes["data.csv"] == hashlib.sha256(DATA.encode()).hexdigest()
    assert set(case.hashes) == {"mechanism.toml", "experiments.toml", "data.csv"}


def test_data_may_be_missing_where_they_are_not_required(make: Make) -> None:
    folder = make(data=None)
    case = read_case(folder, require_data=False)
    assert case.experiments.data is None
    assert set(case.hashes) == {"mechanism.toml", "experiments.toml"}
    assert "there is no data.csv in this folder" in refusal(folder)


def test_missing_folder_and_files(make: Make, tmp_path: Path) -> None:
    assert "there is no such folder" in refusal(tmp_path / "nowhere")
    assert refusal(tmp_path / ("x" * 5000))
    folder = make()
    assert "this is a file" in refusal(folder / "data.csv")
    (folder / "experiments.toml").unlink()
    assert "there is no experiments.toml" in refusal(folder)
    (folder / "mechanism.toml").unlink()
    assert "there is no mechanism.toml" in refusal(folder)


def test_a_readout_may_bear_a_node_s_name(make: Make) -> None:
    folder = make(experiments='[readout.sensor]\nof = "sensor"')
    assert "sensor" in read_case(folder).experiments.readouts


def test_priors_of_readouts_and_of_conditions_own_parameters_are_known(make: Make) -> None:
    case = read_case(
        make(
            """
            [prior]
            "y.sd" = { median = 0.1, fold = 3 }
            "y.offset" = { mean = 0, sd = 1 }
            "y.scale" = { median = 1, fold = 10 }
            "y.scale@step" = 1.0
            "sensor.loss_rate@pulse" = { low = 0.01, high = 1 }
            "store.start" = { median = 1, fold = 3 }
            "store.start@pulse" = { median = 1, fold = 3 }
            "maker.loss_rate" = "sensor.loss_rate"
            """
        )
    )
    assert case.mechanism.priors["sensor.loss_rate@pulse"] == LogUniform(0.01, 1.0)
    assert case.mechanism.priors["maker.loss_rate"] == Tied("sensor.loss_rate")


PRIORS = {
    "unknown": ('"sensor.los_rate" = 1', "did you mean 'sensor.loss_rate'"),
    "readout without that parameter": ('"y.nu" = 3', "no parameter has this name"),
    "condition that does not free it": ('"sensor.loss_rate@step" = 1', "does not free it"),
    "condition that is unknown": ('"y.scale@stp" = 1', "did you mean 'y.scale@step'"),
    "tied to nothing": ('"sensor.loss_rate" = "kinase.loss"', "tied to 'kinase.loss'"),
    "fixed below zero": ('"maker.loss_rate" = -1', "never negative"),
    "flat below zero": ('"a.strength" = { low = -1, high = 1, scale = "linear" }', "negative"),
    "half fixed at zero": ('"a.half" = 0', "above 0"),
    "sd fixed at zero": ('"y.sd" = 0', "above 0"),
    "normal half": ('"a.half" = { mean = 1, sd = 1 }', "{ median, fold }"),
    "normal Hill exponent": ('"a.hill" = { mean = 2, sd = 1 }', "{ median, fold }"),
}


@pytest.mark.parametrize("slip", PRIORS)
def test_bad_prior_is_named_with_its_line(make: Make, slip: str) -> None:
    text, said = PRIORS[slip]
    folder = make(f"[prior]\n{text}\n")
    message = refusal(folder)
    line = MECHANISM.count("\n") + 2
    assert message.startswith(f"{folder / 'mechanism.toml'}:{line}: prior.")
    assert said in message


@pytest.mark.parametrize(
    "prior",
    [
        '"store.start" = { mean = 0, sd = 300 }',
        '"drain.rate" = { mean = 0, sd = 10 }',
        '"y.offset" = -2',
        '"sensor.basal" = 0',
    ],
)
def test_priors_that_may_reach_below_zero(make: Make, prior: str) -> None:
    assert read_case(make(f"[prior]\n{prior}\n")).mechanism.priors


CONDITIONS = {
    "unknown input": ("input.cld = 1", "input.cld", "did you mean 'cold'"),
    "input that is no input": ("input.sensor = 1", "input.sensor", "clamp.sensor"),
    "negative level of a regulator": ("input.cold = -1", "input.cold", "0 or more"),
    "input and clamp": (
        "input.cold = 1\nclamp = { cold = 2 }", "input.cold", "keep one of them",
    ),
    "unknown removal": ('remove = ["sensr"]', "remove", "did you mean 'sensor'"),
    "clamp above one": ("clamp = { sensor = 2 }", "clamp.sensor", "0 to 1"),
    "cut of a node": ('cut = ["sensor"]', "cut", "no edge"),
    "unknown change": ('change = { "sensor.loss" = 2 }', "change.sensor.loss", "no parameter"),
    "half changed to nothing": ('change = { "a.half" = 0 }', "change.a.half", "above 0"),
    "unknown free parameter": ('free = ["sensor.rate"]', "free", "no parameter"),
    "free parameter of a readout": ('free = ["y.scale"]', "free", "scale_by"),
    "free parameter that is fixed": ('free = ["maker.basal"]', "free", "is fixed"),
    "start of an input": ("start.cold = 1", "start.cold", "input.cold"),
    "rest of a pool": ('start.store = "rest"', "start.store", "free"),
    "start above one": ("start.sensor = 1.5", "start.sensor", "0 to 1"),
    "start of unknown parameters": ('start.store = "2 * k"', "start.store", "no parameter"),
    "start that is no expression": ('start.store = "2 *"', "start.store", "the end where"),
    "dose of a fraction": ("add.sensor = [[0, 1]]", "add.sensor", "pools"),
    "dose of an input": ("add.cold = [[0, 1]]", "add.cold", "input.cold"),
    "dose of what is removed": (
        'add.store = [[0, 1]]\nremove = ["store"]', "add.store", "removed",
    ),
}  # fmt: skip


@pytest.mark.parametrize("slip", CONDITIONS)
def test_bad_condition_is_named_with_its_line(make: Make, slip: str) -> None:
    text, field, said = CONDITIONS[slip]
    folder = make('[prior]\n"maker.basal" = 0\n', f"[condition.c]\n{text}\n")
    message = refusal(folder)
    line = EXPERIMENTS.count("\n") + 2
    assert message.startswith(f"{folder / 'experiments.toml'}:{line}: condition.c.{field}: ")
    assert said in message


def test_a_readout_measures_nodes_alone(make: Make) -> None:
    message = refusal(make(experiments='[readout.z]\nof = "sensr / maker"'))
    assert "readout.z.of: 'sensr' is no node of mechanism.toml (did you mean 'sensor'?)" in message
    assert "'time' is no node" in refusal(make(experiments='[readout.z]\nof = "sensor * time"'))


def test_a_readout_shares_no_parameter_with_an_edge(make: Make) -> None:
    folder = make(
        '[edge.e]\nto = "store"\neffect = "converts"\nrate = "scale"',
        '[readout.e]\nof = "store"\nscale = "free"',
    )
    assert "'e.scale' is a parameter of an edge as well" in refusal(folder)


@pytest.mark.parametrize(
    ("low", "high", "said"),
    [(1e-12, 1e-7, "so slow that nothing moves"), (1e6, 1e9, "so fast that all is over")],
)
def test_rates_in_another_unit_than_the_times(
    make: Make, low: float, high: float, said: str
) -> None:
    prior = f"{{ low = {low}, high = {high} }}"
    names = ("sensor.loss_rate", "maker.loss_rate", "drain.rate")
    folder = make("[prior]\n" + "".join(f'"{name}" = {prior}\n' for name in names))
    message = refusal(folder)
    assert said in message
    assert "same unit" in message


def test_one_slow_rate_among_others_is_no_matter(make: Make) -> None:
    assert read_case(make('[prior]\n"drain.rate" = { low = 1e-12, high = 1e-7 }\n'))


def test_a_case_without_dispute_is_read(make: Make) -> None:
    folder = make()
    text = MECHANISM.replace("contested = true\n", "")
    (folder / "mechanism.toml").write_text(text, encoding="utf-8")
    assert not read_case(folder).mechanism.edges["a"].removable
