import pandas as pd
import pytest

from ruleout.experiments.types import Experiments
from ruleout.variants import expand

MECHANISM = """
[node.u]
kind = "input"
[node.v]
kind = "input"
[node.x]
kind = "expressed"
start = 0.0
[node.y]
kind = "expressed"
start = 0.0
[edge.ux]
from = "u"
to = "x"
effect = "stimulates"
[edge.xy]
from = "x"
to = "y"
effect = "stimulates"
[edge.e]
from = "v"
to = "x"
effect = "stimulates"
contested = true
[edge.onto]
from = "v"
onto = "xy"
effect = "stimulates"
contested = true
"""
READOUT = '[readout.y]\nof = "y"\n'


def out(case) -> tuple[str, ...]:
    return expand(case.mechanism, case.experiments).out_of_reach


@pytest.mark.parametrize(
    ("condition", "expected"),
    [
        ("input.v = 1.0", ()),
        ("input.u = 1.0", ("e", "onto")),  # v is zero throughout
        ('input.v = 1.0\nremove = ["y"]', ("e", "onto")),
        ('input.v = 1.0\nremove = ["x"]', ("e",)),
        ('input.v = 1.0\ncut = ["xy"]', ("e", "onto")),
        ('input.v = 1.0\ncut = ["e"]', ("e",)),
        ("input.v = 1.0\ncut = { xy = 5 }", ()),  # acts until then
        ("input.v = 1.0\nremove = { x = 5 }", ()),
        ("input.v = 1.0\nclamp.x = 0.5", ("e",)),
        ("clamp.x = 0.5\ninput.v = [[0, 0.0], [5, 1.0]]", ("e",)),
    ],
)
def test_what_a_condition_keeps_from_acting(case_of, condition, expected):
    case = case_of(MECHANISM, f"{READOUT}[condition.c]\n{condition}\n")
    assert out(case) == expected


def test_a_clamp_does_not_hide_what_happens_at_rest(case_of):
    """The clamp holds from time 0; before it x takes part in the rest that y starts from."""
    text = MECHANISM.replace("start = 0.0\n", "").replace('kind = "input"\n', 'kind = "input"\n')
    text = text.replace('[node.v]\nkind = "input"', '[node.v]\nkind = "input"\nresting = 1.0')
    case = case_of(text, f"{READOUT}[condition.c]\nclamp.x = 0.5\n")
    assert out(case) == ()


def test_one_condition_is_enough(case_of):
    case = case_of(
        MECHANISM, f"{READOUT}[condition.c]\ninput.u = 1.0\n[condition.d]\ninput.v = 1.0"
    )
    assert out(case) == ()


def test_a_condition_held_out_does_not_count(case_of):
    more = "[condition.d]\ninput.v = 1.0\nhold_out = true\n"
    assert out(case_of(MECHANISM, f"{READOUT}[condition.c]\ninput.u = 1.0\n{more}")) == (
        "e",
        "onto",
    )


def test_only_measured_pairs_count(case_of):
    """The condition that would show the edges is planned in the file but was not measured."""
    case = case_of(
        MECHANISM, f"{READOUT}[condition.c]\ninput.u = 1.0\n[condition.d]\ninput.v = 1.0"
    )
    data = pd.DataFrame({"condition": ["c"], "time": [1.0], "readout": ["y"], "value": [1.0]})
    experiments = Experiments(case.experiments.readouts, case.experiments.conditions, data)
    assert expand(case.mechanism, experiments).out_of_reach == ("e", "onto")


def test_a_reference_in_another_condition_counts_as_measured(case_of):
    readout = 'relative_to = { condition = "d", time = 5 }\n'
    case = case_of(
        MECHANISM,
        f"{READOUT}{readout}[condition.c]\ninput.u = 1.0\n[condition.d]\ninput.v = 1.0",
    )
    data = pd.DataFrame({"condition": ["c"], "time": [1.0], "readout": ["y"], "value": [1.0]})
    experiments = Experiments(case.experiments.readouts, case.experiments.conditions, data)
    assert expand(case.mechanism, experiments).out_of_reach == ()
