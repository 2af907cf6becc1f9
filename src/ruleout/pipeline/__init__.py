"""The main path: a case in, a judgement out."""

from __future__ import annotations

import asyncio
from collections.abc import Coroutine
from concurrent.futures import Executor
from contextlib import nullcontext
from pathlib import Path
from typing import Any

from ruleout.case import Case
from ruleout.pipeline.assemble import assemble, save_fits
from ruleout.pipeline.flow import Flow
from ruleout.pipeline.settings import EFFORTS, Effort, Settings
from ruleout.pipeline.variants import Results, judge_variants
from ruleout.pipeline.workers import cluster_workers, local_workers
from ruleout.progress import Progress, Silent
from ruleout.store import Store, locked, save_judgement
from ruleout.verdicts import Judgement

__all__ = ["EFFORTS", "Effort", "Settings", "cluster_workers", "judge"]


def judge(
    case: Case,
    settings: Settings | None = None,
    *,
    out: Path,
    progress: Progress | None = None,
    executor: Executor | None = None,
) -> Judgement:
    """Judge every variant of a case and every claim about it.

    Parameters
    ----------
    case : Case
    settings : Settings, optional
    out : Path
        Run folder: finished pieces are kept there, and a later call goes on from them.
    progress : Progress, optional
    executor : concurrent.futures.Executor, optional
        Where tasks run instead of ``settings.workers`` local processes; it must be able to pickle
        tasks to wherever this package is installed. It is left open.

    Returns
    -------
    Judgement
        Also written to ``out`` as CSV and JSON, with one NetCDF file per fit.

    Raises
    ------
    InputError
        If the case cannot be judged as it stands or ``out`` cannot be used.
    """
    settings = settings or Settings()
    tell = progress or Silent()
    with locked(out):
        store = Store(out)
        with nullcontext(executor) if executor else local_workers(settings.workers) as runner:
            flow = Flow(case, settings, store, runner, tell)
            results = _run(judge_variants(flow))
        store.tell_redone(tell)
        judgement = assemble(case, settings, results)
        save_judgement(judgement, case, out)
        save_fits(case, results, out)
        return judgement


def _run(main: Coroutine[Any, Any, Results]) -> Results:
    """Run ``main``; of a group of failures the first is raised alone."""
    try:
        return asyncio.run(main)
    except BaseExceptionGroup as group:
        first: BaseException = group
        while isinstance(first, BaseExceptionGroup):
            first = first.exceptions[0]
        raise first from None
