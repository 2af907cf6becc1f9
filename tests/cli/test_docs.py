"""Every command and code block of the documentation does what it says."""

from __future__ import annotations

import re
import shlex
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import ruleout.pipeline
import ruleout.store
from ruleout.case import read_case
from ruleout.cli import main
from ruleout.cli.starting import write_new_case
from ruleout.report import writing
from ruleout.variants import expand
from ruleout.verdicts.types import Judgement

ROOT = Path(__file__).resolve().parents[2]
PAGES = sorted((ROOT / "docs").glob("*.md"))
BLOCK = re.compile(r"^```(\w*)\n(.*?)^```$", re.MULTILINE | re.DOTALL)


def blocks(kind: str, *names: str) -> list[Any]:
    found = []
    for page in PAGES:
        if not names or page.stem in names:
            texts = [m[2] for m in BLOCK.finditer(page.read_text()) if m[1] == kind]
            found += [pytest.param(text, id=f"{page.stem}-{i}") for i, text in enumerate(texts)]
    return found


def test_there_is_documentation_and_every_block_is_of_a_kind_that_is_run() -> None:
    kinds = {m[1] for page in PAGES for m in BLOCK.finditer(page.read_text())}
    assert len(PAGES) >= 8
    assert kinds == {"sh", "toml", "python"}


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.stem)
def test_links_between_pages_lead_somewhere(page: Path) -> None:
    for target in re.findall(r"\]\(([^)#]+?\.md)(?:#[^)]*)?\)", page.read_text()):
        assert (page.parent / target).exists(), target


@pytest.mark.parametrize("block", blocks("toml", "recipes"))
def test_a_recipe_can_be_added_to_the_starting_case(block: str, tmp_path: Path) -> None:
    write_new_case(tmp_path / "case")
    first, _, text = block.partition("\n")
    file = tmp_path / "case" / first.removeprefix("# ").strip()
    assert file.exists()
    with file.open("a") as opened:
        opened.write("\n" + text)
    if "add.drug" in block:
        with (tmp_path / "case" / "mechanism.toml").open("a") as opened:
            opened.write('\n[node.drug]\nkind = "pool"\nstart = 0.0\n')
    case = read_case(tmp_path / "case")
    assert expand(case.mechanism, case.experiments).variants


@pytest.mark.parametrize("block", blocks("toml", "mechanism"))
def test_a_piece_of_a_mechanism_can_be_added_to_the_starting_case(
    block: str, tmp_path: Path
) -> None:
    write_new_case(tmp_path / "case")
    file = tmp_path / "case" / "mechanism.toml"
    text = file.read_text()
    if "[prior]" in block:
        text = text[: text.index("[prior]")]
    file.write_text(f"{text}\n{block}")
    case = read_case(tmp_path / "case")
    assert expand(case.mechanism, case.experiments).variants


@pytest.fixture
def prepared(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    frost_judgement: Judgement,
    frost_folder: Path,
) -> Callable[[], Path]:
    """Work in a folder with a judged case, with the long computation put aside."""

    def judge(case: Any, settings: Any = None, *, out: Path, **_: Any) -> Judgement:
        assert case.mechanism.title
        assert settings is None or settings.effort == "quick"
        out.mkdir(parents=True, exist_ok=True)
        return frost_judgement

    def prepare() -> Path:
        monkeypatch.chdir(tmp_path)
        shutil.copytree(frost_folder, tmp_path / "first_case")
        case = read_case(tmp_path / "first_case")
        monkeypatch.setattr(ruleout.pipeline, "judge", judge)
        monkeypatch.setattr(ruleout.store, "load_judgement", lambda _: (frost_judgement, case))
        monkeypatch.setattr(writing, "write_figures", lambda *_, **__: None)
        return tmp_path

    return prepare


@pytest.mark.parametrize("block", blocks("sh"))
def test_a_command_is_understood(block: str, prepared: Callable[[], Path]) -> None:
    prepared()
    for line in block.splitlines():
        program, *words = shlex.split(line)
        assert program == "ruleout"
        if words[0] == "new":
            words[1] += "_anew"
        assert main(words) == 0


@pytest.mark.parametrize("block", blocks("python"))
def test_a_piece_of_python_runs(block: str, prepared: Callable[[], Path]) -> None:
    prepared()
    exec(compile(block, "a block of the documentation", "exec"), {})


@pytest.mark.slow
def test_the_first_case_is_judged_as_its_page_says(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    for block in blocks("sh", "first_case"):
        for line in block.values[0].splitlines():
            assert main(shlex.split(line)[1:]) == 0
    assert (tmp_path / "reports" / "first_case" / "report.html").exists()
    claims = (tmp_path / "reports" / "first_case" / "claims.csv").read_text()
    assert "product_on_kinase" in claims
    assert "needed" in claims
    for block in blocks("python", "library"):
        exec(compile(block.values[0], "a block of the documentation", "exec"), {})
