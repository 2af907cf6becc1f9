"""A small judged case made by hand, so that what people look at can be tested on its own."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import solve_ivp

from ruleout.case import Case, read_case
from ruleout.verdicts.types import COLUMNS, Judgement

CONTESTED = ("protectant_on_sensor", "protectant_on_kinase", "cold_on_protectant")
CONDITIONS = ("step", "pulse", "no_protectant")
READOUTS = ("active_kinase", "protectant_level")
TIMES = np.array([0.0, 2, 5, 10, 15, 20, 30, 45, 60])
DECISIVE = "edge:protectant_on_kinase"
OVERSHOOT = (
    "Letting protectant_on_kinase in improves the fit by 31; without it in truth, by 6 at most. "
    "kinase in `step` overshoots by 0.31 where replicates reach 0.07 to 0.18."
)
MECHANISM = """\
title = "Frost response relay"
time_unit = "min"
amount_unit = "fraction"
[node.cold]
kind = "input"
[node.sensor]
kind = "switched"
[node.kinase]
kind = "switched"
[node.protectant]
kind = "expressed"
[edge.cold_on_sensor]
from = "cold"
to = "sensor"
effect = "stimulates"
law = "linear"
[edge.sensor_on_kinase]
from = "sensor"
to = "kinase"
effect = "stimulates"
law = "linear"
[edge.kinase_on_protectant]
from = "kinase"
to = "protectant"
effect = "stimulates"
law = "linear"
[edge.protectant_on_sensor]
from = "protectant"
to = "sensor"
effect = "inhibits"
law = "hill"
contested = true
[edge.protectant_on_kinase]
from = "protectant"
to = "kinase"
effect = "inhibits"
law = "hill"
contested = true
[edge.cold_on_protectant]
from = "cold"
to = "protectant"
effect = "stimulates"
law = "saturating"
contested = true
"""
EXPERIMENTS = """\
[readout.active_kinase]
of = "kinase"
scale = "free"
[readout.protectant_level]
of = "protectant"
[condition.step]
input.cold = 1.0
[condition.pulse]
input.cold = [[0, 1.0], [15, 0.0]]
[condition.no_protectant]
input.cold = 1.0
remove = ["protectant"]
"""


def write_case(folder: Path) -> Path:
    """Write the frost relay: cold -> sensor -> kinase -> protectant and three contested edges."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "mechanism.toml").write_text(MECHANISM)
    (folder / "experiments.toml").write_text(EXPERIMENTS)
    rows = [
        (condition, time, readout, f"{value:.5f}")
        for condition, both in measured().items()
        for readout, values in zip(READOUTS, both, strict=True)
        for time, value in zip(TIMES, values, strict=True)
    ]
    table = pd.DataFrame(rows, columns=["condition", "time", "readout", "value"])
    table.to_csv(folder / "data.csv", index=False)
    return folder


def measured() -> dict[str, np.ndarray]:
    """Return what was measured in each condition: (readouts, times) arrays."""
    rng = np.random.default_rng(7)
    return {c: _simulate(c, 1.0, TIMES) + rng.normal(0, 0.02, (2, 9)) for c in CONDITIONS}


def _simulate(condition: str, brake: float, times: np.ndarray) -> np.ndarray:
    """Kinase and protectant of the relay at ``times``: a (2, T) array."""

    def slope(t: float, y: np.ndarray) -> list[float]:
        cold = 0.0 if condition == "pulse" and t >= 15 else 1.0
        s, k, p = y
        p_seen = 0.0 if condition == "no_protectant" else p
        return [
            0.25 * cold * (1 - s) - 0.15 * s,
            0.5 * s / (1 + brake * (p_seen / 0.3) ** 2) * (1 - k) - 0.2 * k,
            0.0 if condition == "no_protectant" else 0.12 * k - 0.1 * p,
        ]

    solved = solve_ivp(slope, (0, float(times[-1])), [0, 0, 0], t_eval=times, max_step=0.5)
    return np.asarray(solved.y[1:])


def _table(name: str, rows: list[dict[str, Any]]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=list(COLUMNS[name]))


def _variant_rows(not_judged: tuple[str, ...]) -> tuple[pd.DataFrame, dict[str, bool]]:
    wirings = sorted(itertools.product((False, True), repeat=3), key=lambda w: (sum(w), w[::-1]))
    rows, braked = [], {}
    for i, present in enumerate(wirings, 1):
        name = f"v{i}"
        edges = [e for e, here in zip(CONTESTED, present, strict=True) if here]
        laws = dict(
            zip(CONTESTED, ("inhibits/hill", "inhibits/hill", "stimulates/saturating"), strict=True)
        )
        braked[name] = "protectant_on_kinase" in edges
        p = 0.41 - 0.02 * i if braked[name] else 0.005
        verdict = "kept" if braked[name] else "ruled_out"
        reason = "" if braked[name] else OVERSHOOT
        if name in not_judged:
            p, verdict = np.nan, "not_judged"
            reason = "The sampler did not converge (R-hat 1.04); give it more effort."
        rows.append(
            {
                "variant": name,
                "edges": ";".join(edges),
                "choices": ";".join(
                    f"{e}={laws[e] if here else 'absent'}"
                    for e, here in zip(CONTESTED, present, strict=True)
                ),
                "free_parameters": 9 + 2 * sum(present),
                "p_value": p,
                "p_coherent": p,
                "held_out_p": np.nan,
                "verdict": verdict,
                "decisive_check": DECISIVE if verdict == "ruled_out" else "",
                "reason": reason,
                "flags": "by coherence" if braked[name] and sum(present) > 1 else "",
                "points": 45,
                "objective": 31.0 - 20.0 * braked[name],
                "loo_difference": 0.0 if i == 3 else -1.5 * i,
                "loo_se": 1.1 * i,
                "rhat_max": 1.004 if verdict != "not_judged" else 1.04,
                "ess_min": 812.0,
                "searches_agree": "7 of 20",
                "contains": "" if i == 1 else "v1",
                "replicates": 199,
            }
        )
    return _table("variants", rows), braked


def _claim_rows(variants: pd.DataFrame) -> pd.DataFrame:
    rows = []
    for edge in CONTESTED:
        has = variants["edges"].str.split(";").map(lambda e, edge=edge: edge in e)
        kept = variants["verdict"] == "kept"
        needed = edge == "protectant_on_kinase"
        rows.append(
            {
                "claim": edge,
                "text": f"{edge.split('_on_')[0]} acts on {edge.split('_on_')[1]}",
                "verdict": "needed" if needed else "not_needed",
                "variants_with_kept": ";".join(variants["variant"][has & kept]),
                "variants_without_kept": ";".join(variants["variant"][~has & kept]),
                "variants_with": ";".join(variants["variant"][has]),
                "variants_without": ";".join(variants["variant"][~has]),
                "statement": (
                    f"{edge} is needed: every variant without it is ruled out, "
                    f"{int((has & kept).sum())} with it are kept."
                    if needed
                    else f"These data do not show that {edge} is needed: v3 does without it."
                ),
                "also": "",
                "detectable": "yes" if needed else "",
            }
        )
    return _table("claims", rows)


def make_judgement(not_judged: tuple[str, ...] = ()) -> Judgement:
    """Return the frost relay as judged: without the brake on the kinase, ruled out."""
    rng = np.random.default_rng(7)
    variants, braked = _variant_rows(not_judged)
    fine = np.linspace(0, 60, 61)
    values = measured()
    curves, residuals, checks, replicates = [], [], [], []
    parameters, quantiles = [], []
    for variant, has_brake in braked.items():
        brake = 1.0 if has_brake else 0.15
        for condition, (r, readout) in itertools.product(CONDITIONS, enumerate(READOUTS)):
            curve = _simulate(condition, brake, fine)[r]
            at_data = np.interp(TIMES, fine, curve)
            curves += [
                dict(zip(COLUMNS["curves"], row, strict=True))
                for row in zip(
                    *(itertools.repeat(x) for x in (variant, condition, readout, "")),
                    fine,
                    curve,
                    curve,
                    curve * 0.92 - 0.004,
                    curve * 1.08 + 0.004,
                    fine > 50,
                    strict=False,
                )
            ]
            residuals += [
                dict(zip(COLUMNS["residuals"], row, strict=True))
                for row in zip(
                    *(itertools.repeat(x) for x in (variant, condition, readout, "")),
                    TIMES,
                    values[condition][r],
                    itertools.repeat(0.02),
                    at_data,
                    (values[condition][r] - at_data) / 0.02,
                    itertools.repeat(False),
                    itertools.repeat(False),
                    strict=False,
                )
            ]
        for check, counts in (
            ("serial", True),
            (DECISIVE, True),
            ("peak:step:active_kinase", False),
        ):
            if check == DECISIVE and has_brake:
                continue
            draws = np.sort(rng.gamma(4.0, 0.25, 199))
            observed = float(draws[120] if has_brake else draws[-1] * 1.7)
            _, _, where = check.partition(":")
            condition, _, readout = where.partition(":") if check.startswith("peak") else ("",) * 3
            checks.append(
                dict(
                    zip(
                        COLUMNS["checks"],
                        (
                            variant,
                            check,
                            condition,
                            readout,
                            observed,
                            float(np.median(draws)),
                            float(draws[10]),
                            float(draws[189]),
                            float((1 + (draws >= observed).sum()) / 200),
                            counts,
                        ),
                        strict=True,
                    )
                )
            )
            if counts:
                replicates += [
                    dict(zip(COLUMNS["replicates"], (variant, check, b, float(x)), strict=True))
                    for b, x in enumerate(draws)
                ]
        for k, (parameter, kind) in enumerate(
            (
                ("sensor.loss_rate", "rate"),
                ("kinase.loss_rate", "rate"),
                ("active_kinase.scale", "level"),
            )
        ):
            middle = 0.15 * (k + 1)
            parameters.append(
                dict(
                    zip(
                        COLUMNS["parameters"],
                        (
                            variant,
                            parameter,
                            "1/min" if kind == "rate" else "a.u.",
                            kind,
                            "lognormal, median 0.2, 95 % within a factor 10",
                            "file" if k == 0 else "default",
                            0.02,
                            2.0,
                            middle,
                            middle,
                            middle * 0.8,
                            middle * 1.3,
                            1.003,
                            900.0,
                            850.0,
                        ),
                        strict=True,
                    )
                )
            )
            quantiles += [
                dict(
                    zip(
                        COLUMNS["quantiles"],
                        (
                            variant,
                            parameter,
                            level,
                            middle * np.exp(0.2 * z),
                            0.2 * np.exp(1.17 * z),
                        ),
                        strict=True,
                    )
                )
                for level, z in zip(
                    (0.025, 0.05, 0.25, 0.5, 0.75, 0.95, 0.975),
                    (-1.96, -1.645, -0.674, 0, 0.674, 1.645, 1.96),
                    strict=True,
                )
            ]
    findings = [
        {
            "variant": "",
            "kind": "unperturbed",
            "subject": "cold_on_protectant",
            "message": "No condition perturbs cold_on_protectant: these data speak of correlation.",
            "remedy": "Add a condition that cuts it, or that blocks its source.",
        },
        {
            "variant": "v4",
            "kind": "insensitive",
            "subject": "protectant_on_sensor.half",
            "message": "No readout moves with protectant_on_sensor.half.",
            "remedy": "Measure the sensor, or fix the parameter.",
        },
    ]
    equations = {
        v: {
            "text": [
                "d sensor/dt = cold_on_sensor.strength cold (1 - sensor) - sensor.loss_rate sensor",
            ],
            "latex": [r"\frac{d\,\mathrm{sensor}}{dt} = k\,\mathrm{cold}\,(1-\mathrm{sensor})"],
            "loops": (["negative feedback: kinase -> protectant -| kinase"] if braked[v] else []),
            "assumptions": ["The compartment is well mixed and its temperature constant."],
        }
        for v in braked
    }
    return Judgement(
        variants=variants,
        claims=_claim_rows(variants),
        checks=_table("checks", checks),
        parameters=_table("parameters", parameters),
        curves=_table("curves", curves),
        residuals=_table("residuals", residuals),
        replicates=_table("replicates", replicates),
        quantiles=_table("quantiles", quantiles),
        findings=_table("findings", findings),
        equations=equations,
        meta={
            "title": "Frost response relay",
            "time_unit": "min",
            "amount_unit": "fraction",
            "alpha": 0.05,
            "seed": 1,
            "effort": "standard",
            "settings": {"rhat": 1.01, "ess": 400.0, "starts": 20, "least_replicates": 199},
            "versions": {"ruleout": "0.1.0", "emcee": "3.1.6", "numpy": "2.0"},
            "inputs": {"mechanism.toml": "a" * 64, "data.csv": "b" * 64},
            "conditions_of_guarantee": [
                "The p-values are calibrated.",
                "Errors are independent and of the stated family.",
            ],
            "summary": [],
        },
    )


@pytest.fixture(scope="session")
def frost_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(tmp_path_factory.mktemp("cases") / "frost_relay")


@pytest.fixture(scope="session")
def frost_case(frost_folder: Path) -> Case:
    return read_case(frost_folder)


@pytest.fixture(scope="session")
def frost_judgement() -> Judgement:
    return make_judgement()


@pytest.fixture(scope="session")
def judgement_with() -> Callable[..., Judgement]:
    """Make a judgement with some variants not judged, or with fields replaced."""

    def make(*, not_judged: tuple[str, ...] = (), **fields: Any) -> Judgement:
        return replace(make_judgement(not_judged), **fields)

    return make
