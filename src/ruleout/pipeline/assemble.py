"""From results to the judgement's tables and the fits' files."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from ruleout.case import Case
from ruleout.equations import describe
from ruleout.pipeline import tasks
from ruleout.pipeline.failures import NOTEWORTHY, failed_solves
from ruleout.pipeline.settings import Settings
from ruleout.pipeline.variants import Results, kept
from ruleout.store import write_aside
from ruleout.verdicts import COLUMNS, FEW_POINTS, RULED_OUT, Judgement, reason

BAND = (0.05, 0.5, 0.95)


def assemble(case: Case, settings: Settings, results: Results) -> Judgement:
    """Return the judgement of ``results``."""
    bench = tasks.bench_of(case)
    loo = _loo(results)
    equations = {n: describe(bench.posterior(n).model) for n in results.order}
    tables = {
        "variants": [_variant_row(bench, results, n, loo, settings.alpha) for n in results.order],
        "claims": [_claim_row(c) for c in results.claims],
        "checks": [row for n in results.order for row in _check_rows(results, n)],
        "replicates": [row for n in results.order for row in _replicate_rows(results, n)],
        "findings": _finding_rows(bench, results),
    }
    frames = {name: pd.DataFrame(rows, columns=COLUMNS[name]) for name, rows in tables.items()}
    for name in ("curves", "residuals", "parameters", "quantiles"):
        frames[name] = _stacked(results, name)
    return Judgement(**frames, equations=equations, meta=_meta(case, settings, results))


def _stacked(results: Results, table: str) -> pd.DataFrame:
    parts = []
    for name in results.order:
        if name in results.summaries:
            columns = {
                key.split("/")[1]: values
                for key, values in results.summaries[name].items()
                if key.startswith(f"{table}/")
            }
            parts.append(pd.DataFrame({"variant": name, **columns}))
    whole = pd.concat(parts, ignore_index=True) if parts else pd.DataFrame()
    return whole.reindex(columns=list(COLUMNS[table]))


def _loo(results: Results) -> dict[str, tuple[float, float, bool]]:
    """Return difference to the best in expected log density, its error, and whether it is sound."""
    considered = kept(results) or list(results.order)
    found = {
        n: results.likelihoods[n]
        for n in considered
        if n in results.likelihoods and np.isfinite(results.likelihoods[n]["elpd"])
    }
    if not found:
        return {}
    best = max(found, key=lambda n: float(found[n]["elpd"]))
    out = {}
    for name, terms in found.items():
        gap = terms["pointwise"] - found[best]["pointwise"]
        difference = float(terms["elpd"] - found[best]["elpd"])
        error = float(np.sqrt(len(gap) * np.var(gap)))
        out[name] = (difference, error, bool(np.all(terms["pareto_k"] < 0.7)))
    return out


def _flags(
    bench: tasks.Workbench, results: Results, name: str, alpha: float, loo_sound: bool
) -> list[str]:
    fit, verdict = results.fits[name], results.verdicts[name]
    space = bench.posterior(name).space
    flags = []
    if verdict.by_coherence:
        flags.append(f"by coherence: contains {verdict.by_coherence}")
    if not np.isfinite(fit.objective):
        flags.append("no fit found: every solve failed")
    elif fit.agree < 2:
        flags.append("searches disagree")
    if name in results.missed:
        flags.append(f"search fell short: {results.missed[name]}, which it contains, fits better")
    if np.isfinite(fit.objective) and not fit.converged:
        flags.append("chains not converged")
    if np.isfinite(fit.objective) and fit.failed_share > NOTEWORTHY:
        flags.append(f"{100 * fit.failed_share:.2g} % of solves failed")
    if np.isfinite(fit.objective) and space.dimension:
        bound = [n for n, b in zip(space.names, space.on_bound(fit.best, 1e-3), strict=True) if b]
        if bound:
            flags.append(f"best fit on a prior bound: {', '.join(bound)}")
    if bench.posterior(name).fitted.sum() < FEW_POINTS:
        flags.append("few points")
    if name in results.spared:
        flags.append("too few points to rule it out: AICc does not separate it from the others")
    if verdict.alike:
        flags.append(f"not told apart from {', '.join(verdict.alike)} by these readouts")
    checks = results.checks.get(name)
    if checks is not None:
        if checks.tally is None and checks.failed_share == 0.0:
            flags.append("nothing to check: no repeated or serial points and no rival choice")
        elif checks.tally is not None:
            low, high = checks.tally.interval()
            # The draws behind the replicates are a sample too: widen by a quarter for that.
            if low / 1.25 <= alpha <= high * 1.25 or not checks.tally.decided:
                flags.append("borderline")
        if checks.failed_share > 0.05:
            flags.append("replicates could not be solved")
    if not loo_sound:
        flags.append("leave-one-out unreliable")
    return flags


def _variant_row(
    bench: tasks.Workbench,
    results: Results,
    name: str,
    loo: dict[str, tuple[float, float, bool]],
    alpha: float,
) -> dict[str, Any]:
    variant = bench.variants.variants[name]
    fit, verdict = results.fits[name], results.verdicts[name]
    checks = results.checks.get(name)
    posterior = bench.posterior(name)
    difference, error, sound = loo.get(name, (np.nan, np.nan, True))
    decisive, why, held_out = "", "", np.nan
    if checks is not None and checks.decisive is not None:
        if verdict.verdict == RULED_OUT:
            decisive = checks.decisive.check
            why = reason(checks.decisive, checks.columns, checks.observed, checks.replicated)
        held = [j for j, c in enumerate(checks.columns) if c.check == "held_out"]
        if held:
            exceed = checks.replicated[:, held[0]] >= checks.observed[held[0]]
            held_out = (exceed.sum() + 1) / (len(exceed) + 1)
    return {
        "variant": name,
        "edges": ";".join(variant.edges),
        "choices": variant.label,
        "free_parameters": posterior.space.dimension,
        "p_value": verdict.p_value,
        "p_coherent": verdict.p_coherent,
        "held_out_p": held_out,
        "verdict": verdict.verdict,
        "decisive_check": decisive,
        "reason": why,
        "flags": ";".join(_flags(bench, results, name, alpha, sound)),
        "points": int(posterior.fitted.sum()),
        "objective": fit.objective,
        "loo_difference": difference,
        "loo_se": error,
        "rhat_max": float(np.max(fit.diagnostics.rhat, initial=-np.inf))
        if len(fit.diagnostics.rhat)
        else np.nan,
        "ess_min": float(np.min(fit.diagnostics.ess_bulk, initial=np.inf))
        if len(fit.diagnostics.ess_bulk)
        else np.nan,
        "searches_agree": f"{fit.agree} of {fit.starts}",
        "contains": ";".join(sorted(results.contains[name], key=results.order.index)),
        "replicates": checks.tally.replicates if checks is not None and checks.tally else 0,
    }


def _claim_row(found: Any) -> dict[str, Any]:
    return {
        "claim": found.claim.name,
        "text": found.claim.text,
        "verdict": found.verdict,
        "variants_with_kept": ";".join(found.with_kept),
        "variants_without_kept": ";".join(found.without_kept),
        "variants_with": ";".join(found.with_all),
        "variants_without": ";".join(found.without_all),
        "statement": found.statement,
        "also": ";".join(found.claim.also),
        "detectable": "",
    }


def _check_rows(results: Results, name: str) -> list[dict[str, Any]]:
    checks = results.checks.get(name)
    if checks is None or not len(checks.replicated):
        return []
    rows = []
    bands = np.quantile(checks.replicated, BAND, axis=0)
    for j, column in enumerate(checks.columns):
        exceed = int(np.sum(checks.replicated[:, j] >= checks.observed[j]))
        rows.append(
            {
                "variant": name,
                "check": column.check,
                "condition": column.condition,
                "readout": column.readout,
                "observed": checks.observed[j],
                "replicated_median": bands[1, j],
                "band_low": bands[0, j],
                "band_high": bands[2, j],
                "p_value": (exceed + 1) / (len(checks.replicated) + 1),
                "counts_for_verdict": column.counts,
            }
        )
    return rows


def _replicate_rows(results: Results, name: str) -> list[dict[str, Any]]:
    checks = results.checks.get(name)
    if checks is None:
        return []
    return [
        {"variant": name, "check": column.check, "replicate": i, "value": value}
        for j, column in enumerate(checks.columns)
        if column.counts
        for i, value in enumerate(checks.replicated[:999, j])
    ]


def _finding_rows(bench: tasks.Workbench, results: Results) -> list[dict[str, Any]]:
    before = pd.DataFrame(dict(results.findings)).to_dict("records")
    rows = [{str(k): v for k, v in row.items()} for row in before]
    rows += [
        {
            "variant": larger,
            "kind": "nesting",
            "subject": smaller,
            "message": f"{larger} does not count as containing {smaller}: under its priors no "
            "effect of the added choice is out of reach",
            "remedy": "widen the priors of the added strengths or halves if a weak effect is "
            "conceivable",
        }
        for larger, smaller in results.unreachable
    ]
    for name in results.order:
        found = failed_solves(bench.posterior(name), results.fits[name])
        if found is not None:
            row = (name, "failed solves", *found)
            rows.append(dict(zip(COLUMNS["findings"], row, strict=True)))
    return rows


def _meta(case: Case, settings: Settings, results: Results) -> dict[str, Any]:
    import emcee
    import networkx
    import numba
    import scipy

    from ruleout import __version__
    from ruleout.fitting.convergence import arviz_version

    effort = settings.spent
    return {
        "title": case.mechanism.title,
        "time_unit": case.mechanism.time_unit,
        "amount_unit": case.mechanism.amount_unit,
        "alpha": settings.alpha,
        "seed": settings.seed,
        "effort": settings.effort,
        "settings": {
            "rhat": effort.rhat,
            "ess": effort.ess,
            "least_replicates": effort.least_replicates,
            "most_replicates": effort.most_replicates,
            "starts": effort.search.starts,
        },
        "versions": {
            "ruleout": __version__,
            "python": ".".join(map(str, sys.version_info[:3])),
            "numpy": np.__version__,
            "scipy": scipy.__version__,
            "emcee": emcee.__version__,
            "arviz": arviz_version(),
            "networkx": networkx.__version__,
            "numba": numba.__version__,
            "pandas": pd.__version__,
        },
        "inputs": dict(case.hashes),
        "conditions_of_guarantee": [
            f"The chance that any variant containing the truth is ruled out is kept near or below "
            f"{settings.alpha:g} if: the truth is among these variants and inside their priors, "
            "with one minimal true variant; measurement errors are independent and of the stated "
            "family; and the assumptions printed with the equations hold.",
        ],
        "summary": [f"{c.claim.name}: {c.statement}" for c in results.claims],
    }


def save_fits(case: Case, results: Results, folder: Path) -> None:
    """Write one ArviZ file per fit, ``fits/VARIANT.nc``, of at most 1,000 draws."""
    from ruleout.fitting.convergence import save_fit

    bench = tasks.bench_of(case)
    for name, found in results.likelihoods.items():
        posterior = bench.posterior(name)
        draws = posterior.space.natural(found["draws"])
        groups = {
            "posterior": {n: draws[:, :, j] for j, n in enumerate(posterior.space.names)},
            "log_likelihood": {"y": found["log_likelihood"]},
            "posterior_predictive": {"y": found["prediction"]},
            "observed_data": {"y": posterior.observed.z[0]},
        }
        write_aside(folder / "fits" / f"{name}.nc", lambda path, g=groups: save_fit(path, g))  # type: ignore[misc]
