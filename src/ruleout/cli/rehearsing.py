"""``ruleout rehearse``."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING

from ruleout.cli.judging import NOT_FULLY_JUDGED, check_alpha, check_out, cores
from ruleout.cli.progress import shown_progress
from ruleout.errors import InputError

if TYPE_CHECKING:
    from ruleout.case import Case
    from ruleout.progress import Progress
    from ruleout.rehearsal import Fitted, Rehearsal

JUDGED = "judged"


def run_rehearse(
    folder: Path,
    *,
    out: Path,
    run: Path | None,
    truths: list[str],
    data_sets: int,
    seed: int,
    workers: int | None,
    effort: str,
    alpha: float,
    vary: str | None,
    as_json: bool,
) -> int:
    """Rehearse the case in ``folder``, write everything into ``out`` and print the tables.

    Returns
    -------
    int
        0, or 3 where some true variant could not be judged in some data set.
    """
    check_alpha(alpha)
    from ruleout.case import read_case

    case = read_case(folder, require_data=False)
    from ruleout.rehearsal import Spending, read_variation, rehearse, save_rehearsal
    from ruleout.report.rehearsal_writing import write_rehearsal

    variation = read_variation(vary) if vary else None
    settings = Spending(seed=seed, effort=effort, alpha=alpha, workers=workers or cores())
    check_out(out)
    with shown_progress(as_json=as_json) as progress:
        fits = _fits(case, run, out, settings.seed, settings.workers, progress)
        rehearsal = rehearse(
            case,
            settings,
            out=out,
            truths=truths,
            data_sets=data_sets,
            variation=variation,
            run=fits,
            progress=progress,
        )
        save_rehearsal(rehearsal, out)
        write_rehearsal(rehearsal, out)
    if as_json:
        _print_json(rehearsal, out)
    else:
        _print(rehearsal, out)
    return NOT_FULLY_JUDGED if rehearsal.size["not_judged"].any() else 0


def _fits(
    case: Case, run: Path | None, out: Path, seed: int, workers: int, progress: Progress
) -> Fitted | None:
    """Return what data tell of the parameters: from a run that exists, or judged here first."""
    from ruleout.pipeline import Settings, judge
    from ruleout.rehearsal import fitted
    from ruleout.store import load_judgement

    if case.experiments.data is None:
        if run is not None:
            raise InputError(
                "the case has no data.csv, so no run can tell its parameters; leave --run out",
                where=str(run),
            )
        return None
    usual = Path("reports") / case.name
    if run is None and (usual / "verdict.json").exists():
        judgement, _ = load_judgement(usual)
        if dict(judgement.meta["inputs"]) == dict(case.hashes):
            run = usual
    if run is not None:
        judgement, _ = load_judgement(run)
        return fitted(case, judgement, run)
    settings = Settings(seed=seed, effort="quick", workers=workers)
    return fitted(case, judge(case, settings, out=out / JUDGED, progress=progress), out / JUDGED)


def _print(rehearsal: Rehearsal, out: Path) -> None:
    from rich.console import Console
    from rich.table import Table

    from ruleout.cli.terminal import print_heading, print_wrapped
    from ruleout.report.rehearsal_words import headline, rate_text
    from ruleout.report.tables import records

    console = Console()
    print_heading(console, str(rehearsal.meta["title"]))
    for line in headline(rehearsal):
        print_wrapped(console, line)
    for design in rehearsal.meta["designs"]:
        power = rehearsal.power[rehearsal.power["design"] == design]
        rivals = list(dict.fromkeys(power["rival"]))
        table = Table(title=f"Ruled out, {design}", title_justify="left", box=None)
        table.add_column("true")
        for rival in rivals:
            table.add_column(rival, justify="right")
        for truth, rows in power.groupby("truth", sort=False):
            cells = [rate_text(row) for row in records(rows)]
            table.add_row(str(truth), *cells)
        console.print(table)
    print_wrapped(
        console,
        "In brackets: variants that are or contain the true one; ruling these out is wrong.",
    )
    print_heading(console, "Files")
    print_wrapped(
        console, f"{out}: size.csv, power.csv, claims.csv, power.tex, figures.", indent="  "
    )


def _print_json(rehearsal: Rehearsal, out: Path) -> None:
    size = rehearsal.size
    record = {
        "event": "rehearsed",
        "out": str(out),
        "ruled_out_though_true": [
            {"design": row["design"], "truth": row["truth"], "rate": row["rate"]}
            for row in size.to_dict("records")
        ],
    }
    print(json.dumps(record), file=sys.stdout, flush=True)
