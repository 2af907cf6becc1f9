"""Rehearse a case: simulate from each variant, judge every data set, count."""

from __future__ import annotations

import warnings
from collections.abc import Mapping, Sequence
from concurrent.futures import Executor, Future, as_completed
from contextlib import nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from ruleout.case import Case
from ruleout.errors import InputError, RuleoutError, did_you_mean
from ruleout.pipeline.tasks import Workbench
from ruleout.pipeline.workers import local_workers
from ruleout.progress import Progress, Silent
from ruleout.rehearsal.designs import Design, Variation, designs
from ruleout.rehearsal.judging import Spending, judge_simulated
from ruleout.rehearsal.outcomes import VERDICTS, Arrays, outcome
from ruleout.rehearsal.simulating import simulate
from ruleout.rehearsal.tables import claim_rows, power_rows, size_row
from ruleout.rehearsal.truths import Fitted, Values, check_stated, draw_truth
from ruleout.rehearsal.types import COLUMNS, Rehearsal
from ruleout.seeds import generator, sequence
from ruleout.store import Store, digest, locked
from ruleout.variants import VariantSet
from ruleout.verdicts import CLAIM_VERDICTS, NOT_JUDGED

MOST_DATA_SETS = 100_000


@dataclass(frozen=True, slots=True, eq=False)
class Task:
    """One data set to simulate and judge.

    Attributes
    ----------
    design : Design
    truth : str
        The true variant.
    values : mapping of parameter to float
        Its parameters.
    best : mapping of variant to mapping
        Best fits of real data, more starts for the searches.
    number : int
    settings : Spending
    """

    design: Design
    truth: str
    values: Values
    best: Mapping[str, Values]
    number: int
    settings: Spending


def rehearse(
    case: Case,
    settings: Spending | None = None,
    *,
    out: Path,
    truths: Sequence[str] = (),
    data_sets: int = 50,
    variation: Variation | None = None,
    run: Fitted | None = None,
    progress: Progress | None = None,
    executor: Executor | None = None,
) -> Rehearsal:
    """Tell what a case's experiments could rule out, and how often by mistake.

    From every true variant data sets are simulated, with the case's conditions, times, readouts
    and noise, and judged by the pipeline itself, the best fit standing for the posterior draws.

    Parameters
    ----------
    case : Case
        With data or with a plan.
    settings : Spending, optional
    out : Path
        Folder where judged data sets are kept; a later call goes on from them.
    truths : sequence of str, optional
        Variants to simulate from; all by default.
    data_sets : int
        Per design and true variant.
    variation : Variation, optional
        Further designs to rehearse beside the case's own.
    run : Fitted, optional
        Of the judged case: its posterior draws are the truths. Without it they are drawn from the
        priors, or stated in ``[plan.truth]``.
    progress : Progress, optional
    executor : concurrent.futures.Executor, optional
        Where data sets are judged instead of ``settings.workers`` local processes.

    Returns
    -------
    Rehearsal

    Raises
    ------
    InputError
        If the case cannot be rehearsed as it stands.
    """
    settings = settings or Spending()
    if not 1 <= data_sets <= MOST_DATA_SETS:
        raise InputError(f"{data_sets} data sets were asked for; give 1 to {MOST_DATA_SETS}")
    found = designs(case, variation)
    bench = Workbench(found[0].case)
    variants = bench.variants
    chosen = _chosen(truths, variants, run)
    check_stated(case, bench)
    tell = progress or Silent()
    results: dict[tuple[str, str, int], Arrays] = {}
    with (
        locked(out),
        nullcontext(executor) if executor else local_workers(settings.workers) as runner,
    ):
        store = Store(out)
        waiting: dict[Future[Arrays], tuple[str, str, tuple[str, str, int]]] = {}
        for truth in chosen:
            tell.start(_step(truth), data_sets * len(found))
        try:
            for number in range(data_sets):
                for truth in chosen:
                    values = draw_truth(
                        case, bench.posterior(truth), truth, number, settings.seed, run
                    )
                    for design in found:
                        task = _task(design, truth, values, run, number, settings)
                        identity = (design.name, truth, number)
                        key = f"{design.name}/{truth}-{number:05d}"
                        fingerprint = _fingerprint(case, task)
                        piece = store.get(key, fingerprint)
                        if piece is None:
                            future = runner.submit(judge_one, task)
                            waiting[future] = (key, fingerprint, identity)
                        else:
                            results[identity] = piece
                            tell.advance(_step(truth))
            for future in as_completed(waiting):
                key, fingerprint, identity = waiting[future]
                results[identity] = future.result()
                store.put(key, fingerprint, results[identity])
                tell.advance(_step(identity[1]))
        finally:
            for future in waiting:
                future.cancel()
        for truth in chosen:
            tell.finish(_step(truth))
        store.tell_redone(tell)
    counts = _tables(variants, found, chosen, data_sets, results)
    meta = _meta(case, settings, found, data_sets, variation, run)
    return Rehearsal(**counts, meta=meta)


def _step(truth: str) -> str:
    return f"{truth} true"


def _chosen(truths: Sequence[str], variants: VariantSet, run: Fitted | None) -> tuple[str, ...]:
    for name in truths:
        if name not in variants.variants:
            raise InputError(
                f"'{name}' is no variant{did_you_mean(name, variants.variants)}; "
                "'ruleout inspect' lists them",
                where="--truth",
            )
        if run is not None and name not in run.draws:
            raise InputError(
                f"'{name}' was not fitted in this run, so nothing tells its parameters",
                where="--truth",
            )
    wanted = set(truths) or set(variants.variants)
    return tuple(
        name for name in variants.variants if name in wanted and (run is None or name in run.draws)
    )


def _task(
    design: Design,
    truth: str,
    values: Values,
    run: Fitted | None,
    number: int,
    settings: Spending,
) -> Task:
    # The same truth and the same searches in all designs: they are compared on common grounds.
    child = int(sequence(settings.seed, truth, "data set", number).generate_state(1)[0])
    own = Spending(seed=child, effort=settings.effort, alpha=settings.alpha)
    return Task(design, truth, values, run.best if run else {}, number, own)


def _fingerprint(case: Case, task: Task) -> str:
    from ruleout import __version__

    data = task.design.case.experiments.data
    assert data is not None
    return digest(
        __version__,
        sorted(case.hashes.items()),
        data.to_csv(),
        task.design.sd.tolist(),
        task.design.noise,
        task.truth,
        sorted(task.values.items()),
        sorted((name, sorted(best.items())) for name, best in task.best.items()),
        task.settings,
    )


_benches: dict[str, Workbench] = {}


def _bench_of(design: Design) -> Workbench:
    """Return this process's workbench for a design, kept while the same case is rehearsed."""
    data = design.case.experiments.data
    assert data is not None
    key = digest(sorted(design.case.hashes.items()), data.to_csv())
    if key not in _benches:
        if len(_benches) >= 16:
            _benches.clear()
        _benches[key] = Workbench(design.case)
    return _benches[key]


def judge_one(task: Task) -> Arrays:
    """Simulate and judge one data set; a truth that cannot be solved leaves nothing judged."""
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        design, bench = task.design, _bench_of(task.design)
        try:
            simulated = simulate(
                design.case,
                bench.posterior(task.truth),
                task.values,
                generator(task.settings.seed, "data"),
                design.sd,
                design.noise,
            )
        except RuleoutError:
            return _nothing(bench.variants)
        known = {
            name: (task.values, *([task.best[name]] if name in task.best else []))
            for name in bench.variants.variants
        }
        return outcome(judge_simulated(simulated, task.settings, known))


def _nothing(variants: VariantSet) -> Arrays:
    v, c = len(variants.variants), len(variants.claims)
    return {
        "verdict": np.full(v, VERDICTS.index(NOT_JUDGED), dtype=np.int8),
        "p_value": np.full(v, np.nan),
        "claim": np.full(c, CLAIM_VERDICTS.index("undecided"), dtype=np.int8),
        "contains": np.zeros((v, v), dtype=bool),
    }


def _tables(
    variants: VariantSet,
    found: Sequence[Design],
    chosen: Sequence[str],
    data_sets: int,
    results: Mapping[tuple[str, str, int], Arrays],
) -> dict[str, pd.DataFrame]:
    rows: dict[str, list[dict[str, Any]]] = {name: [] for name in COLUMNS}
    for design in found:
        for truth in chosen:
            pieces = [results[design.name, truth, i] for i in range(data_sets)]
            verdict = np.stack([p["verdict"] for p in pieces]).astype(np.int8)
            claim = np.stack([p["claim"] for p in pieces]).astype(np.int8)
            contains = np.stack([p["contains"] for p in pieces]).astype(bool)
            rows["size"].append(size_row(design.name, variants, truth, verdict, claim, contains))
            rows["power"] += power_rows(design.name, variants, truth, verdict)
            rows["claims"] += claim_rows(design.name, variants, truth, claim)
    return {name: pd.DataFrame(rows[name], columns=list(COLUMNS[name])) for name in COLUMNS}


def _meta(
    case: Case,
    settings: Spending,
    found: Sequence[Design],
    data_sets: int,
    variation: Variation | None,
    run: Fitted | None,
) -> dict[str, Any]:
    from ruleout import __version__

    plan = case.experiments.plan
    stated = bool(plan is not None and plan.truth)
    source = "posterior" if run else "plan and priors" if stated else "priors"
    return {
        "title": case.mechanism.title,
        "alpha": settings.alpha,
        "seed": settings.seed,
        "effort": settings.effort,
        "replicates_per_check": settings.spent.most_replicates,
        "data_sets": data_sets,
        "designs": [design.name for design in found],
        "varied": variation.what if variation else "",
        "truths_from": source,
        "versions": {"ruleout": __version__, "numpy": np.__version__},
        "inputs": dict(case.hashes),
    }
