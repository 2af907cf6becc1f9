"""``ruleout judge``."""

from __future__ import annotations

import json
import os
import sys
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING

from ruleout.cli.progress import shown_progress
from ruleout.errors import InputError

if TYPE_CHECKING:
    from ruleout.case import Case
    from ruleout.pipeline import Settings
    from ruleout.progress import Progress
    from ruleout.verdicts import Judgement

THOROUGH = "thorough"
NOT_FULLY_JUDGED = 3


def cores() -> int:
    """Return the number of cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def check_out(out: Path) -> None:
    """Make the run folder now, so that an hour's work is not lost to a wrong path."""
    try:
        out.mkdir(parents=True, exist_ok=True)
        writable = os.access(out, os.W_OK | os.X_OK)
    except OSError as error:
        raise InputError(
            f"this folder cannot be made ({error.strerror}); give another one with --out",
            where=str(out),
        ) from error
    if not writable:
        raise InputError(
            "this folder cannot be written; give another one with --out", where=str(out)
        )


def check_alpha(alpha: float) -> None:
    """Raise InputError unless ``alpha`` can be an error rate."""
    if not 0 < alpha < 0.5:
        raise InputError(f"--alpha {alpha:g}: give a chance between 0 and 0.5, such as 0.05")


def run_judge(
    folder: Path,
    *,
    out: Path,
    seed: int,
    workers: int | None,
    effort: str,
    alpha: float,
    as_json: bool,
    scheduler: str | None = None,
) -> int:
    """Judge the case in ``folder``, write everything into ``out`` and print the table.

    Returns
    -------
    int
        0, or 3 where some variant could not be judged.
    """
    check_alpha(alpha)
    from ruleout.case import read_case

    case = read_case(folder)
    check_out(out)
    from ruleout.pipeline import Settings, cluster_workers, judge
    from ruleout.report import write_report
    from ruleout.store import locked

    settings = Settings(seed=seed, effort=effort, alpha=alpha, workers=workers or cores())
    with (
        locked(out),
        shown_progress(as_json=as_json) as progress,
        cluster_workers(scheduler) if scheduler else nullcontext() as executor,
    ):
        judgement = judge(case, settings, out=out, progress=progress, executor=executor)
        if effort == THOROUGH:
            judgement = _with_chances(case, judgement, settings, out, progress)
        write_report(judgement, case, out, progress=progress)
    if as_json:
        _print_json(judgement, out)
    else:
        from rich.console import Console

        from ruleout.cli.terminal import print_heading, print_judgement, print_wrapped
        from ruleout.report.words import DOSING_CAUTION, looks_like_dosing

        console = Console()
        print_judgement(console, judgement)
        if looks_like_dosing(case.experiments):
            print_wrapped(console, DOSING_CAUTION)
        print_heading(console, "Files")
        print_wrapped(console, f"{out / 'report.html'}: open it in a browser.", indent="  ")
        print_wrapped(
            console,
            f"{out}: tables (variants, claims, checks), figures, fits, table.tex, methods.txt.",
            indent="  ",
        )
    return 0 if judgement.fully_judged else NOT_FULLY_JUDGED


def _with_chances(
    case: Case, judgement: Judgement, settings: Settings, out: Path, progress: Progress
) -> Judgement:
    """Add to every `not_needed` the chance that it could have been seen, and save the tables."""
    from ruleout.rehearsal import Spending, chances_seen
    from ruleout.store import save_judgement

    spending = Spending(
        seed=settings.seed, effort="quick", alpha=settings.alpha, workers=settings.workers
    )
    judgement = chances_seen(case, judgement, spending, out=out, progress=progress)
    save_judgement(judgement, case, out)
    return judgement


def _print_json(judgement: object, out: Path) -> None:
    variants, claims = judgement.variants, judgement.claims  # type: ignore[attr-defined]
    record = {
        "event": "judged",
        "out": str(out),
        "variants": dict(zip(variants["variant"], variants["verdict"], strict=True)),
        "claims": dict(zip(claims["claim"], claims["verdict"], strict=True)),
    }
    print(json.dumps(record), file=sys.stdout, flush=True)
