"""The rules of the house, checked by the tools that know them."""

from __future__ import annotations

import os
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import ruleout

ROOT = Path(__file__).resolve().parents[2]
SOURCES = sorted((ROOT / "src").rglob("*.py"))
COMMANDS = [
    "python3 -m venv .venv && .venv/bin/pip install . "
    "&& .venv/bin/ruleout judge mechanisms_demo/frost_relay",
    "python3 -m venv .venv && .venv/bin/pip install '.[test]' && .venv/bin/pytest",
]
# "About 400": a file that has grown beyond this is two things.
LONGEST_MODULE = 420


def run(*command: str) -> None:
    """Run a tool on the checkout and fail with what it said."""
    path = os.pathsep.join(filter(None, [str(ROOT / "src"), os.environ.get("PYTHONPATH")]))
    done = subprocess.run(
        [sys.executable, *command],
        cwd=ROOT,
        env={**os.environ, "PYTHONPATH": path},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, f"{' '.join(command)}\n{done.stdout}{done.stderr}"


def test_imports_run_only_down_the_layers() -> None:
    run(
        "-c",
        "import sys; from importlinter.cli import lint_imports; sys.exit(lint_imports("
        "config_filename='pyproject.toml', no_cache=True))",
    )


def test_ruff_finds_nothing() -> None:
    run("-m", "ruff", "check", "--no-cache", ".")


def test_code_is_formatted() -> None:
    run("-m", "ruff", "format", "--check", "--no-cache", ".")


def test_types_are_strict() -> None:
    run("-m", "mypy", "--cache-dir", os.devnull)


def test_types_are_shipped() -> None:
    assert (Path(ruleout.__file__).parent / "py.typed").is_file()


@pytest.mark.parametrize("module", SOURCES, ids=lambda p: str(p.relative_to(ROOT / "src")))
def test_module_is_short_enough_to_be_one_thing(module: Path) -> None:
    lines = module.read_text(encoding="utf-8").count("\n")
    assert lines <= LONGEST_MODULE, f"{module.name} has {lines} lines"


def test_readme_opens_with_one_paragraph_and_the_two_commands() -> None:
    """`.ci/run` takes the commands from the README, so what is printed there is what is run."""
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    title, paragraph, before_fence = text.split("\n\n")[:3]
    assert title == "# ruleout"
    assert not paragraph.startswith(("#", "```", "-", "|"))
    assert before_fence.startswith("```")
    assert [line for line in text.splitlines() if line.startswith("python3 -m venv")] == COMMANDS


def test_continuous_integration_is_executable_bash() -> None:
    script = ROOT / ".ci" / "run"
    assert os.access(script, os.X_OK)
    assert subprocess.run(["bash", "-n", str(script)], check=False).returncode == 0


def test_versions_agree() -> None:
    citation = (ROOT / "CITATION.cff").read_text(encoding="utf-8")
    changes = (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
    assert f"\nversion: {ruleout.__version__}\n" in citation
    assert f"\n## {ruleout.__version__}" in changes


def test_every_layer_of_the_contract_exists() -> None:
    """An exhaustive contract names every package, so none can escape it."""
    with (ROOT / "pyproject.toml").open("rb") as file:
        contract = tomllib.load(file)["tool"]["importlinter"]["contracts"][0]
    assert contract["exhaustive"]
    layers = {name.strip() for layer in contract["layers"] for name in layer.split(":")}
    here = ROOT / "src" / "ruleout"
    missing = {n for n in layers if not (here / n).is_dir() and not (here / f"{n}.py").is_file()}
    assert not missing
