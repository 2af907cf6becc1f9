"""``ruleout export`` and ``ruleout import`` as a user runs them."""

from __future__ import annotations

from pathlib import Path

import pytest
from typer.testing import CliRunner

from ruleout.cli.app import app

DEMOS = Path(__file__).parents[2] / "mechanisms_demo"


def run(*arguments: object) -> tuple[int, str]:
    result = CliRunner().invoke(app, [str(a) for a in arguments])
    return result.exit_code, result.output


def test_every_variant_and_condition_gets_a_file(tmp_path: Path) -> None:
    status, said = run("export", DEMOS / "spore_wake", "--out", tmp_path / "out")
    assert status == 0, said
    names = {path.name for path in (tmp_path / "out").iterdir()}
    assert {"v1.xml", "v1__feast.xml", "v4__crumbs.xml"} <= names
    assert f"{len(names)} files written" in said


def test_graphs_are_written_with_the_whole_mechanism(tmp_path: Path) -> None:
    status, said = run(
        "export", DEMOS / "frost_relay", "--format", "graphml", "--out", tmp_path, "--variant", "v2"
    )
    assert status == 0, said
    assert {path.name for path in tmp_path.iterdir()} == {"v2.graphml", "mechanism.graphml"}


def test_a_written_graph_can_be_imported(tmp_path: Path) -> None:
    run("export", DEMOS / "frost_relay", "--format", "graphml", "--out", tmp_path)
    status, said = run("import", tmp_path / "mechanism.graphml", "--out", tmp_path / "new")
    assert status == 0, said
    text = (tmp_path / "new" / "mechanism.toml").read_text()
    assert "[edge.protectant_on_sensor]" in text


def test_an_existing_mechanism_is_never_overwritten(tmp_path: Path) -> None:
    run("export", DEMOS / "frost_relay", "--format", "graphml", "--out", tmp_path)
    (tmp_path / "mechanism.toml").write_text("mine")
    status, said = run("import", tmp_path / "mechanism.graphml", "--out", tmp_path)
    assert status == 2
    assert "there already" in said
    assert (tmp_path / "mechanism.toml").read_text() == "mine"


@pytest.mark.parametrize("condition", ["../../escape", "/tmp/absolute", "a/b", "a_b"])
def test_no_file_lands_outside_the_folder(condition: str, tmp_path: Path) -> None:
    case = tmp_path / "case"
    case.mkdir()
    for file in ("mechanism.toml", "experiments.toml"):
        (case / file).write_text((DEMOS / "frost_relay" / file).read_text())
    with (case / "experiments.toml").open("a") as more:
        more.write(f'\n[condition."{condition}"]\ninput.cold = 0.5\n')
    status, said = run("export", case, "--out", tmp_path / "in" / "out", "--variant", "v1")
    assert status == 0, said
    written = set(tmp_path.rglob("*.xml"))
    assert {p.parent for p in written} == {tmp_path / "in" / "out"}
    assert len(written) == 6


@pytest.mark.parametrize(
    ("arguments", "named"),
    [
        (("export", "nowhere", "--out", "OUT"), "no such folder"),
        (("export", DEMOS / "frost_relay", "--out", "OUT", "--variant", "v77"), "v77"),
        (("import", "x.csv", "--out", "OUT"), "no known ending"),
        (("import", "x.xml", "--out", "OUT"), "no such file"),
    ],
)
def test_bad_arguments_are_one_plain_line(
    arguments: tuple[object, ...], named: str, tmp_path: Path
) -> None:
    status, said = run(*(tmp_path / "out" if a == "OUT" else a for a in arguments))
    assert status == 2
    assert named in said
    assert len(said.strip().splitlines()) == 1
    assert not (tmp_path / "out").exists()
