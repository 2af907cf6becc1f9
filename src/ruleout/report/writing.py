"""Everything the report writes into a run folder."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Final

from ruleout.progress import Progress, Silent
from ruleout.report.words import by_verdict
from ruleout.store import write_aside
from ruleout.verdicts.types import Judgement

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from ruleout.case import Case

FORMATS: Final = ("pdf", "svg", "png")
MOST_FIT_FIGURES: Final = 24
"""Fit figures drawn, the kept variants first; the tables hold the curves of all."""
_WITHOUT_DATE: Final = {
    "pdf": {"CreationDate": None},
    "svg": {"Date": None},
    "png": {"Software": None},
}


def save_figure(figure: Figure, folder: Path, name: str) -> None:
    """Write a figure as pdf, svg and png, the same bytes for the same figure."""
    for kind in FORMATS:

        def save(path: Path, kind: str = kind) -> None:
            figure.savefig(path, format=kind, metadata=_WITHOUT_DATE[kind])

        write_aside(folder / f"{name}.{kind}", save)


def _write_text(path: Path, text: str) -> None:
    def write(aside: Path) -> None:
        aside.write_text(text, encoding="utf-8")

    write_aside(path, write)


def write_figures(
    judgement: Judgement,
    case: Case,
    folder: Path,
    *,
    style: Path | None = None,
    progress: Progress | None = None,
) -> None:
    """Write the figures for papers into ``folder``.

    ``mechanism`` (the graph), ``variants`` (the falsification table), ``checks`` and one
    ``fit_VARIANT`` for each variant that was fitted, up to ``MOST_FIT_FIGURES``.
    """
    from ruleout.report.fit_figure import checks_figure, fit_figure
    from ruleout.report.graph_figure import mechanism_figure
    from ruleout.report.picture import lay_out
    from ruleout.report.style import figure_style
    from ruleout.report.table_figure import table_figure

    tell = progress or Silent()
    picture = lay_out(case.mechanism)
    ordered = list(by_verdict(judgement.variants)["variant"])
    fitted = set(judgement.residuals["variant"])
    drawn = [v for v in ordered if v in fitted][:MOST_FIT_FIGURES]
    step = "figures"
    tell.start(step, 3 + len(drawn))
    with figure_style(style):
        save_figure(mechanism_figure(picture), folder, "mechanism")
        tell.advance(step)
        save_figure(table_figure(judgement, picture), folder, "variants")
        tell.advance(step)
        checks = checks_figure(judgement, ordered)
        if checks is not None:
            save_figure(checks, folder, "checks")
        tell.advance(step)
        for variant in drawn:
            save_figure(fit_figure(judgement, variant), folder, f"fit_{variant}")
            tell.advance(step)
    tell.finish(step)


def write_report(
    judgement: Judgement,
    case: Case,
    folder: Path,
    *,
    style: Path | None = None,
    progress: Progress | None = None,
) -> None:
    """Write the report, the figures, the table and the methods text of a judged case.

    Parameters
    ----------
    judgement : Judgement
    case : Case
    folder : Path
        The run folder. Each file is written aside and renamed.
    style : Path, optional
        Matplotlib style file laid over the figures' own settings.
    progress : Progress, optional

    Raises
    ------
    InputError
        If ``style`` cannot be used.
    """
    from ruleout.report.html import html_report
    from ruleout.report.latex import latex_table
    from ruleout.report.methods import methods_text

    _write_text(folder / "report.html", html_report(judgement, case))
    _write_text(folder / "table.tex", latex_table(judgement))
    _write_text(folder / "methods.txt", methods_text(judgement, case))
    write_figures(judgement, case, folder / "figures", style=style, progress=progress)
