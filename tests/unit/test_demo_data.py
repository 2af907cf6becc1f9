"""The demos' data are what their scripts make, and their notes say the truth."""

from __future__ import annotations

import importlib
from pathlib import Path

import pytest

from ruleout.case import read_case

DEMOS = Path(__file__).resolve().parents[2] / "mechanisms_demo"
NAMES = sorted(path.parent.name for path in DEMOS.glob("*/make_data.py"))


def test_there_are_four_demos() -> None:
    assert NAMES == ["frost_relay", "lantern_gene", "salt_sense", "spore_wake"]


@pytest.mark.parametrize("name", NAMES)
def test_script_reproduces_the_data_exactly(
    name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.syspath_prepend(DEMOS.parent)
    measuring = importlib.import_module("mechanisms_demo.measuring")
    made = importlib.import_module(f"mechanisms_demo.{name}.make_data")
    measuring.write(measuring.measure(made.curves(), made.TIMES, made.NOISE), tmp_path / "data.csv")
    again = (tmp_path / "data.csv").read_bytes()
    assert again == (DEMOS / name / "data.csv").read_bytes()


@pytest.mark.parametrize("name", NAMES)
def test_case_can_be_read_and_has_a_note(name: str) -> None:
    case = read_case(DEMOS / name)
    assert case.experiments.data is not None
    assert (DEMOS / name / "NOTE.md").is_file()
