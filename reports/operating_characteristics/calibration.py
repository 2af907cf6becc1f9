"""Simulation-based calibration of the sampler, and coverage of bands on a new condition.

``python -m reports.operating_characteristics.calibration --sets 200`` writes ``calibration.csv``
and the figure beside this file. Parameters are drawn from the priors (the sd's included, all fixed
before anything is simulated), data simulated, and the posterior sampled as `judge` does: if all is
right, the rank of the truth among the draws is uniform, and 90 % bands hold the true curve of a
condition that was not measured in 90 % of the cases.

References
----------
.. [1] S. Talts, M. Betancourt, D. Simpson, A. Vehtari, A. Gelman, arXiv:1804.06788.
"""

from __future__ import annotations

import argparse
import tempfile
import warnings
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy import stats

from ruleout.case import Case, read_case
from ruleout.fitting import SearchEffort, search
from ruleout.fitting.sampler import run_block, start_walkers
from ruleout.pipeline.tasks import Workbench
from ruleout.rehearsal import coordinates, simulate
from ruleout.seeds import generator, sequence

HERE = Path(__file__).parent
SEED = 6100
DRAWS = 99
BINS = 10
BURN, STORED, THIN = 60, 50, 8
VARIANT = "v2"
"""With the brake: a law with a saturation, a lognormal and a log-uniform prior."""

MECHANISM = """
title = "A product that slows its own making"
time_unit = "h"
amount_unit = "uM"
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[edge.u_on_x]
from = "u"
to = "x"
effect = "stimulates"
[edge.brake]
from = "x"
to = "x"
effect = "inhibits"
law = "hill"
contested = true
[prior]
"x.basal" = 0
"x.loss_rate" = { median = 0.5, fold = 4 }
"u_on_x.strength" = { low = 0.5, high = 8 }
"brake.half" = { median = 1.5, fold = 5 }
"brake.hill" = 2
"x_seen.sd" = { median = 0.1, fold = 3 }
"""
EXPERIMENTS = """
[readout.x_seen]
of = "x"
[condition.induced]
input.u = 1.0
[condition.washed]
input.u = [[0, 1.0], [3, 0.0]]
[condition.weak]
input.u = 0.3
hold_out = true
"""
TIMES = (0.3, 0.7, 1.2, 2, 3, 4, 5.5, 8)


def template() -> Case:
    """Return the case that everything is simulated for; its values are placeholders."""
    rows = [f"{c},{t},x_seen,1" for c in ("induced", "washed", "weak") for t in TIMES]
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "mechanism.toml").write_text(MECHANISM)
        (folder / "experiments.toml").write_text(EXPERIMENTS)
        (folder / "data.csv").write_text("\n".join(["condition,time,readout,value", *rows]) + "\n")
        return read_case(folder)


def one(case: Case, bench: Workbench, i: int) -> dict[str, float]:
    """Return the ranks of data set ``i`` and whether its bands hold the unmeasured curve."""
    prior = bench.posterior(VARIANT)
    space = prior.space
    rng = generator(SEED, "truth", i)
    truth = space.quantile(rng.uniform(size=space.dimension))
    values = dict(zip(space.names, space.natural(truth), strict=True))
    simulated = simulate(case, prior, values, rng)
    posterior = Workbench(simulated).posterior(VARIANT)
    seed = sequence(SEED, "chain", i)
    effort = SearchEffort(screened=64, starts=6, rounds=2)
    walkers = start_walkers(posterior, search(posterior, effort, seed.spawn(1)[0]), seed)
    walkers = run_block(posterior, walkers, BURN, THIN).walkers
    chain = run_block(posterior, walkers, STORED, THIN).chain
    pool = chain.reshape(-1, space.dimension)
    draws = pool[generator(SEED, "draws", i).choice(len(pool), DRAWS, replace=False)]
    row = {name: int(np.sum(draws[:, j] < truth[j])) for j, name in enumerate(space.names)}
    held = ~posterior.fitted
    curve, _ = posterior.predict(coordinates(posterior, values)[None])
    cloud, _ = posterior.predict(draws)
    low, high = np.quantile(cloud[:, held], [0.05, 0.95], axis=0)
    inside = (low <= curve[0, held]) & (curve[0, held] <= high)
    return {"data_set": i, **row, "band_coverage": float(np.mean(inside))}


def calibrate(sets: int) -> pd.DataFrame:
    """Return ranks and coverage of ``sets`` data sets, one row each."""
    case = template()
    bench = Workbench(case)
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        return pd.DataFrame([one(case, bench, i) for i in range(sets)])


def uniformity(ranks: NDArray[np.int64]) -> float:
    """Return the p-value of a chi-square test that ranks 0..DRAWS are uniform."""
    counts = np.bincount(ranks * BINS // (DRAWS + 1), minlength=BINS)
    return float(stats.chisquare(counts).pvalue)


def parameters(found: pd.DataFrame) -> list[str]:
    """Return the names of the parameters whose ranks are in the table."""
    return [name for name in found.columns if name not in ("data_set", "band_coverage")]


def draw_figure(found: pd.DataFrame) -> None:
    """Write the histograms of ranks with the band that 99 % of uniform ones stay in."""
    from matplotlib.figure import Figure

    from ruleout.report.style import COLOURS, FAINT, INK, MM, PAGE, figure_style
    from ruleout.report.writing import save_figure

    names = parameters(found)
    with figure_style():
        figure = Figure(figsize=(PAGE * MM, 45 * MM), layout="constrained")
        panels = figure.subplots(1, len(names), sharey=True)
        low, high = stats.binom.ppf([0.005, 0.995], len(found), 1 / BINS)
        for axes, name in zip(panels, names, strict=True):
            axes.axhspan(low, high, color=FAINT, alpha=0.4, lw=0)
            axes.axhline(len(found) / BINS, color=INK, lw=0.5)
            counts = np.bincount(found[name] * BINS // (DRAWS + 1), minlength=BINS)
            axes.bar(np.arange(BINS) + 0.5, counts, width=0.9, color=COLOURS[0])
            axes.set(title=name, xlabel="rank of the truth, tenths")
        panels[0].set_ylabel("data sets")
        save_figure(figure, HERE / "figures", "calibration")


def main() -> None:
    """Run from the command line."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--sets", type=int, default=200)
    given = parser.parse_args()
    found = calibrate(given.sets)
    found.to_csv(HERE / "calibration.csv", index=False, float_format="%.4g")
    for name in parameters(found):
        print(f"{name}: p = {uniformity(found[name].to_numpy()):.3f}")
    error = found["band_coverage"].std() / np.sqrt(len(found))
    print(f"coverage of 90 % bands: {found['band_coverage'].mean():.3f} +- {error:.3f}")
    draw_figure(found)


if __name__ == "__main__":
    main()
