"""``ruleout survey`` from a family file to tables, figures and a page."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest
from typer.testing import CliRunner

from ruleout.cli.app import app
from ruleout.survey.saving import TABLES, load_survey

FAMILY = """
title = "Small & quick"
[node.I]
kind = "input"
[node.A]
kind = "switched"
[node.B]
kind = "switched"
[node.C]
kind = "switched"
[edge.I_on_A]
from = "I"
to = "A"
effect = "stimulates"
[edge.A_on_C]
from = "A"
to = "C"
effect = "stimulates"
[edge.A_on_B]
from = "A"
to = "B"
contested = ["stimulates", "inhibits", "absent"]
[edge.B_on_C]
from = "B"
to = "C"
contested = ["stimulates", "inhibits", "absent"]
[edge.B_on_A]
from = "B"
to = "A"
contested = ["inhibits", "absent"]
[family]
style = "enzyme"
output = "C"
edges = "listed"
[sampling]
sets = 256
[behaviour.adaptation]
sensitivity = 0.3
precision = 3
"""

FIGURES = ("atlas", "ranking", "features", "map", "traces")


def run(*arguments: object):
    return CliRunner().invoke(app, [str(a) for a in arguments])


@pytest.fixture(scope="module")
def finished(tmp_path_factory) -> tuple[Path, str]:
    folder = tmp_path_factory.mktemp("survey")
    (folder / "small.toml").write_text(FAMILY)
    result = run("survey", folder / "small.toml", "--out", folder / "out", "--workers", 1)
    assert result.exit_code == 0, result.output
    return folder / "out", result.stdout


def test_everything_is_written(finished):
    out, _ = finished
    for name in TABLES:
        assert (out / f"{name}.csv").exists()
    meta = json.loads((out / "survey.json").read_text())
    assert meta["surveyed"] == meta["family_size"] == 18
    for figure in FIGURES:
        for kind in ("pdf", "svg", "png"):
            assert (out / "figures" / f"adaptation_{figure}.{kind}").stat().st_size > 1000
    topologies = pd.read_csv(out / "topologies.csv")
    assert len(topologies) == 18
    assert topologies["works"].any()


def test_the_terminal_says_what_was_found_and_never_proven(finished):
    _, said = finished
    assert "show adaptation in one set or more" in " ".join(said.split())
    assert "It is not proven" in " ".join(said.split())


def test_the_page_needs_nothing_else_and_escapes_names(finished):
    out, _ = finished
    page = (out / "report.html").read_text()
    assert "Small &amp; quick" in page
    assert "http://" not in page.split("base64")[0]
    assert page.count("data:image/svg+xml;base64,") == len(FIGURES)
    assert "It is not proven" in page


def test_latex_names_the_minimal_topologies(finished):
    out, _ = finished
    text = (out / "table.tex").read_text()
    assert r"Small \& quick" in text
    assert r"A $\rightarrow$ C" in text
    assert text.count(r"\begin{tabular}") == text.count(r"\end{tabular}") == 1


def test_the_same_command_gives_the_same_bytes(finished, tmp_path):
    out, _ = finished
    again = tmp_path / "again"
    assert run("survey", out / "family.toml", "--out", again, "--workers", 1).exit_code == 0
    for name in (*(f"{t}.csv" for t in TABLES), "survey.json", "report.html", "table.tex"):
        assert (again / name).read_bytes() == (out / name).read_bytes(), name


def test_a_report_can_be_written_again(finished):
    out, _ = finished
    before = (out / "report.html").read_bytes()
    (out / "report.html").unlink()
    assert run("report", out).exit_code == 0
    assert (out / "report.html").read_bytes() == before
    assert load_survey(out).meta["title"] == "Small & quick"


def test_a_sample_says_what_it_could_have_missed(finished, tmp_path):
    out, _ = finished
    result = run(
        "survey", out / "family.toml", "--out", tmp_path / "s", "--sample", 6, "--sets", 32,
        "--workers", 1,
    )  # fmt: skip
    assert result.exit_code == 0
    assert "random sample of 18" in " ".join(result.stdout.split())


def test_bad_input_is_told_in_plain_lines(tmp_path):
    path = tmp_path / "f.toml"
    path.write_text(FAMILY.replace('style = "enzyme"', 'style = "magic"'))
    result = run("survey", path, "--out", tmp_path / "o")
    assert result.exit_code == 2
    assert "f.toml" in result.stderr
    assert "enzyme" in result.stderr
    assert "Traceback" not in result.stderr
    assert not (tmp_path / "o").exists()
