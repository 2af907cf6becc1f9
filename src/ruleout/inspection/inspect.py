"""The findings of a case before anything is fitted."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import astuple, dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.equations import describe, unit_ties
from ruleout.inspection.behaviour import behaviour_findings
from ruleout.inspection.design import design_findings, parameter_findings
from ruleout.inspection.foresight import foresee, foresight_findings, foresight_table
from ruleout.inspection.matching import can_imitate, choice_pairs
from ruleout.inspection.probe import Probe, make_probe
from ruleout.inspection.sensitivity import (
    Sensitivities,
    find_rank,
    sensitivities,
    sensitivity_findings,
)
from ruleout.inspection.types import FINDING_COLUMNS, Finding, Inspection
from ruleout.seeds import generator
from ruleout.variants import VariantSet, expand

Array = NDArray[np.float64]
ALL_DRAWS, FEWEST_DRAWS, MOST_DRAWS = 6_000, 24, 200
"""Prior draws over all variants, and per variant at least and at most."""
ALL_POINTS, FEWEST_POINTS, MOST_POINTS = 1024, 9, 25
"""Points at which sensitivities are taken, likewise."""
MOST_PAIRS = 40
"""Pairs of variants that are matched against each other."""
MATCHING_DRAWS = 32


@dataclass(frozen=True, slots=True, eq=False)
class _Look:
    """What was seen of one variant."""

    findings: tuple[Finding, ...]
    sensitivities: pd.DataFrame
    identifiability: pd.DataFrame
    prior_predictive: pd.DataFrame


def inspect_case(case: Case, seed: int = 1) -> Inspection:
    """Look at every variant of a case before anything is fitted.

    Parameters
    ----------
    case : Case
        With data, or with a plan of what will be measured; without either, only what the graph
        alone tells is found.
    seed : int
        Root of the prior draws.

    Returns
    -------
    Inspection

    Notes
    -----
    The work is bounded: with many variants each gets fewer prior draws (at least 24 of 200).
    """
    mechanism, experiments = case.mechanism, case.experiments
    variants = expand(mechanism, experiments)
    ties, sentences = unit_ties(variants, experiments)
    probes = {
        name: make_probe(variant, mechanism, experiments, ties)
        for name, variant in variants.variants.items()
    }
    findings = list(design_findings(variants, experiments, sentences))
    with np.errstate(all="ignore"):
        looks = [_look(probe, len(probes), seed) for probe in probes.values()]
        findings += [finding for look in looks for finding in look.findings]
        findings += _choice_findings(variants, probes, seed)
    return Inspection(
        variants=variants,
        equations={name: describe(probe.model) for name, probe in probes.items()},
        findings=pd.DataFrame(
            [astuple(f) for f in _merged(findings, tuple(probes))], columns=list(FINDING_COLUMNS)
        ),
        sensitivities=pd.concat([look.sensitivities for look in looks], ignore_index=True),
        identifiability=pd.concat([look.identifiability for look in looks], ignore_index=True),
        prior_predictive=pd.concat([look.prior_predictive for look in looks], ignore_index=True),
    )


def _share(total: int, variants: int, least: int, most: int) -> int:
    return int(np.clip(total // variants, least, most))


def _look(probe: Probe, variants: int, seed: int) -> _Look:
    name = probe.variant.name
    findings: list[Finding] = []
    q = probe.draws(
        _share(ALL_DRAWS, variants, FEWEST_DRAWS, MOST_DRAWS),
        generator(seed, name, "inspection draws"),
    )
    points = _share(ALL_POINTS, variants, FEWEST_POINTS, MOST_POINTS)
    median = probe.catalogue.space.quantile(np.full((1, probe.catalogue.space.dimension), 0.5))
    found = sensitivities(probe, np.concatenate([median, q[: points - 1]]))
    rank = find_rank(found)
    foresight = None
    if len(probe.points):
        findings += parameter_findings(probe)
        findings += behaviour_findings(probe, q, generator(seed, name, "inspection starts"))
        findings += sensitivity_findings(probe, found, rank)
        foresight = foresee(probe, q, generator(seed, name, "inspection noise"))
        if foresight is not None:
            findings += foresight_findings(probe, foresight)
    counts = {
        "variant": name,
        "free_parameters": len(found.parameters),
        "insensitive": int(np.sum(~found.moving)),
        "rank": rank.rank,
        "points": int(probe.points.fitted.sum()),
    }
    return _Look(
        tuple(findings),
        _sensitivity_table(name, found),
        pd.DataFrame([counts]),
        foresight_table(probe, foresight),
    )


def _sensitivity_table(variant: str, found: Sensitivities) -> pd.DataFrame:
    columns = ("variant", "parameter", "readout", "at_median", "typical", "largest")
    rows = [
        (variant, parameter, readout, values[0], np.median(values), values.max())
        for j, parameter in enumerate(found.parameters)
        for r, readout in enumerate(found.readouts)
        if len(values := found.table[:, r, j])
    ]
    return pd.DataFrame(rows, columns=list(columns))


def _choice_findings(
    variants: VariantSet, probes: Mapping[str, Probe], seed: int
) -> Iterator[Finding]:
    """Yield a finding for every choice that variants without it can imitate."""
    for choice, pairs in choice_pairs(variants.neighbours, MOST_PAIRS).items():
        imitated = [
            having
            for without, having in pairs
            if can_imitate(
                probes[without],
                probes[having],
                probes[having].draws(MATCHING_DRAWS, generator(seed, having, "imitation")),
            )
        ]
        everywhere = len(imitated) == len(pairs)
        for name in dict.fromkeys("" if everywhere else having for having in imitated):
            yield Finding(
                name,
                "indistinguishable",
                choice,
                f"Where {choice} matters under the priors, a variant without it can draw the same "
                "curves: these readouts hardly tell whether it is there.",
                "Measure another node, or perturb its source; changed rates make up for it here.",
            )


def _merged(findings: Sequence[Finding], names: tuple[str, ...]) -> list[Finding]:
    """Return the findings, what concerns every variant once and first."""
    seen_in: dict[Finding, set[str]] = {}
    for finding in findings:
        seen_in.setdefault(replace(finding, variant=""), set()).add(finding.variant)
    general = {f for f, where in seen_in.items() if "" in where or where >= set(names)}
    own = [f for f in dict.fromkeys(findings) if replace(f, variant="") not in general]
    return [f for f in seen_in if f in general] + own
