"""``ruleout report``."""

from __future__ import annotations

from pathlib import Path

from ruleout.cli.progress import shown_progress


def run_report(run: Path, style: Path | None) -> None:
    """Write the report and figures of the finished run in ``run`` again."""
    from rich.console import Console

    from ruleout.cli.terminal import print_wrapped

    if (run / "survey.json").exists():
        from ruleout.cli.surveying import report_survey

        report_survey(run, style)
    else:
        _report_judgement(run, style)
    print_wrapped(Console(), f"{run / 'report.html'}: open it in a browser.")


def _report_judgement(run: Path, style: Path | None) -> None:
    from ruleout.report import write_report
    from ruleout.store import load_judgement

    judgement, case = load_judgement(run)
    with shown_progress(as_json=False) as progress:
        write_report(judgement, case, run, style=style, progress=progress)
