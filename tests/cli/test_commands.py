"""The commands: what they print, where, and what they return."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import ruleout.pipeline
import ruleout.store
from ruleout import __version__
from ruleout.case import read_case
from ruleout.cli import main
from ruleout.cli.starting import write_new_case
from ruleout.report import writing
from ruleout.verdicts.types import Judgement


@pytest.fixture(autouse=True)
def without_figures(monkeypatch: pytest.MonkeyPatch) -> None:
    """Leave the figures out: they have tests of their own and take seconds."""
    monkeypatch.setattr(writing, "write_figures", lambda *_, **__: None)


@pytest.fixture
def judged(monkeypatch: pytest.MonkeyPatch, frost_judgement: Judgement) -> list[dict[str, Any]]:
    """Put the prepared judgement in place of the computation; return what it was asked for."""
    asked: list[dict[str, Any]] = []

    def judge(case: Any, settings: Any, *, out: Path, progress: Any, executor: Any) -> Judgement:
        assert executor is None
        asked.append({"case": case, "settings": settings, "out": out})
        progress.start("v1", 2)
        progress.advance("v1", note="searched")
        progress.finish("v1")
        return frost_judgement

    monkeypatch.setattr(ruleout.pipeline, "judge", judge)
    return asked


def run_in(folder: Path, *words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "ruleout", *words],
        cwd=folder,
        env={**os.environ, "COLUMNS": "80", "NO_COLOR": "1"},
        capture_output=True,
        text=True,
        check=False,
    )


def test_help_answers_at_once_and_names_every_command(tmp_path: Path) -> None:
    run_in(tmp_path, "--help")
    start = time.perf_counter()
    shown = run_in(tmp_path, "--help")
    took = time.perf_counter() - start
    assert shown.returncode == 0
    for command in ("judge", "inspect", "new", "report", "doctor"):
        assert command in shown.stdout
    # 0.17 s on an idle core; the margin is for a machine that does other things as well.
    assert took < 1.5


def test_help_imports_no_slow_library() -> None:
    code = (
        "import sys\nfrom ruleout.cli import main\nmain(['--help'])\n"
        "slow = {'numpy', 'pandas', 'matplotlib', 'numba', 'arviz', 'scipy'} & set(sys.modules)\n"
        "sys.exit(str(slow) if slow else 0)"
    )
    shown = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=False
    )
    assert shown.returncode == 0, shown.stderr


def test_version_is_the_packages(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"ruleout {__version__}\n"


@pytest.mark.usefixtures("judged")
def test_judge_prints_claims_before_variants_and_names_the_report(
    frost_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "run"
    assert main(["judge", str(frost_folder), "--out", str(out)]) == 0
    printed = capsys.readouterr()
    assert printed.out.index("Claims") < printed.out.index("Variants") < printed.out.index("Files")
    assert "It does not mean proven" in " ".join(printed.out.split())
    assert "v1: searched" in printed.err
    assert (out / "report.html").exists()
    assert (out / "table.tex").exists()


def test_judge_writes_below_reports_by_default(
    frost_folder: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    judged: list[dict[str, Any]],
) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(["judge", str(frost_folder), "--seed", "7", "--workers", "1"]) == 0
    assert judged[0]["out"] == Path("reports") / "frost_relay"
    assert judged[0]["settings"].seed == 7
    assert (tmp_path / "reports" / "frost_relay" / "methods.txt").exists()


def test_judge_returns_3_where_a_variant_is_not_judged(
    frost_folder: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    judgement_with: Callable[..., Judgement],
) -> None:
    partly = judgement_with(not_judged=("v8",))
    monkeypatch.setattr(ruleout.pipeline, "judge", lambda *_, **__: partly)
    assert main(["judge", str(frost_folder), "--out", str(tmp_path / "run")]) == 3


@pytest.mark.usefixtures("judged")
def test_json_log_is_nothing_but_json_lines(
    frost_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    words = ["judge", str(frost_folder), "--out", str(tmp_path / "run"), "--log", "json"]
    assert main(words) == 0
    events = [json.loads(line) for line in capsys.readouterr().out.splitlines()]
    assert [e["event"] for e in events[:3]] == ["start", "advance", "finish"]
    assert events[-1]["event"] == "judged"
    assert events[-1]["claims"]["protectant_on_kinase"] == "needed"


def test_judge_of_a_missing_folder_is_bad_input(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["judge", "no/such/case"]) == 2
    said = capsys.readouterr().err
    assert "no/such/case" in said
    assert "Traceback" not in said
    assert len(said.splitlines()) <= 2


@pytest.mark.parametrize("alpha", ["0", "0.7", "-1"])
def test_an_impossible_alpha_is_bad_input(
    alpha: str, frost_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "run"
    assert main(["judge", str(frost_folder), "--alpha", alpha, "--out", str(out)]) == 2
    assert "alpha" in capsys.readouterr().err
    assert not out.exists()


def test_a_run_folder_that_is_a_file_is_bad_input(
    frost_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "file"
    out.write_text("")
    assert main(["judge", str(frost_folder), "--out", str(out)]) == 2
    assert str(out) in capsys.readouterr().err


def test_an_interrupt_says_what_is_kept(
    frost_folder: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    def interrupted(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(ruleout.pipeline, "judge", interrupted)
    assert main(["judge", str(frost_folder), "--out", str(tmp_path / "run")]) == 130
    assert "same command again" in capsys.readouterr().err


def test_our_own_fault_returns_1_and_asks_for_a_report(
    frost_folder: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(ruleout.pipeline, "judge", broken)
    assert main(["judge", str(frost_folder), "--out", str(tmp_path / "run")]) == 1
    assert "fault of the program" in capsys.readouterr().err


def test_doses_bring_a_caution(
    tmp_path: Path,
    frost_folder: Path,
    capsys: pytest.CaptureFixture[str],
    judged: list[dict[str, Any]],
) -> None:
    folder = shutil.copytree(frost_folder, tmp_path / "case")
    with (folder / "experiments.toml").open("a") as file:
        file.write("\n[condition.dosed]\nadd.protectant = [[0, 1.0]]\n")
    with (folder / "data.csv").open("a") as file:
        file.write("dosed,5,protectant_level,0.6\n")
    assert main(["judge", str(folder), "--out", str(tmp_path / "run")]) == 0
    assert judged
    assert "treatment" in capsys.readouterr().out
    assert "treatment" in (tmp_path / "run" / "report.html").read_text()


def test_new_writes_a_case_that_reads_and_refuses_to_overwrite(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "mine"
    assert main(["new", str(folder)]) == 0
    case = read_case(folder)
    assert case.experiments.data is not None
    assert any(edge.removable for edge in case.mechanism.edges.values())
    assert main(["new", str(folder)]) == 2
    assert "already holds" in capsys.readouterr().err


def test_inspect_prints_equations_and_findings(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "mine"
    write_new_case(folder)
    capsys.readouterr()
    assert main(["inspect", str(folder), "--variant", "v2"]) == 0
    shown = capsys.readouterr().out
    assert "product_on_kinase.half" in shown
    assert "Findings before fitting" in shown
    assert "\nv1:" not in shown


def test_inspect_of_an_unknown_variant_is_bad_input(
    frost_folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["inspect", str(frost_folder), "--variant", "v99"]) == 2
    assert "v1 to v8" in capsys.readouterr().err


def test_report_writes_a_finished_run_again(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    frost_judgement: Judgement,
    frost_case: Any,
) -> None:
    monkeypatch.setattr(ruleout.store, "load_judgement", lambda _: (frost_judgement, frost_case))
    assert main(["report", str(tmp_path)]) == 0
    assert (tmp_path / "report.html").exists()


def test_doctor_finds_nothing_wrong_here(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["doctor"]) == 0
    out = capsys.readouterr().out
    assert "wrong" not in out
    assert f"ruleout {__version__}" in out
    assert re.search(r"the integrator compiles and solves, (2|4|8|16) numbers at once", out)
    assert re.search(r"compiled code is kept in \S", out)
    speed = re.search(r"([\d,]+) small solves a second", out)
    assert speed is not None
    # Millions on an idle core; without machine code there would be some hundreds.
    assert int(speed[1].replace(",", "")) > 5000


def test_an_unknown_command_is_refused(tmp_path: Path) -> None:
    asked = run_in(tmp_path, "juge")
    assert asked.returncode == 2
    assert "juge" in asked.stderr
