"""Published data sets through `judge`, held against what their literature says.

The source of every case is its `SOURCE.md`; the case files were written before anything was judged.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from ruleout.case import read_case
from ruleout.pipeline import Settings, judge
from ruleout.verdicts.types import Judgement

CASES = Path(__file__).parent / "cases"
UNSETTLED = {"not_needed", "undecided"}
# Central 90 % of a normal distribution, in standard deviations.
WIDTH_90 = 2 * 1.6448536269514722
# Monte Carlo errors allowed: beyond four, a chance result comes once in 16,000.
ERRORS = 4.0


def judged(name: str, folder: Path, alpha: float = 0.05) -> Judgement:
    case = read_case(CASES / name)
    return judge(case, Settings(seed=1, effort="quick", alpha=alpha), out=folder)


def claim(judgement: Judgement, name: str) -> str:
    """Verdict of the claim ``name``, under whatever name it was merged."""
    claims = judgement.claims
    also = claims["also"].fillna("").str.split(";")
    found = claims[(claims["claim"] == name) | also.map(lambda names: name in names)]
    assert len(found) == 1, f"{name} is not among the claims:\n{claims[['claim', 'also']]}"
    return str(found["verdict"].iloc[0])


def variant(judgement: Judgement, **choices: str) -> pd.Series[Any]:
    """The one variant whose settled choices include ``choices``."""
    variants = judgement.variants
    wanted = {f"{name}={option}" for name, option in choices.items()}
    found = variants[variants["choices"].map(lambda text: wanted <= set(text.split(";")))]
    assert len(found) == 1, f"{len(found)} variants have {wanted}"
    return found.iloc[0]


def parameter(judgement: Judgement, name: str, variant: str) -> pd.Series[Any]:
    table = judgement.parameters
    found = table[(table["variant"] == variant) & (table["parameter"] == name)]
    assert len(found) == 1
    return found.iloc[0]


def assert_best_fit(
    judgement: Judgement, name: str, of: str, certified: float, sd: float, share: float = 0.25
) -> None:
    """The best fit lies within ``share`` of the certified sd, the pull of a wide prior."""
    best = float(parameter(judgement, name, of)["best"])
    assert abs(best - certified) <= share * sd, f"{name}: {best} against {certified} ({sd})"


@pytest.mark.parametrize(
    "subject", [1, *(pytest.param(k, marks=pytest.mark.slow) for k in range(2, 7))]
)
def test_indometh_needs_two_compartments(subject: int, tmp_path: Path) -> None:
    """Kwan and others 1976: one compartment ruled out in every subject alone, two kept.

    One case per subject at alpha over their number (Bonferroni).
    """
    found = judged(f"indometh_{subject}", tmp_path, alpha=0.05 / 6)
    assert claim(found, "peripheral") == "needed"
    assert variant(found, peripheral="absent")["verdict"] == "ruled_out"
    assert variant(found, peripheral="present")["verdict"] == "kept"


@pytest.mark.slow
@pytest.mark.parametrize("subject", range(1, 13))
def test_theoph_needs_an_absorption_step(subject: int, tmp_path: Path) -> None:
    """Boeckmann, Sheiner and Beal 1994: p <= 5.2e-5 against a bolus in every subject alone."""
    found = judged(f"theoph_{subject}", tmp_path, alpha=0.05 / 12)
    assert claim(found, "gut") == "needed"


def test_puromycin_changes_the_velocity_of_a_saturable_rate(tmp_path: Path) -> None:
    """Bates and Watts 1988: linear ruled out; drug on velocity needed, on half not needed."""
    found = judged("puromycin", tmp_path)
    assert claim(found, "saturable") == "needed"
    assert claim(found, "drug_on_velocity") == "needed"
    assert claim(found, "drug_on_half") == "not_needed"
    linear = found.variants[found.variants["choices"].str.contains("turnover=converts/linear")]
    assert (linear["verdict"] == "ruled_out").all()


def test_alpha_pinene_with_the_three_measured_readouts(tmp_path: Path) -> None:
    """Box and others 1973: the dimer forms and returns; where pyronene comes from is open."""
    found = judged("alpha_pinene", tmp_path)
    assert claim(found, "allo_to_dimer") == "needed"
    assert claim(found, "dimer_to_allo") == "needed"
    assert claim(found, "pinene_to_allo") == "needed"
    assert claim(found, "dipentene_to_allo") == "excluded"
    assert claim(found, "allo_to_pyronene") in UNSETTLED
    assert claim(found, "pinene_to_pyronene") in UNSETTLED


def test_six_points_of_oxygen_demand_do_not_settle_it(tmp_path: Path) -> None:
    """Bates and Watts 1988: F(1, 4) = 16.9, p = 0.015, but AICc 26.7 against 26.8."""
    found = judged("bod", tmp_path)
    assert claim(found, "slowing") in UNSETTLED
    assert found.variants["flags"].str.contains("few points").all()


def test_two_decimals_cannot_tell_two_exponentials_from_three(tmp_path: Path) -> None:
    """Lanczos 1956: chi-squares 1921, 13.6 (20 df, p = 0.85) and 12.1."""
    found = judged("lanczos_2dec", tmp_path)
    assert claim(found, "second") == "needed"
    assert claim(found, "third") == "not_needed"


def test_three_decimals_tell_three_exponentials(tmp_path: Path) -> None:
    """Lanczos 1956: chi-squares 2.0e5, 78.7 (p = 6.5e-9) and 13.0 (18 df, p = 0.79)."""
    found = judged("lanczos_3dec", tmp_path)
    assert claim(found, "second") == "needed"
    assert claim(found, "third") == "needed"


def test_conjugate_posterior_is_reproduced_and_inflow_needed(tmp_path: Path) -> None:
    """Exact: mean 4.042389 and 1.085826, sd 0.293017 and 0.086181; p without inflow 1.5e-30."""
    found = judged("conjugate_decay_inflow", tmp_path)
    assert claim(found, "inflow") == "needed"
    full = str(variant(found, inflow="converts/linear")["variant"])
    for name, mean, sd in (("x.start", 4.042389, 0.293017), ("inflow.rate", 1.085826, 0.086181)):
        row = parameter(found, name, full)
        # Standard errors of a normal sample's median and of its 5 and 95 % quantiles.
        assert abs(row["median"] - mean) <= ERRORS * 1.2533 * sd / np.sqrt(row["ess_bulk"])
        width_error = 2.11 * np.sqrt(2) * sd / np.sqrt(row["ess_tail"])
        assert abs(row["high"] - row["low"] - WIDTH_90 * sd) <= ERRORS * width_error


def test_straight_line_does_not_fit_the_bank_accounts(tmp_path: Path) -> None:
    """Neter and others: lack of fit F(4, 5) = 14.80, p = 0.0056, against pure error."""
    found = judged("bank_accounts", tmp_path)
    assert list(found.variants["verdict"]) == ["ruled_out"]


@pytest.mark.slow
def test_lynx_and_hare_depend_on_each_other(tmp_path: Path) -> None:
    """Log-likelihood 4.1 coupled, below -38 uncoupled; the residuals are patterned in all.

    So no structure without both couplings may be kept, and the coupled ones must rank first,
    whether or not they are kept themselves. The largest uncoupled structures have ridges on which
    chains may fail to converge: they may be left not judged, which is no evidence either way.
    """
    found = judged("lynx_hare", tmp_path)
    choices = found.variants["choices"].str.split(";").map(set)
    coupled = choices.map(
        lambda made: {"predation=converts", "lynx_growth=converts/on_hare"} <= made
    )
    uncoupled = found.variants[~coupled]
    assert (uncoupled["verdict"] != "kept").all()
    smallest = uncoupled["edges"].str.count(";") < 1
    assert (uncoupled.loc[smallest, "verdict"] == "ruled_out").all()
    assert claim(found, "lynx_eat_hare") not in {"excluded", "not_needed"}
    assert found.variants[coupled]["objective"].max() < uncoupled["objective"].min()


@pytest.mark.slow
def test_orange_trees_do_not_grow_exponentially(tmp_path: Path) -> None:
    """Draper and Smith 1981: residual squares 1274 logistic, 2284, 2711 and 8696 exponential."""
    found = judged("orange", tmp_path)
    objective = {
        rate: float(variant(found, growth=f"converts/{rate}")["objective"])
        for rate in ("constant", "exponential", "monomolecular", "logistic")
    }
    assert variant(found, growth="converts/exponential")["verdict"] == "ruled_out"
    assert min(objective, key=objective.__getitem__) == "logistic"
    assert max(objective, key=objective.__getitem__) == "exponential"


@pytest.mark.slow
def test_four_rate_laws_of_misra1_rank_as_certified(tmp_path: Path) -> None:
    """NIST StRD Misra1a-d: third order before second, three halves and first.

    All four leave 3 runs of 7.4, so whether any is kept is not asserted.
    """
    found = judged("misra1", tmp_path)
    certified = {
        "first": (2.3894212918e2, 2.7070075241, 5.5015643181e-4, 7.2668688436e-6),
        "three_halves": (3.3799746163e2, 3.1643950207, 3.9039091287e-4, 4.2547321834e-6),
        "second": (4.3736970754e2, 3.6489174345, 3.0227324449e-4, 2.9334354479e-6),
        "third": (6.3642725809e2, 4.6638326572, 2.0813627256e-4, 1.7728423155e-6),
    }
    rows = {law: variant(found, adsorption=f"converts/{law}") for law in certified}
    order = sorted(rows, key=lambda law: float(rows[law]["objective"]))
    assert order == ["third", "second", "three_halves", "first"]
    for law, (cap, cap_sd, rate, _) in certified.items():
        of = str(rows[law]["variant"])
        assert_best_fit(found, "adsorption.cap", of, cap, cap_sd)
        slope = float(parameter(found, "adsorption.slope", of)["best"])
        # The initial slope b1 b2 is known far better than either factor.
        assert slope == pytest.approx(cap * rate, rel=1e-3)


@pytest.mark.slow
def test_ultrasound_spreads(tmp_path: Path) -> None:
    """NIST StRD Chwirut2: residual squares 1011.3 without spreading, 513.05 with it."""
    found = judged("chwirut2", tmp_path)
    assert claim(found, "spreading") == "needed"
    full = str(variant(found, spreading="converts")["variant"])
    assert_best_fit(found, "absorption.rate", full, 1.6657666537e-1, 3.8303286810e-2)


@pytest.mark.slow
def test_pasture_grows_logistically(tmp_path: Path) -> None:
    """NIST StRD Rat42: residual squares 391.3, 75.5, 21.8 and 8.06 for the logistic."""
    found = judged("rat42", tmp_path)
    rows = {
        law: variant(found, growth=f"converts/{law}")
        for law in ("exponential", "constant", "gompertz", "logistic")
    }
    assert rows["exponential"]["verdict"] == "ruled_out"
    order = sorted(rows, key=lambda law: float(rows[law]["objective"]))
    assert order[0] == "logistic"
    assert order[-1] == "exponential"
    best = str(rows["logistic"]["variant"])
    assert_best_fit(found, "growth.cap", best, 7.2462237576e1, 1.7340283401)
    assert_best_fit(found, "growth.k", best, 6.7359200066e-2, 3.4465663377e-3)


@pytest.mark.slow
def test_box_hunter_and_hunter_oxygen_demand_levels_off(tmp_path: Path) -> None:
    """NIST StRD BoxBOD: F(1, 4) = 81.8 against the line through the origin; only 6 points."""
    found = judged("boxbod", tmp_path)
    assert claim(found, "plateau") == "needed"
    assert found.variants["flags"].str.contains("few points").all()
    full = str(variant(found, slowing="converts/linear")["variant"])
    assert_best_fit(found, "slowing.rate", full, 5.4723748542e-1, 1.0455993237e-1)
