"""All variants together: fits side by side, checks from the smallest up, claims at the end."""

from __future__ import annotations

import asyncio
import math
from dataclasses import dataclass, fields, replace
from itertools import combinations

import numpy as np

from ruleout.fitting.search import AGREEMENT
from ruleout.pipeline import tasks
from ruleout.pipeline.flow import Checks, Fit, Flow
from ruleout.pipeline.tasks import Arrays
from ruleout.store import digest
from ruleout.verdicts import (
    FEW_POINTS,
    KEPT,
    ClaimVerdict,
    Own,
    Verdict,
    corrected_aic,
    judge_claim,
    separated,
    settle,
)

REACHABLE_SHARE = 0.025
"""No-effect counts as reachable in at least this share of the larger variant's own prior."""
FAILED_REPLICATES = 0.05
LOO_DRAWS, SAVED_DRAWS = 1000, 250
"""Draws per ensemble for leave-one-out, and in the fit's file."""
MATCH_OBJECTIVE = 1.0
"""Only variants whose objectives differ by less are compared curve by curve."""


@dataclass(frozen=True, slots=True, eq=False)
class Settled:
    """The verdicts on the variants and claims of a case, and what they rest on.

    Attributes
    ----------
    fits, own, verdicts : mappings by variant
    checks : mapping by variant
        Missing where coherence made them unnecessary or the fit could not be used.
    contains : mapping
        The nesting confirmed by the reach of no-effect.
    unreachable : tuple of pairs
        (larger, smaller) of candidate nestings that failed that test.
    spared : frozenset
        Variants not ruled out for want of points, whatever their p-value.
    missed : mapping
        Variants whose search fell short of one that they contain, and which that is.
    """

    order: tuple[str, ...]
    fits: dict[str, Fit]
    checks: dict[str, Checks]
    own: dict[str, Own]
    verdicts: dict[str, Verdict]
    contains: dict[str, frozenset[str]]
    unreachable: tuple[tuple[str, str], ...]
    claims: tuple[ClaimVerdict, ...]
    spared: frozenset[str]
    missed: dict[str, str]


@dataclass(frozen=True, slots=True, eq=False)
class Results(Settled):
    """Everything found about the variants of a case.

    Attributes
    ----------
    summaries, likelihoods : mappings by variant
    findings : mapping
        What looking at the case before fitting has found.
    """

    summaries: dict[str, Arrays]
    likelihoods: dict[str, Arrays]
    findings: Arrays


async def judge_variants(flow: Flow) -> Results:
    """Look at the case, fit and check all variants, settle the claims and sum up the fits."""
    async with asyncio.TaskGroup() as group:
        looking = group.create_task(
            flow.piece("inspection", flow.whole, tasks.inspect, flow.settings.seed)
        )
        settling = group.create_task(settle_variants(flow))
    settled = settling.result()
    return Results(
        **{part.name: getattr(settled, part.name) for part in fields(settled)},
        summaries=await _each(flow, settled.fits, _summary),
        likelihoods=await _each(flow, settled.fits, _likelihood),
        findings=looking.result(),
    )


async def settle_variants(flow: Flow) -> Settled:
    """Fit and check all variants and settle the claims."""
    variants = flow.bench.variants
    order = tuple(variants.variants)
    for name in order:
        flow.progress.start(name, 1 + flow.settings.spent.most_blocks)
    fits: dict[str, asyncio.Task[Fit]] = {}
    verdict_ready: dict[str, asyncio.Task[bool]] = {}
    checks: dict[str, Checks] = {}
    own: dict[str, Own] = {}
    confirmed: dict[str, set[str]] = {name: set() for name in order}
    unreachable: list[tuple[str, str]] = []

    async def keeps(name: str) -> bool:
        """Judge one variant; whether it, or something it contains, is kept."""
        fit = await fits[name]
        smaller = sorted(variants.contains[name], key=order.index)
        kept_below = await asyncio.gather(*(verdict_ready[s] for s in smaller))
        smaller_fits = await asyncio.gather(*(fits[s] for s in smaller))
        shares = await asyncio.gather(
            *(_share(flow, name, s, f) for s, f in zip(smaller, smaller_fits, strict=True))
        )
        for s, share in zip(smaller, shares, strict=True):
            if share >= REACHABLE_SHARE:
                confirmed[name].add(s)
            else:
                unreachable.append((name, s))
        by_coherence = any(
            k and s in confirmed[name] for s, k in zip(smaller, kept_below, strict=True)
        )
        if not fit.trusted:
            own[name] = Own(judged=False)
        elif by_coherence and not flow.settings.spent.check_all:
            own[name] = Own(judged=True)
        else:
            own[name], checks[name] = await _own_outcome(flow, name, fit)
        flow.progress.finish(name)
        kept = own[name].judged and not own[name].rejected
        return kept or by_coherence

    async with asyncio.TaskGroup() as group:
        for name in order:
            fits[name] = group.create_task(flow.fit(name))
        for name in order:
            verdict_ready[name] = group.create_task(keeps(name))
    done = {name: task.result() for name, task in fits.items()}
    contains = _transitive(order, confirmed)
    missed = _missed(flow, done, contains)
    for name in missed:
        if own[name].rejected:
            own[name] = Own(judged=False)
    spared = _spared(flow, done, own)
    for name in spared:
        own[name] = replace(own[name], rejected=False)
    alike = await _alike(flow, order, done, contains, own)
    verdicts = settle(order, contains, own, alike)
    plain = {name: v.verdict for name, v in verdicts.items()}
    claims = tuple(judge_claim(c, order, plain, contains) for c in variants.claims)
    return Settled(
        order,
        done,
        checks,
        own,
        verdicts,
        contains,
        tuple(sorted(unreachable)),
        claims,
        spared,
        missed,
    )


def _missed(
    flow: Flow, fits: dict[str, Fit], contains: dict[str, frozenset[str]]
) -> dict[str, str]:
    """Return variants that fit worse than one they contain, by more than priors can explain.

    With its further parameters at no effect a larger variant fits as well as the smaller one, less
    what their priors say against that: some 4 each, two standard deviations.
    """
    missed = {}
    for name, smaller in contains.items():
        for s in sorted(smaller):
            further = (
                flow.bench.posterior(name).space.dimension - flow.bench.posterior(s).space.dimension
            )
            if fits[name].objective > fits[s].objective + AGREEMENT + 4.0 * further:
                missed[name] = s
    return missed


def _spared(flow: Flow, fits: dict[str, Fit], own: dict[str, Own]) -> frozenset[str]:
    """Return variants that too few points of free noise do not suffice to rule out."""
    criteria = {}
    for name, fit in fits.items():
        posterior = flow.bench.posterior(name)
        points = int(posterior.fitted.sum())
        if points >= FEW_POINTS or posterior.noise.known.all():
            return frozenset()
        if own[name].judged:
            loglik = -0.5 * (fit.objective - float(posterior.space.penalty(fit.best)))
            criteria[name] = corrected_aic(loglik, posterior.space.dimension, points)
    return frozenset(
        name for name in criteria if own[name].rejected and not separated(name, criteria)
    )


async def _own_outcome(flow: Flow, name: str, fit: Fit) -> tuple[Own, Checks]:
    found = await flow.check(name, fit)
    if found.failed_share > FAILED_REPLICATES:
        return Own(judged=False), found
    if found.tally is None:
        return Own(judged=True), found
    p = found.tally.p_value
    return Own(True, p, p <= flow.settings.alpha), found


async def _share(flow: Flow, larger: str, smaller: str, fit: Fit) -> float:
    if not np.isfinite(fit.objective):
        return 1.0
    fingerprint = digest(flow.fingerprint(larger), flow.fingerprint(smaller))
    key = f"{larger}/contains-{smaller}"
    found = await flow.piece(key, fingerprint, tasks.reachable, larger, smaller, fit.best)
    return float(found["share"])


def _transitive(
    order: tuple[str, ...], confirmed: dict[str, set[str]]
) -> dict[str, frozenset[str]]:
    closed: dict[str, frozenset[str]] = {}
    for name in order:
        below = set(confirmed[name])
        for s in confirmed[name]:
            below |= closed[s]
        closed[name] = frozenset(below)
    return closed


async def _alike(
    flow: Flow,
    order: tuple[str, ...],
    fits: dict[str, Fit],
    contains: dict[str, frozenset[str]],
    own: dict[str, Own],
) -> list[tuple[str, str]]:
    """Return pairs, neither within the other, whose best-fit curves cannot be told apart."""
    candidates = [
        (a, b)
        for a, b in combinations(order, 2)
        if a not in contains[b]
        and b not in contains[a]
        and not math.isnan(own[a].p_value)
        and not math.isnan(own[b].p_value)
        and abs(fits[a].objective - fits[b].objective) < MATCH_OBJECTIVE
    ]
    gaps = await asyncio.gather(
        *(flow.run(tasks.match, a, fits[a].best, b, fits[b].best) for a, b in candidates)
    )
    return [pair for pair, g in zip(candidates, gaps, strict=True) if float(g["gap"]) < tasks.REACH]


async def _each(flow: Flow, fits: dict[str, Fit], make) -> dict[str, Arrays]:  # type: ignore[no-untyped-def]
    usable = [name for name, fit in fits.items() if fit.chains.shape[1]]
    made = await asyncio.gather(*(make(flow, name, fits[name]) for name in usable))
    return dict(zip(usable, made, strict=True))


async def _summary(flow: Flow, name: str, fit: Fit) -> Arrays:
    from ruleout.seeds import generator

    draws = fit.draws(generator(flow.settings.seed, name, "summary draws"), 4000)
    diagnostics = {
        "rhat": fit.diagnostics.rhat,
        "ess_bulk": fit.diagnostics.ess_bulk,
        "ess_tail": fit.diagnostics.ess_tail,
    }
    return await flow.piece(
        f"{name}/summary",
        flow.fingerprint(name),
        tasks.summarise_fit,
        name,
        fit.best,
        draws,
        diagnostics,
    )


async def _likelihood(flow: Flow, name: str, fit: Fit) -> Arrays:
    e, s, w, d = fit.chains.shape
    flat = fit.chains.reshape(e, s * w, d)
    each = np.random.default_rng(0).permutation(s * w)[:LOO_DRAWS]
    return await flow.piece(
        f"{name}/likelihood",
        flow.fingerprint(name),
        tasks.likelihood,
        name,
        flat[:, each],
        SAVED_DRAWS,
    )


def kept(results: Results) -> list[str]:
    """Return the variants that are kept, in order."""
    return [n for n in results.order if results.verdicts[n].verdict == KEPT]
