"""Everything the report writes of a rehearsal."""

from __future__ import annotations

from pathlib import Path

from ruleout.rehearsal import Rehearsal
from ruleout.store import write_aside


def write_rehearsal(rehearsal: Rehearsal, folder: Path, style: Path | None = None) -> None:
    """Write ``power.tex`` and the figures ``power`` and, where varied, ``variation``.

    Parameters
    ----------
    rehearsal : Rehearsal
    folder : Path
    style : Path, optional
        Matplotlib style file laid over the figures' own settings.
    """
    from ruleout.report.rehearsal_figures import power_figure, variation_figure
    from ruleout.report.rehearsal_latex import latex_power
    from ruleout.report.style import figure_style
    from ruleout.report.writing import save_figure

    text = latex_power(rehearsal)
    write_aside(folder / "power.tex", lambda path: _write(path, text))
    with figure_style(style):
        save_figure(power_figure(rehearsal), folder / "figures", "power")
        varied = variation_figure(rehearsal)
        if varied is not None:
            save_figure(varied, folder / "figures", "variation")


def _write(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")
