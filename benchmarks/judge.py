"""Time the whole main job beside a hand-written script for the same model, priors and samples.

``python benchmarks/judge.py [--effort standard] [--json FILE]``. The script is what a careful
scientist would write today: SciPy's LSODA, a Python right-hand side, emcee with its default move.
Only a stated number of its iterations is run; the rest is extrapolated, as is said in the output.
"""

from __future__ import annotations

import argparse
import json
import os
import tempfile
import time
from pathlib import Path

import emcee
import numpy as np
import pandas as pd
from scipy.integrate import solve_ivp

from ruleout.case import read_case
from ruleout.kernel import Program
from ruleout.pipeline import Settings, judge
from ruleout.pipeline.settings import ENSEMBLES

DEMO = Path(__file__).resolve().parents[1] / "mechanisms_demo" / "frost_relay"
WALKERS = 64
MEASURED_ITERATIONS = 12
FOLD_SD = np.log(30) / 1.959963984540054
WIDE_SD = np.log(100) / 1.959963984540054
NAMES = ("sensor_loss", "kinase_loss", "protectant_loss", "on_sensor", "on_kinase", "on_protectant",
         "half", "hill", "sd_kinase", "sd_protectant")  # fmt: skip
MEDIANS = np.log([0.2, 0.2, 0.1, 0.2, 0.5, 0.2, 1.0])
SPREADS = np.array([FOLD_SD] * 6 + [WIDE_SD])
CONDITIONS = ("step", "pulse", "no_protectant", "low_dose")


def level(condition: str, t: float) -> float:
    if condition == "low_dose":
        return 0.2
    return 1.0 if condition != "pulse" or t < 12 else 0.0


def slope(t, y, p, condition):
    """The demo's wiring with the protectant's inhibition of the sensor."""
    sensor, kinase, protectant = y
    brake = 1 + (max(protectant, 0.0) / p[6]) ** p[7]
    made = 0.0 if condition == "no_protectant" else p[5] * kinase - p[2] * protectant
    return [
        p[3] * level(condition, t) / brake * (1 - sensor) - p[0] * sensor,
        p[4] * sensor * (1 - kinase) - p[1] * kinase,
        made,
    ]


class Script:
    """Log posterior of one wiring, point by point, as written by hand."""

    def __init__(self, data: pd.DataFrame) -> None:
        self.series = {
            key: rows.sort_values("time") for key, rows in data.groupby(["condition", "readout"])
        }
        self.times = {c: np.unique(data.loc[data["condition"] == c, "time"]) for c in CONDITIONS}
        self.sd_median = {
            r: 0.1 * float(np.ptp(rows["value"])) for r, rows in data.groupby("readout")
        }

    def __call__(self, q):
        if not 0 <= q[7] <= np.log(4):
            return -np.inf
        p = np.exp(q)
        noise = {"active_kinase": p[8], "protectant": p[9]}
        out = -0.5 * np.sum(((q[:7] - MEDIANS) / SPREADS) ** 2)
        for i, readout in enumerate(noise):
            center = np.log(self.sd_median[readout])
            out -= 0.5 * ((q[8 + i] - center) / (np.log(10) / 1.959963984540054)) ** 2
        for condition in CONDITIONS:
            times = self.times[condition]
            found = solve_ivp(
                slope, (0, times[-1]), np.zeros(3), "LSODA", times,
                args=(p, condition), rtol=1e-6, atol=1e-9, max_step=12.0,
            )  # fmt: skip
            if found.status != 0:
                return -np.inf
            for state, readout in ((1, "active_kinase"), (2, "protectant")):
                rows = self.series.get((condition, readout))
                if rows is not None:
                    curve = found.y[state][np.searchsorted(times, rows["time"])]
                    e = (rows["value"].to_numpy() - curve) / noise[readout]
                    out -= 0.5 * e @ e + len(e) * np.log(noise[readout])
        return out


def time_judge(effort: str, workers: int) -> tuple[float, Path, object]:
    folder = Path(tempfile.mkdtemp())
    start = time.perf_counter()
    found = judge(read_case(DEMO), Settings(effort=effort, workers=workers), out=folder)
    return time.perf_counter() - start, folder, found


def count_solves(effort: str) -> int:
    """Return the rows solved in a whole run (one worker, so that all are seen)."""
    total = 0
    inner = Program.solve

    def counted(self, y0, *arguments, **options):
        nonlocal total
        total += len(y0)
        return inner(self, y0, *arguments, **options)

    Program.solve = counted  # type: ignore[method-assign]
    try:
        time_judge(effort, 1)
    finally:
        Program.solve = inner  # type: ignore[method-assign]
    return total


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--effort", default="standard")
    parser.add_argument("--json", type=Path)
    options = parser.parse_args()
    time_judge("quick", 1)  # compiles and loads what later runs find in place
    two, _, _ = time_judge(options.effort, 2)
    one, folder, found = time_judge(options.effort, 1)
    blocks = len(list((folder / "stages").glob("v*/chain-*")))
    variants = len(found.variants)
    case = read_case(DEMO)
    stored = Settings(effort=options.effort).spent
    iterations = (blocks - ENSEMBLES * variants) * stored.stored * stored.thin
    script = Script(case.experiments.data)
    best = found.parameters[found.parameters["variant"] == "v2"].set_index("parameter")["best"]
    order = ["sensor.loss_rate", "kinase.loss_rate", "protectant.loss_rate",
             "cold_on_sensor.strength", "sensor_on_kinase.strength",
             "kinase_on_protectant.strength", "protectant_on_sensor.half",
             "protectant_on_sensor.hill", "active_kinase.sd", "protectant.sd"]  # fmt: skip
    center = np.log(best[order].to_numpy(float))
    rng = np.random.default_rng(1)
    start = center + 0.02 * rng.standard_normal((WALKERS, len(NAMES)))
    sampler = emcee.EnsembleSampler(WALKERS, len(NAMES), script)
    begun = time.perf_counter()
    sampler.run_mcmc(start, MEASURED_ITERATIONS)
    per_iteration = (time.perf_counter() - begun) / MEASURED_ITERATIONS
    solves = count_solves(options.effort)
    result = {
        "effort": options.effort,
        "machine_cores": os.cpu_count(),
        "seconds_two_workers": two,
        "seconds_one_worker": one,
        "one_over_two_workers": one / two,
        "variants": variants,
        "solves": solves,
        "solves_per_verdict": solves / variants,
        "ensemble_iterations": iterations,
        "script_seconds_per_iteration": per_iteration,
        "script_iterations_measured": MEASURED_ITERATIONS,
        "script_seconds_extrapolated": per_iteration * iterations,
        "script_over_judge": per_iteration * iterations / one,
        "note": "The script's seconds are its measured seconds per iteration of 64 walkers times "
        "the iterations that judge's chains took for all variants: sampling alone, without "
        "searches and without the refitted replicates behind every p-value, and as if emcee's "
        "default move needed no more iterations.",
    }
    text = json.dumps(result, indent=1)
    print(text)
    if options.json:
        options.json.write_text(text + "\n")


if __name__ == "__main__":
    main()
