"""How often a true variant is ruled out, and a false one, on simulated data sets.

Small enough for every run: one- or two-step decay, whose solves cost microseconds. Larger studies
are under ``reports/operating_characteristics``.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from scipy.stats import binom

from ruleout.case import Case, read_case
from ruleout.pipeline.tasks import Workbench
from ruleout.rehearsal import Spending, judge_simulated, simulate
from ruleout.seeds import generator, sequence
from ruleout.verdicts import Verdict

ALPHA = 0.05
CHANCE = 1e-3
"""Chance that a correct program fails one of these tests on another seed."""
DATA_SETS = 100

MECHANISM = """
title = "One or two steps of decay"
time_unit = "h"
amount_unit = "uM"

[node.dose]
kind = "pool"
start = 1.0

[node.depot]
kind = "pool"
start = 0

[edge.loss]
from = "dose"
effect = "converts"

[edge.exchange]
from = "dose"
to = "depot"
effect = "converts"
reversible = true
contested = true

[prior]
"loss.rate" = { median = 0.5, fold = 10 }
"exchange.rate" = { low = 1e-3, high = 10 }
"exchange.rate_back" = { median = 0.5, fold = 10 }
"""
EXPERIMENTS = """
[readout.level]
of = "dose"
noise = "free"

[condition.given]
"""
TIMES = (0.25, 0.5, 0.75, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0)
ONE_STEP = {"loss.rate": 0.6, "level.sd": 0.05}
TWO_STEPS = {"loss.rate": 0.9, "exchange.rate": 0.8, "exchange.rate_back": 0.25, "level.sd": 0.03}


@pytest.fixture(scope="module")
def decay(tmp_path_factory: pytest.TempPathFactory) -> Case:
    folder: Path = tmp_path_factory.mktemp("decay")
    (folder / "mechanism.toml").write_text(MECHANISM)
    (folder / "experiments.toml").write_text(EXPERIMENTS)
    rows = [f"given,{t:g},level,0.5" for t in TIMES]
    (folder / "data.csv").write_text("\n".join(["condition,time,readout,value", *rows]) + "\n")
    return read_case(folder)


def judged(
    case: Case, truth: str, values: dict[str, float], count: int
) -> list[dict[str, Verdict]]:
    """Return the verdict on every variant for each of ``count`` simulated data sets."""
    bench = Workbench(case)
    names = list(bench.variants.variants)
    found = []
    for i in range(count):
        simulated = simulate(case, bench.posterior(truth), values, generator(1, truth, i))
        seed = int(sequence(1, "judged", truth, i).generate_state(1)[0])
        settings = Spending(seed=seed, effort="quick", alpha=ALPHA)
        settled = judge_simulated(simulated, settings, dict.fromkeys(names, (values,)))
        found.append(settled.verdicts)
    return found


def limits(count: int, rate: float) -> tuple[float, float]:
    """Return how few and how many of ``count`` may be expected at ``rate``."""
    return binom.ppf(CHANCE / 2, count, rate), binom.ppf(1 - CHANCE / 2, count, rate)


def test_a_true_variant_is_ruled_out_at_the_nominal_rate(decay: Case) -> None:
    """Its p-values are uniform: 5 % of them at 0.05 or below, a quarter at 0.25 or below."""
    found = judged(decay, "v1", ONE_STEP, DATA_SETS)
    assert all(row["v1"].verdict != "not_judged" for row in found)
    wrong = sum(row["v1"].verdict == "ruled_out" for row in found)
    assert wrong <= limits(DATA_SETS, ALPHA)[1]
    least, most = limits(DATA_SETS, 0.25)
    assert least <= sum(row["v1"].p_value <= 0.25 for row in found) <= most
    # What contains a kept variant is kept with it.
    assert all(row["v2"].verdict == "kept" for row in found if row["v1"].verdict == "kept")


def test_a_missing_step_is_found(decay: Case) -> None:
    """With a second step as strong as this one, a single exponential is ruled out nearly always."""
    count = 25
    found = judged(decay, "v2", TWO_STEPS, count)
    # The power is above 0.9; four in five is what this test insists on.
    assert sum(row["v1"].verdict == "ruled_out" for row in found) >= limits(count, 0.8)[0]
    assert sum(row["v2"].verdict == "ruled_out" for row in found) <= limits(count, ALPHA)[1]
