"""``ruleout survey``."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING

from ruleout.cli.progress import shown_progress

if TYPE_CHECKING:
    from ruleout.survey import Survey

SHOWN = 8
"""Topologies printed for each behaviour; the tables hold them all."""


def run_survey(
    path: Path,
    *,
    out: Path,
    seed: int,
    sets: int | None,
    sample: int | None,
    workers: int,
    as_json: bool,
) -> None:
    """Survey the family in the file ``path``, write everything into ``out`` and print it."""
    from ruleout.store import locked
    from ruleout.survey import Settings, read_family, survey
    from ruleout.survey.saving import save_survey

    source = read_family(path)
    settings = Settings(
        seed=seed, sets=sets or source.sets, method=source.method, sample=sample, workers=workers
    )
    with locked(out), shown_progress(as_json=as_json) as progress:
        found = survey(source, settings, out=out, progress=progress)
        save_survey(found, path, out)
        from ruleout.report.survey_page import write_survey_report

        write_survey_report(found, source.family, out, progress=progress)
    if as_json:
        record = {"event": "surveyed", "out": str(out), "results": found.meta["results"]}
        print(json.dumps(record), file=sys.stdout, flush=True)
    else:
        _print(found, out)


def report_survey(folder: Path, style: Path | None) -> None:
    """Write a finished survey's report and figures again."""
    from ruleout.report.survey_page import write_survey_report
    from ruleout.survey import read_family
    from ruleout.survey.saving import FAMILY_FILE, load_survey

    found = load_survey(folder)
    family = read_family(folder / FAMILY_FILE).family
    with shown_progress(as_json=False) as progress:
        write_survey_report(found, family, folder, style=style, progress=progress)


def _print(found: Survey, out: Path) -> None:
    from rich.console import Console

    from ruleout.cli.terminal import print_heading, print_sentences, print_wrapped
    from ruleout.report.survey_figures import best_first, of_behaviour, records
    from ruleout.report.survey_words import NOT_PROVEN, headline, percent

    console = Console()
    print_wrapped(console, str(found.meta["title"]))
    for behaviour in found.meta["results"]:
        print_heading(console, behaviour.capitalize())
        print_wrapped(console, headline(found, behaviour))
        for row in records(best_first(found, behaviour).head(SHOWN)):
            interval = f"({percent(row['low'])} to {percent(row['high'])})"
            print_wrapped(
                console,
                f"{percent(row['robustness'])} {interval}  {row['edges']}",
                indent="    ",
                first="  ",
            )
        statements = [
            f"{row['statement']} ({row['status']})"
            for row in records(of_behaviour(found.principles, behaviour))
        ]
        if statements:
            print_heading(console, f"Candidate principles: {behaviour}")
            print_sentences(console, statements)
    print_wrapped(console, NOT_PROVEN)
    print_heading(console, "Files")
    print_wrapped(console, f"{out / 'report.html'}: open it in a browser.", indent="  ")
    print_wrapped(
        console,
        f"{out}: tables (topologies, features, principles, examples, links), figures, table.tex.",
        indent="  ",
    )
