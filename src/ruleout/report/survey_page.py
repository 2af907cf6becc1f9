"""``report.html`` and ``table.tex`` of a survey, and its figures."""

from __future__ import annotations

import base64
import io
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import pandas as pd
from markupsafe import Markup

from ruleout.mechanism.types import Fixed
from ruleout.progress import Progress, Silent
from ruleout.report.html import render
from ruleout.report.latex import escape
from ruleout.report.survey_figures import (
    atlas_figure,
    best_first,
    features_figure,
    of_behaviour,
    ranking_figure,
    records,
    traces_figure,
)
from ruleout.report.survey_map import map_figure
from ruleout.report.survey_words import KINDS, NOT_PROVEN, headline, percent
from ruleout.report.writing import save_figure
from ruleout.store import write_aside
from ruleout.survey.mechanisms import RANGES, AnyFamily, MechanismFamily
from ruleout.survey.types import DEFAULT_RANGES, Survey

if TYPE_CHECKING:
    from matplotlib.figure import Figure

MOST_LATEX: Final = 30
STYLES: Final[Mapping[str, str]] = {
    "enzyme": "Enzyme kinetics: every edge is a saturable term of its own on the gain (stimulates) "
    "or the loss (inhibits) of its target's active fraction; a node regulated on one side only is "
    "opposed by a constant enzyme, an unregulated one has one on each side.",
    "gene": "Gene regulation: stimulating edges add Hill terms to the gain of their target, "
    "inhibiting edges divide it, and every product is lost at a constant rate.",
    "mechanism": "The variants of a mechanism, under its own rate laws. Ranges that neither the "
    "family file nor the mechanism's priors give are those below.",
}
CAPTIONS: Final[Mapping[str, tuple[str, str]]] = {
    "atlas": (
        "Minimal wirings",
        "Working wirings from which no edge can be taken away, the most robust first; above each "
        "the share of parameter sets that show the behaviour, with its exact interval.",
    ),
    "ranking": (
        "Robustness",
        "The most robust topologies with exact binomial intervals; filled: minimal.",
    ),
    "features": (
        "Features",
        "How common features are among working and among all topologies, and among the showing "
        "parameter sets.",
    ),
    "map": (
        "One-edge map",
        "Working topologies in rows by their number of edges, linked where they differ by one.",
    ),
    "traces": ("Examples", "The output under the best set of each of the most robust topologies."),
}


def survey_figures(survey: Survey, family: AnyFamily, behaviour: str) -> dict[str, Figure]:
    """Return the figures of one behaviour, by name; those without content are left out."""
    makers: dict[str, Callable[[], Figure | None]] = {
        "atlas": lambda: atlas_figure(survey, family, behaviour),
        "ranking": lambda: ranking_figure(survey, behaviour),
        "features": lambda: features_figure(survey, behaviour),
        "map": lambda: map_figure(survey, behaviour),
        "traces": lambda: traces_figure(survey, family, behaviour),
    }
    made = ((name, make()) for name, make in makers.items())
    return {name: figure for name, figure in made if figure is not None}


def write_survey_report(
    survey: Survey,
    family: AnyFamily,
    folder: Path,
    *,
    style: Path | None = None,
    progress: Progress | None = None,
) -> None:
    """Write ``report.html``, ``table.tex`` and ``figures/`` of a survey into ``folder``."""
    from ruleout.report.style import figure_style

    tell = progress or Silent()
    behaviours = list(survey.meta["results"])
    images: dict[str, list[tuple[str, str, str]]] = {}
    tell.start("figures", len(behaviours))
    with figure_style(style):
        for behaviour in behaviours:
            images[behaviour] = []
            for name, figure in survey_figures(survey, family, behaviour).items():
                save_figure(figure, folder / "figures", f"{behaviour}_{name}")
                images[behaviour].append((*CAPTIONS[name], _data_uri(figure)))
            tell.advance("figures", note=behaviour)
    tell.finish("figures")
    page = survey_page(survey, family, images)
    write_aside(folder / "report.html", lambda path: _write(path, page))
    write_aside(folder / "table.tex", lambda path: _write(path, survey_latex(survey)))


def _write(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")


def _data_uri(figure: Figure) -> str:
    buffer = io.BytesIO()
    figure.savefig(buffer, format="svg", metadata={"Date": None})
    return "data:image/svg+xml;base64," + base64.b64encode(buffer.getvalue()).decode()


def survey_page(
    survey: Survey,
    family: AnyFamily,
    images: Mapping[str, list[tuple[str, str, str]]],
) -> str:
    """Return the page; ``images`` holds (title, text, data URI) by behaviour."""
    parts = [
        {
            "name": behaviour,
            "headline": headline(survey, behaviour),
            "principles": _principles(survey, behaviour),
            "figures": [(t, x, Markup(uri)) for t, x, uri in images.get(behaviour, [])],
        }
        for behaviour in survey.meta["results"]
    ]
    return render(
        "survey.html",
        meta=survey.meta,
        parts=parts,
        not_proven=NOT_PROVEN,
        style_text=STYLES[family.style],
        family_rows=_family_rows(family, survey),
        run_rows=_run_rows(survey),
    )


def _principles(survey: Survey, behaviour: str) -> list[tuple[str, list[dict[str, Any]]]]:
    table = of_behaviour(survey.principles, behaviour)
    words = dict(zip(survey.topologies["topology"], survey.topologies["edges"], strict=True))
    groups = []
    for kind, title in KINDS.items():
        rows = []
        for row in records(table[table["kind"] == kind]):
            exceptions = [t for t in str(row["counterexample_list"]).split(";") if t]
            bounded = pd.notna(row["bound"])
            rows.append(
                {
                    **row,
                    "examples": [words[t] for t in exceptions[:3]],
                    "bound": percent(row["bound"]) if bounded else None,
                    "bound_one": percent(row["bound_one"]) if bounded else None,
                }
            )
        if rows:
            groups.append((title, rows))
    return groups


def _family_rows(family: AnyFamily, survey: Survey) -> list[tuple[str, str]]:
    if isinstance(family, MechanismFamily):
        ranges = {**RANGES, **family.ranges}
        nodes = tuple(family.mechanism.nodes)
    else:
        ranges = {**DEFAULT_RANGES[family.style], **family.ranges}
        nodes = family.nodes
    rows = [
        ("Nodes", ", ".join(nodes)),
        ("Input", family.source or "none"),
        ("Output", family.output_name),
        ("Wirings", f"{survey.meta['family_size']:,}"),
    ]
    for name, r in ranges.items():
        text = f"{r.value:g}" if isinstance(r, Fixed) else f"{r.low:g} to {r.high:g} (log-uniform)"
        rows.append((f"Range of {name}", text))
    rows += [(f"Behaviour {name}", text) for name, text in survey.meta["behaviours"].items()]
    return rows


def _run_rows(survey: Survey) -> list[tuple[str, str]]:
    meta = survey.meta
    return [
        ("Topologies", f"{meta['surveyed']:,} of {meta['family_size']:,}"),
        ("Parameter sets each", f"{meta['sets']:,} ({meta['method']})"),
        ("Counts as working", f"from {meta['working']} showing set(s) on"),
        ("Seed", str(meta["seed"])),
        ("Confidence", f"{100 * meta['level']:g} %"),
        ("ruleout", str(meta["version"])),
    ]


def survey_latex(survey: Survey) -> str:
    r"""Return the most robust minimal topologies of each behaviour for ``\input``."""
    lines = [r"% Needs \usepackage{booktabs}."]
    for behaviour in survey.meta["results"]:
        rows = best_first(survey, behaviour)
        rows = rows[rows["minimal"]].head(MOST_LATEX)
        lines += [
            r"\begin{table}[htbp]",
            r"\small",
            rf"\caption{{{escape(str(survey.meta['title']))}: minimal wirings that show "
            rf"{escape(behaviour)}. {escape(headline(survey, behaviour))}}}",
            r"\begin{tabular}{@{}lrrr@{}}",
            r"\toprule",
            r"Edges & Shown & Robustness & Exact interval \\",
            r"\midrule",
        ]
        for row in records(rows):
            edges = _arrows(row["edges"])
            cells = (
                edges,
                f"{row['shown']}/{row['judged']}",
                escape(percent(row["robustness"])),
                f"{escape(percent(row['low']))} to {escape(percent(row['high']))}",
            )
            lines.append(" & ".join(cells) + r" \\")
        lines += [r"\bottomrule", r"\end{tabular}", r"\end{table}"]
    return "\n".join(lines) + "\n"


def _arrows(edges: str) -> str:
    """Return edges in words with the arrows of mathematics."""
    parts = []
    for edge in edges.split("; "):
        if edge.count(" ") != 2:
            parts.append(escape(edge))
            continue
        source, arrow, target = edge.split(" ")
        sign = r"$\rightarrow$" if arrow == "->" else r"$\dashv$"
        parts.append(f"{escape(source)} {sign} {escape(target)}")
    return ", ".join(parts)
