"""``methods.txt``: a paragraph for a paper, with the numbers and references of this very run."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable
from typing import Final

import numpy as np
import pandas as pd

from ruleout.case import Case
from ruleout.report.picture import contested_names
from ruleout.report.words import number_text
from ruleout.verdicts.types import Judgement

REFERENCES: Final = {
    "berger": "Berger RL (1982). Multiparameter hypothesis testing and acceptance sampling. "
    "Technometrics 24, 295-300. doi:10.1080/00401706.1982.10487790",
    "besag": "Besag J, Clifford P (1991). Sequential Monte Carlo p-values. Biometrika 78, 301-304. "
    "doi:10.1093/biomet/78.2.301",
    "emcee": "Foreman-Mackey D, Hogg DW, Lang D, Goodman J (2013). emcee: The MCMC Hammer. "
    "Publications of the Astronomical Society of the Pacific 125, 306-312. doi:10.1086/670067",
    "finner": "Finner H, Strassburger K (2002). The partitioning principle: a powerful tool in "
    "multiple decision theory. Annals of Statistics 30, 1194-1213. doi:10.1214/aos/1031689023",
    "gandy": "Gandy A (2009). Sequential implementation of Monte Carlo tests with uniformly "
    "bounded resampling risk. Journal of the American Statistical Association 104, 1504-1511. "
    "doi:10.1198/jasa.2009.tm08368",
    "gelman": "Gelman A, Meng X-L, Stern H (1996). Posterior predictive assessment of model "
    "fitness via realized discrepancies. Statistica Sinica 6, 733-807.",
    "loo": "Vehtari A, Gelman A, Gabry J (2017). Practical Bayesian model evaluation using "
    "leave-one-out cross-validation and WAIC. Statistics and Computing 27, 1413-1432. "
    "doi:10.1007/s11222-016-9696-4",
    "rhat": "Vehtari A, Gelman A, Simpson D, Carpenter B, Bürkner P-C (2021). Rank-normalization, "
    "folding, and localization: an improved R-hat for assessing convergence of MCMC. Bayesian "
    "Analysis 16, 667-718. doi:10.1214/20-BA1221",
    "rosenbrock": "Steinebach G (2023). Construction of Rosenbrock-Wanner method Rodas5P and "
    "numerical benchmarks within the Julia Differential Equations package. BIT Numerical "
    "Mathematics 63, 27. doi:10.1007/s10543-023-00967-x",
    "terbraak": "ter Braak CJF (2006). A Markov chain Monte Carlo version of the genetic algorithm "
    "Differential Evolution: easy Bayesian computing for real parameter spaces. Statistics and "
    "Computing 16, 239-249. doi:10.1007/s11222-006-8769-1",
    "tsitouras": "Tsitouras C (2011). Runge-Kutta pairs of order 5(4) satisfying only the first "
    "column simplifying assumption. Computers and Mathematics with Applications 62, 770-775. "
    "doi:10.1016/j.camwa.2011.06.002",
    "westfall": "Westfall PH, Young SS (1993). Resampling-Based Multiple Testing: Examples and "
    "Methods for p-Value Adjustment. Wiley, New York. ISBN 978-0-471-55761-6",
}


def methods_text(judgement: Judgement, case: Case) -> str:
    """Return a paragraph on what was done in this run, and the works it cites."""
    citations = _Citations()
    sentences = [
        *_about_variants(judgement, case),
        *_about_fits(judgement, citations),
        *_about_checks(judgement, citations),
        *_about_verdicts(judgement, citations),
    ]
    paragraph = textwrap.fill(" ".join(sentences), 98, break_on_hyphens=False)
    listed = "\n".join(
        textwrap.fill(
            f"[{i}] {REFERENCES[key]}",
            98,
            subsequent_indent="    ",
            break_on_hyphens=False,
            break_long_words=False,
        )
        for i, key in enumerate(citations.keys, 1)
    )
    return f"{paragraph}\n\nReferences\n{listed}\n"


class _Citations:
    """Numbers works in the order in which they are first cited."""

    def __init__(self) -> None:
        self.keys: list[str] = []

    def __call__(self, *keys: str) -> str:
        self.keys += [key for key in keys if key not in self.keys]
        return "[" + ", ".join(str(self.keys.index(key) + 1) for key in keys) + "]"


def _count(number: int, noun: str, plural: str = "") -> str:
    return f"{number} {noun if number == 1 else plural or noun + 's'}"


def _range(values: pd.Series, text: str = "{:g}") -> str:
    low, high = text.format(values.min()), text.format(values.max())
    return low if low == high else f"{low} to {high}"


def _listed(names: Iterable[str]) -> str:
    *first, last = names
    return f"{', '.join(first)} and {last}" if first else last


def _about_variants(judgement: Judgement, case: Case) -> list[str]:
    contested = contested_names(case.mechanism)
    variants = judgement.variants
    parameters = variants["free_parameters"]
    data = judgement.residuals[judgement.residuals["variant"] == variants["variant"].iloc[0]]
    what = (
        f"whose contested parts ({_listed(contested)}) allow {_count(len(variants), 'wiring')}"
        if contested
        else "with nothing contested"
    )
    sentences = [
        f"The mechanism '{judgement.meta['title']}' was written as one interaction graph "
        f"{what}; each wiring was turned into ordinary differential equations with "
        f"{_range(parameters)} free parameters.",
    ]
    if len(data):
        held = int(data["held_out"].astype(bool).sum())
        sentences.append(
            f"The data were {_count(len(data) - held, 'value')} of "
            f"{_count(data['readout'].nunique(), 'readout')} in "
            f"{_count(data['condition'].nunique(), 'condition')}"
            + (f", and {held} more were held out and never fitted." if held else ".")
        )
    return sentences


def _about_fits(judgement: Judgement, cite: _Citations) -> list[str]:
    meta, variants = judgement.meta, judgement.variants
    fitted = variants[np.isfinite(variants["rhat_max"].astype(float))]
    versions = meta["versions"]
    sentences = [
        "Equations were integrated by a fifth-order explicit Runge-Kutta pair "
        f"{cite('tsitouras')}, with hand-over to a Rosenbrock method where stiff "
        f"{cite('rosenbrock')}.",
        f"Each wiring was fitted from at least {meta['settings']['starts']} scattered starts and "
        f"sampled by Markov chain Monte Carlo with emcee {versions['emcee']} {cite('emcee')} using "
        f"differential-evolution moves {cite('terbraak')} in independent ensembles, until the "
        f"rank-normalised R-hat {cite('rhat')} across ensembles was below "
        f"{meta['settings']['rhat']:g} and bulk and tail effective sample sizes were at least "
        f"{meta['settings']['ess']:g}.",
    ]
    if len(fitted):
        sentences.append(
            f"The largest R-hat reached was {fitted['rhat_max'].max():.3f}, the smallest effective "
            f"sample size {number_text(float(fitted['ess_min'].min()))}."
        )
    return sentences


def _about_checks(judgement: Judgement, cite: _Citations) -> list[str]:
    counted = judgement.checks[judgement.checks["counts_for_verdict"].astype(bool)]
    kinds = set(counted["check"].str.split(":").str[0])
    names = {
        "misfit": "the size of the residuals",
        "serial": "the serial correlation of the residuals",
        "edge": "scores for each contested choice that a neighbouring wiring has",
    }
    used = _listed([words for kind, words in names.items() if kind in kinds] or ["none"])
    replicates = judgement.variants["replicates"]
    checked = replicates[replicates > 0]
    sentences = [
        "Wirings were judged by posterior predictive checks "
        f"{cite('gelman')} calibrated by refitting every replicated data set; the statistics were "
        f"{used}, combined by the largest standardised one {cite('westfall')}.",
    ]
    if len(checked):
        sentences.append(
            f"Between {checked.min()} and {checked.max()} replicates per checked wiring were "
            f"drawn, stopping sequentially {cite('besag', 'gandy')}."
        )
    return sentences


def _about_verdicts(judgement: Judgement, cite: _Citations) -> list[str]:
    meta, variants = judgement.meta, judgement.variants
    counts = variants["verdict"].value_counts()
    numbers = [
        f"{counts.get(key, 0)} {words}"
        for key, words in (
            ("ruled_out", "ruled out"),
            ("kept", "kept"),
            ("not_judged", "not judged"),
        )
        if counts.get(key, 0)
    ]
    sentences = [
        f"A wiring was ruled out at alpha = {meta['alpha']:g} only if every wiring nested in it "
        "was ruled out as well, which keeps one error rate for the whole table "
        f"{cite('finner', 'berger')} if the p-values are calibrated, errors are independent and of "
        "the stated family, and the truth is among the wirings and inside their priors.",
        f"Of {_count(len(variants), 'wiring')}, {_listed(numbers)}; 'kept' means not ruled out by "
        "these data.",
    ]
    if variants["loo_difference"].notna().any():
        sentences.append(
            "Predictive accuracy was compared by Pareto-smoothed importance-sampling "
            f"leave-one-out cross-validation {cite('loo')}."
        )
    versions = meta["versions"]
    sentences.append(
        f"Computations used ruleout {versions['ruleout']} (seed {meta['seed']}, effort "
        f"'{meta['effort']}') with "
        + _listed([f"{k} {v}" for k, v in versions.items() if k != "ruleout"])
        + "."
    )
    return sentences
