"""The report's files: complete, escaped, self-contained, small, the same for the same run."""

from __future__ import annotations

import re
import shutil
import subprocess
from collections.abc import Callable
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from ruleout.report import html, write_report
from ruleout.report.html import html_report
from ruleout.report.latex import LONG, escape, latex_table
from ruleout.report.methods import methods_text
from ruleout.report.svg import ticks
from ruleout.report.words import headline, p_text
from ruleout.report.writing import write_figures
from ruleout.verdicts.types import Judgement

HOSTILE = "<script>window.hurt = 1</script>"
VOID = {"meta", "link", "input", "br", "wbr", "img", "hr"}


class Balanced(HTMLParser):
    """Fails on a tag that is closed out of order; collects identifiers and references."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.ids: list[str] = []
        self.links: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        for name, value in attrs:
            if name == "id":
                self.ids.append(value or "")
            elif name == "href" and (value or "").startswith("#"):
                self.links.append((value or "")[1:])
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


@pytest.fixture(scope="module")
def page(frost_judgement: Judgement, frost_case: Any) -> str:
    return html_report(frost_judgement, frost_case)


def test_the_page_is_well_formed_and_its_links_lead_somewhere(page: str) -> None:
    parser = Balanced()
    parser.feed(page)
    assert parser.open == []
    assert len(set(parser.ids)) == len(parser.ids)
    assert set(parser.links) <= set(parser.ids)


def test_the_page_needs_nothing_from_elsewhere(page: str) -> None:
    assert not re.findall(r"(?:src|href)=\"(?!#|data:)[^\"]*\"", page)
    assert "url(" not in page
    assert "default-src 'none'" in page


def test_claims_come_before_the_table_of_variants(page: str) -> None:
    assert page.index('id="claims"') < page.index('id="variants"') < page.index('id="evidence"')


def test_every_variant_has_its_verdict_in_words_and_its_evidence(
    page: str, frost_judgement: Judgement
) -> None:
    for row in frost_judgement.variants.itertuples():
        evidence = page[page.index(f'<details class="evidence" id="{row.variant}"') :]
        evidence = evidence[: evidence.index("</summary>")]
        assert row.verdict.replace("_", " ") in evidence


def test_the_decisive_failure_is_marked_in_words(page: str) -> None:
    assert "fails: peak" in page
    assert ">decides<" in page.replace("\n", "")


def test_what_comes_from_the_users_files_is_escaped(
    judgement_with: Callable[..., Judgement], frost_case: Any
) -> None:
    plain = judgement_with()
    judgement = judgement_with(
        meta={**plain.meta, "title": HOSTILE, "time_unit": HOSTILE},
        claims=plain.claims.assign(text=HOSTILE, statement=HOSTILE),
        variants=plain.variants.assign(reason=HOSTILE, flags=HOSTILE),
        findings=plain.findings.assign(message=HOSTILE, remedy=HOSTILE),
        curves=plain.curves.assign(readout=HOSTILE),
        residuals=plain.residuals.assign(readout=HOSTILE),
        parameters=plain.parameters.assign(unit=HOSTILE, prior=HOSTILE),
        equations={v: {k: [HOSTILE] for k in e} for v, e in plain.equations.items()},
    )
    mechanism = replace(frost_case.mechanism, title=HOSTILE)
    page = html_report(judgement, replace(frost_case, mechanism=mechanism))
    assert HOSTILE not in page
    assert page.count("<script>") == 1


def many_variants(judgement: Judgement, number: int) -> Judgement:
    """Repeat the variants under new names."""
    names = list(judgement.variants["variant"])
    tables = {}
    for name in (
        "variants",
        "checks",
        "parameters",
        "curves",
        "residuals",
        "replicates",
        "quantiles",
    ):
        table = getattr(judgement, name)
        parts = []
        for i in range(number):
            part = table[table["variant"] == names[i % len(names)]]
            parts.append(part.assign(variant=f"v{i + 1:03d}"))
        tables[name] = pd.concat(parts, ignore_index=True)
    return replace(judgement, **tables)


@pytest.mark.slow
def test_a_report_of_512_variants_stays_under_5_megabytes(
    frost_judgement: Judgement, frost_case: Any
) -> None:
    page = html_report(many_variants(frost_judgement, 512), frost_case)
    assert len(page.encode()) < 5_000_000
    assert page.count("<tr data-verdict=") == 512


def test_what_is_too_much_for_the_page_is_named_and_the_table_stays_whole(
    frost_judgement: Judgement, frost_case: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(html, "BUDGET", 100_000)
    page = html_report(many_variants(frost_judgement, 16), frost_case)
    shown = page.count('<details class="evidence"')
    assert 1 <= shown < 16
    assert f"the evidence of {16 - shown} more variants" in page
    assert page.count("<tr data-verdict=") == 16


def test_all_files_are_written_and_none_is_left_aside(
    frost_judgement: Judgement, frost_case: Any, tmp_path: Path
) -> None:
    few = replace(
        frost_judgement,
        variants=frost_judgement.variants.iloc[:1],
        residuals=frost_judgement.residuals[frost_judgement.residuals["variant"] == "v1"],
    )
    write_report(few, frost_case, tmp_path)
    written = {p.relative_to(tmp_path).as_posix() for p in tmp_path.rglob("*") if p.is_file()}
    figures = {"mechanism", "variants", "checks", "fit_v1"}
    kinds = ("pdf", "svg", "png")
    assert written == {"report.html", "table.tex", "methods.txt"} | {
        f"figures/{name}.{kind}" for name in figures for kind in kinds
    }


def test_the_report_of_a_run_is_the_same_each_time(
    page: str, frost_judgement: Judgement, frost_case: Any
) -> None:
    assert html_report(frost_judgement, frost_case) == page


def test_a_variant_that_was_never_fitted_still_has_its_place(
    judgement_with: Callable[..., Judgement], frost_case: Any, tmp_path: Path
) -> None:
    whole = judgement_with(not_judged=("v8",))
    tables = {
        name: (table := getattr(whole, name))[table["variant"] != "v8"]
        for name in ("checks", "parameters", "curves", "residuals", "replicates", "quantiles")
    }
    judgement = replace(whole, **tables, equations={})
    assert 'id="v8"' in html_report(judgement, frost_case)
    write_figures(replace(judgement, variants=whole.variants.tail(1)), frost_case, tmp_path)
    assert not (tmp_path / "fit_v8.png").exists()


def test_methods_have_the_numbers_of_this_run(frost_judgement: Judgement, frost_case: Any) -> None:
    text = methods_text(frost_judgement, frost_case)
    flat = " ".join(text.split())
    assert "allow 8 wirings" in flat
    assert "54 values of 2 readouts in 3 conditions" in flat
    assert "alpha = 0.05" in flat
    assert "4 ruled out and 4 kept" in flat
    assert "seed 1" in flat


def test_every_citation_has_its_reference_and_the_reverse(
    frost_judgement: Judgement, frost_case: Any
) -> None:
    paragraph, _, references = methods_text(frost_judgement, frost_case).partition("References")
    cited = {n for group in re.findall(r"\[([\d, ]+)\]", paragraph) for n in group.split(", ")}
    listed = re.findall(r"^\[(\d+)\]", references, flags=re.MULTILINE)
    assert cited == set(listed)
    assert listed == [str(i + 1) for i in range(len(listed))]


@pytest.mark.parametrize(
    ("given", "set_as"),
    [
        ("a_b", r"a\_\allowbreak{}b"),
        ("50 %", r"50 \%"),
        (r"\input{x}", r"\textbackslash{}input\{x\}"),
        ("λ → x", "? ? x"),
        ("$x^2$ & #1 ~", r"\$x\textasciicircum{}2\$ \& \#1 \textasciitilde{}"),
    ],
)
def test_latex_sees_no_command_in_a_name(given: str, set_as: str) -> None:
    assert escape(given) == set_as


@pytest.mark.slow
@pytest.mark.skipif(shutil.which("pdflatex") is None, reason="no pdflatex is installed")
@pytest.mark.parametrize("number", [8, LONG + 20])
def test_the_table_compiles_with_the_article_class(
    number: int, frost_judgement: Judgement, tmp_path: Path
) -> None:
    judgement = many_variants(frost_judgement, number)
    judgement = replace(judgement, meta={**judgement.meta, "title": r"50 % of \hell & {more}_$"})
    (tmp_path / "table.tex").write_text(latex_table(judgement), encoding="utf-8")
    (tmp_path / "paper.tex").write_text(
        "\\documentclass{article}\n\\usepackage{array, booktabs, longtable}\n"
        "\\begin{document}\n\\input{table}\n\\end{document}\n"
    )
    made = subprocess.run(
        ["pdflatex", "-interaction=nonstopmode", "-halt-on-error", "paper.tex"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=False,
    )
    assert made.returncode == 0, made.stdout[-2000:]
    assert (tmp_path / "paper.pdf").stat().st_size > 10_000


@pytest.mark.parametrize(
    ("p", "text"), [(0.35, "0.35"), (0.005, "0.005"), (0.0123, "0.012"), (float("nan"), "–")]
)
def test_p_values_have_two_digits(p: float, text: str) -> None:
    assert p_text(p) == text


@pytest.mark.parametrize(("low", "high"), [(0, 1), (0, 60), (-3.7, 12), (1e-4, 2e-4), (0, 0)])
def test_ticks_are_few_round_and_inside(low: float, high: float) -> None:
    found = ticks(low, high)
    assert 1 <= len(found) <= 5
    assert all(low - 1e-12 <= t <= high + 1e-12 for t in found)


def test_the_headline_counts_the_verdicts(judgement_with: Callable[..., Judgement]) -> None:
    assert headline(judgement_with(not_judged=("v8",)).variants) == (
        "Of 8 variants, 4 are ruled out, 1 is not judged and 3 are kept."
    )
