"""``report.html``: one file that needs nothing else, from the claims down to the evidence."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Callable, Mapping
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any, Final

import pandas as pd
from markupsafe import Markup

from ruleout.report.charts import check_chart, fit_chart, marginal_chart
from ruleout.report.fit_figure import conditions_in
from ruleout.report.panels import panels_of, value_range
from ruleout.report.picture import Picture, lay_out
from ruleout.report.style import COLOURS, VERDICT_SIGNS, condition_styles
from ruleout.report.svg import GraphSymbols
from ruleout.report.tables import choices_of, option_words, present_parts, records
from ruleout.report.words import (
    CLAIM_VERDICTS,
    DOSING_CAUTION,
    KEPT_MEANS,
    VERDICTS,
    by_verdict,
    check_words,
    headline,
    looks_like_dosing,
    number_text,
    p_text,
    split_names,
    why,
)
from ruleout.verdicts.types import Judgement

if TYPE_CHECKING:
    from jinja2 import Environment

    from ruleout.case import Case

BUDGET: Final = 3_600_000
"""Characters that the evidence of all variants may take; the rest stays in the tables."""
MOST_POINTS: Final = 60
FEWEST_POINTS: Final = 16
CLAIM_SIGNS: Final[Mapping[str, str]] = {
    "needed": "✔",
    "excluded": "✕",
    "not_needed": "○",
    "undecided": "?",
    "nothing_fits": "!",
}


def _file(name: str) -> str:
    return (files("ruleout.report") / "templates" / name).read_text(encoding="utf-8")


def _breakable(names: list[str]) -> Markup:
    """Return names that may be broken after their underscores."""
    return Markup(", ").join(Markup("_<wbr>").join(name.split("_")) for name in names)


def _prose(text: str) -> Markup:
    """Return a sentence with what stands between backticks as code."""
    parts = str(text).split("`")
    marked = [Markup("<code>{}</code>").format(p) if i % 2 else p for i, p in enumerate(parts)]
    return Markup("").join(marked)


@cache
def environment() -> Environment:
    """Return the template environment: everything is escaped unless it was drawn here."""
    from jinja2 import Environment, FunctionLoader, StrictUndefined

    made = Environment(
        loader=FunctionLoader(_file),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    made.filters.update(
        p=p_text,
        number=number_text,
        names=split_names,
        check=check_words,
        missing=pd.isna,
        breakable=_breakable,
        prose=_prose,
    )
    made.globals.update(
        verdict_words=VERDICTS,
        verdict_signs=VERDICT_SIGNS,
        claim_words=CLAIM_VERDICTS,
        claim_signs=CLAIM_SIGNS,
        colours=list(enumerate(COLOURS)),
    )
    return made


def render(template: str, **values: Any) -> str:
    """Return a page with its style and script inside, forbidding it anything from elsewhere."""
    script = _file("report.js")
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    page = environment().get_template(template)
    return page.render(
        style=Markup(_file("report.css")),
        script=Markup(script),
        script_hash=digest,
        **values,
    )


def html_report(judgement: Judgement, case: Case) -> str:
    """Return the page of a judged case.

    Parameters
    ----------
    judgement : Judgement
    case : Case
        For its mechanism's graph and its experiments.
    """
    picture, small = lay_out(case.mechanism), lay_out(case.mechanism, compact=True)
    stamps = GraphSymbols(small, "s")
    words = option_words(judgement.variants["choices"])
    rows = [
        {
            **row,
            "present": present_parts(row["choices"], words),
            "chosen": [f"{n}={words[n][o]}" for n, o in choices_of(row["choices"]).items()],
            "why": why(row),
            "flags": split_names(row["flags"]),
            "graph": stamps.draw(
                choices_of(row["choices"]), _graph_label(present_parts(row["choices"], words))
            ),
        }
        for row in records(by_verdict(judgement.variants))
    ]
    evidence, left_out = _evidence(judgement, rows)
    return render(
        "judgement.html",
        meta=judgement.meta,
        headline=headline(judgement.variants),
        claims=records(judgement.claims),
        rows=rows,
        graph=GraphSymbols(picture, "m").draw_with_letters(
            f"Graph of {case.mechanism.title} with its contested parts dashed"
        ),
        letters=picture.letters,
        options={name: list(found.values()) for name, found in words.items()},
        stamps=stamps.definitions(),
        evidence=evidence,
        left_out=left_out,
        findings=_findings(judgement, ""),
        settings=_settings(judgement.meta),
        abbreviated=_abbreviated(small),
        held_out=[r for r in rows if not pd.isna(r["held_out_p"])],
        kept_means=KEPT_MEANS,
        caution=DOSING_CAUTION if looks_like_dosing(case.experiments) else "",
        counts={v: int((judgement.variants["verdict"] == v).sum()) for v in VERDICTS},
    )


_SETTINGS: Final[Mapping[str, str]] = {
    "starts": "Starts of each search, at least",
    "rhat": "Largest R-hat accepted",
    "ess": "Smallest effective sample size accepted",
    "least_replicates": "Replicates before a small p is final",
    "most_replicates": "Replicates at most",
}


def _settings(meta: Mapping[str, Any]) -> list[tuple[str, Any]]:
    """Return what identifies the run and how it was made, with labels."""
    return [
        ("Seed", meta["seed"]),
        ("Effort", meta["effort"]),
        ("Level α", meta["alpha"]),
        *((_SETTINGS.get(key, key), value) for key, value in meta["settings"].items()),
        *meta["versions"].items(),
        *((f"{name}, SHA-256", value) for name, value in meta["inputs"].items()),
    ]


def _graph_label(present: list[str]) -> str:
    return f"Graph with {', '.join(present)}" if present else "Graph without any contested part"


def _abbreviated(picture: Picture) -> list[tuple[str, str]]:
    """Return the short forms used in the small graphs, where they differ from the names."""
    pairs = [(p.lines[0], p.name) for p in picture.points if p.kind == "node"]
    return [(short, name) for short, name in pairs if short != name]


def _findings(judgement: Judgement, variant: str) -> list[dict[str, Any]]:
    findings = judgement.findings
    return records(findings[findings["variant"] == variant])


def _evidence(judgement: Judgement, rows: list[dict[str, Any]]) -> tuple[list[Markup], list[str]]:
    """Return the evidence of each variant, and the names of those that would make it too large."""
    template = environment().get_template("evidence.html")
    styles = condition_styles(conditions_in(judgement))
    curves = judgement.curves.groupby(["variant", "condition", "readout"]).ngroups
    # About 36 characters for a time's three values.
    most_points = int(min(MOST_POINTS, max(FEWEST_POINTS, 0.6 * BUDGET / (36 * max(curves, 1)))))
    tables = _by_variant(judgement)
    done: list[Markup] = []
    size = 0
    for i, row in enumerate(rows):
        page = template.render(
            row=row,
            meta=judgement.meta,
            fits=_fits(judgement, row["variant"], styles, most_points),
            checks=_checks(
                tables("checks", row["variant"]),
                tables("replicates", row["variant"]),
                judgement.meta["alpha"],
            ),
            parameters=_parameters(
                tables("parameters", row["variant"]), tables("quantiles", row["variant"])
            ),
            equations=judgement.equations.get(row["variant"], {}),
            findings=_findings(judgement, row["variant"]),
        )
        size += len(page)
        if done and size > BUDGET:
            return done, [r["variant"] for r in rows[i:]]
        done.append(Markup(page))
    return done, []


def _by_variant(judgement: Judgement) -> Callable[[str, str], pd.DataFrame]:
    groups = {
        name: dict(iter(getattr(judgement, name).groupby("variant", sort=False)))
        for name in ("checks", "replicates", "parameters", "quantiles")
    }

    def rows(table: str, variant: str) -> pd.DataFrame:
        whole: pd.DataFrame = getattr(judgement, table)
        found: pd.DataFrame = groups[table].get(variant, whole.iloc[:0])
        return found

    return rows


def _fits(
    judgement: Judgement,
    variant: str,
    styles: Mapping[str, tuple[str, str]],
    most_points: int,
) -> list[dict[str, Any]]:
    """Return the panels of a variant grouped by readout."""
    panels = panels_of(judgement, variant)
    groups = []
    for readout in dict.fromkeys(p.readout for p in panels):
        mine = [p for p in panels if p.readout == readout]
        limits = value_range(mine)
        charts = [(p, fit_chart(p, limits, styles, most_points)) for p in mine]
        groups.append({"readout": readout, "charts": charts})
    return groups


def _checks(checks: pd.DataFrame, replicates: pd.DataFrame, alpha: float) -> list[dict[str, Any]]:
    """Return the checks with their charts: those that count, then those that explain.

    ``first`` are those to be seen at once: they count or fail.
    """
    rows = []
    ordered = checks.sort_values("counts_for_verdict", ascending=False, kind="stable")
    for row in records(ordered):
        counts = bool(row["counts_for_verdict"])
        draws = replicates["value"][replicates["check"] == row["check"]].to_numpy(float)
        fails = bool(row["p_value"] <= alpha)
        chart = check_chart(row, draws if counts else draws[:0], fails)
        rows.append(
            {**row, "counts": counts, "fails": fails, "first": counts or fails, "chart": chart}
        )
    return rows


def _parameters(parameters: pd.DataFrame, quantiles: pd.DataFrame) -> list[dict[str, Any]]:
    rows = []
    for row in records(parameters):
        mine = quantiles[quantiles["parameter"] == row["parameter"]]
        positive = bool((mine[["posterior", "prior"]] > 0).all(axis=None))
        rows.append({**row, "chart": marginal_chart(mine, logarithmic=positive)})
    return rows
