"""``ruleout rehearse``: what it prints and writes, and its figures."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from ruleout.cli import main
from ruleout.rehearsal import AS_GIVEN, Rehearsal
from ruleout.rehearsal.types import COLUMNS
from ruleout.report.rehearsal_figures import power_figure, variation_figure
from ruleout.report.rehearsal_latex import latex_power
from ruleout.report.rehearsal_words import claim_chances, headline

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
"""
PLAN = """
[readout.level]
of = "dose"
[condition.given]
[plan]
times = [0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4, 5, 6, 8]
sd = 0.05
"""


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    (tmp_path / "mechanism.toml").write_text(MECHANISM)
    (tmp_path / "experiments.toml").write_text(PLAN)
    return tmp_path


def test_a_plan_is_rehearsed_before_anything_is_measured(
    plan: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = plan / "out"
    words = ("rehearse", str(plan), "--out", str(out), "--datasets", "2", "--workers", "1")
    assert main([*words, "--truth", "v1"]) == 0
    printed = " ".join(capsys.readouterr().out.split())
    assert "2 data sets simulated from each true variant" in printed
    assert "draws from the priors" in printed
    for name in ("size.csv", "power.csv", "claims.csv", "power.tex", "figures/power.svg"):
        assert (out / name).stat().st_size > 0
    assert json.loads((out / "rehearsal.json").read_text())["truths_from"] == "priors"
    before = (out / "power.csv").read_bytes()
    assert main([*words, "--truth", "v1", "--log", "json"]) == 0
    assert (out / "power.csv").read_bytes() == before
    last = json.loads(capsys.readouterr().out.splitlines()[-1])
    assert last["event"] == "rehearsed"


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (("--vary", "doses=1"), "cannot be varied"),
        (("--truth", "v7"), "no variant"),
        (("--alpha", "0.9"), "between 0 and 0.5"),
        (("--run", "nowhere"), "no data.csv"),
    ],
)
def test_bad_options_end_with_a_plain_line(
    plan: Path, capsys: pytest.CaptureFixture[str], options: tuple[str, ...], says: str
) -> None:
    assert main(["rehearse", str(plan), "--out", str(plan / "out"), *options]) == 2
    error = capsys.readouterr().err
    assert says in error
    assert "Traceback" not in error


@pytest.fixture
def rehearsal() -> Rehearsal:
    rows = []
    for design, power in ((AS_GIVEN, 0.4), ("noise=0.5", 0.9), ("noise=2", 0.1)):
        for truth in ("v1", "v2"):
            for rival in ("v1", "v2"):
                holds = not (truth == "v2" and rival == "v1")
                rate = 0.05 if holds else power
                rows.append(
                    (
                        design,
                        truth,
                        rival,
                        holds,
                        20,
                        round(20 * rate),
                        rate,
                        rate / 2,
                        rate + 0.1,
                        0,
                    )
                )
    size = [
        (d, t, "", 20, 1, 0.05, 0.0, 0.25, 1, 1, 0.05, 0.0, 0.25)
        for d in (AS_GIVEN,)
        for t in ("v1", "v2")
    ]
    return Rehearsal(
        size=pd.DataFrame(size, columns=list(COLUMNS["size"])),
        power=pd.DataFrame(rows, columns=list(COLUMNS["power"])),
        claims=pd.DataFrame(columns=list(COLUMNS["claims"])),
        meta={
            "title": "50 % & more", "alpha": 0.05, "data_sets": 20, "varied": "noise",
            "designs": [AS_GIVEN, "noise=0.5", "noise=2"], "truths_from": "posterior",
        },
    )  # fmt: skip


def test_the_heat_map_shows_every_rate_and_frames_mistakes(rehearsal: Rehearsal) -> None:
    axes = power_figure(rehearsal).axes[0]
    assert [t.get_text() for t in axes.texts] == ["5", "5", "40", "5"]
    assert len(axes.patches) == 3
    np.testing.assert_allclose(axes.images[0].get_array(), [[0.05, 0.05], [0.4, 0.05]])


def test_power_is_drawn_against_what_was_varied(rehearsal: Rehearsal) -> None:
    figure = variation_figure(rehearsal)
    assert figure is not None
    panel = figure.axes[1]
    assert panel.get_title() == "v2 true"
    line = panel.containers[0].lines[0]
    np.testing.assert_allclose(line.get_xydata(), [[0.5, 0.9], [2.0, 0.1]])


def test_tables_and_words_say_what_is_a_mistake(rehearsal: Rehearsal) -> None:
    text = latex_power(rehearsal)
    assert r"50 \% \& more" in text
    assert r"v2 & 0.40 & [0.05] \\" in text
    lines = headline(rehearsal)
    assert "ruled out by mistake in 2 of 40" in lines[1]
    row = {"needed": 0.25, "not_needed": 0.75, "excluded": 0, "undecided": 0, "nothing_fits": 0}
    assert claim_chances(row) == "not shown to be needed 0.75, needed 0.25"
