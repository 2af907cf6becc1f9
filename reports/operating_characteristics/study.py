"""Measure the error rates of the verdicts on simulated data.

``python -m reports.operating_characteristics.study run --out DIR --sets 100`` simulates and judges
(data set i of every cell before data set i + 1 of any, so that it may be stopped at any time and
goes on where it stopped); ``... study tables --out DIR`` writes the tables beside this file.
"""

from __future__ import annotations

import argparse
import tempfile
import time
import warnings
from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from reports.operating_characteristics.shapes import HEAD, SHAPES
from ruleout import __version__
from ruleout.case import Case, read_case
from ruleout.checks import maximum, standardise
from ruleout.fitting import Posterior
from ruleout.pipeline.tasks import Workbench
from ruleout.pipeline.variants import Settled
from ruleout.rehearsal import Spending, coordinates, judge_simulated, simulate
from ruleout.rehearsal.outcomes import (
    VERDICTS,
    binomial_interval,
    hold_truth,
    known_everywhere,
    outcome,
    wrong_statements,
)
from ruleout.seeds import generator, sequence
from ruleout.store import Store, digest
from ruleout.verdicts import NOT_JUDGED, RULED_OUT

HERE = Path(__file__).parent
ALPHA = 0.05
EFFORT = "quick"
SPREAD = 1.5
"""True parameters lie within this factor of the nominal ones in 95 % of the data sets."""
SERIAL_CORRELATION = 0.6
PLAIN_REPLICATES = 199


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell of the design.

    Attributes
    ----------
    name, shape, size : str
    noise : float
        Standard deviation as a share of a readout's range over the nominal curves.
    kind : {"free", "given", "replicates"}
        What is known of the noise; ``replicates``: three at each time, a third of the times.
    prior : {"lognormal", "loguniform"}
    truth : str
        Part of the label of the true variant.
    seed, again : int
        Of the run, and of the one rerun a failing cell is allowed; listed beforehand.
    trouble : str
        What breaks the guarantee: ``heavy tails``, ``autocorrelated``, ``understated sd``,
        ``outliers``, ``truth not listed``.
    """

    name: str
    shape: str
    size: str
    noise: float
    kind: str
    prior: str
    truth: str
    seed: int
    again: int
    trouble: str = ""


def _cells() -> tuple[Cell, ...]:
    rows = (
        ("relay", "small", 0.06, "free", "lognormal", "brake=inhibits/hill", ""),
        ("relay", "medium", 0.03, "free", "loguniform", "brake=absent", ""),
        ("forward_or_back", "small", 0.06, "given", "loguniform", "forward=stimulates", ""),
        ("forward_or_back", "medium", 0.12, "free", "lognormal", "forward=stimulates", ""),
        ("gene", "small", 0.06, "replicates", "lognormal", "self=inhibits", ""),
        ("gene", "medium", 0.12, "free", "loguniform", "self=inhibits", ""),
        ("conversion", "small", 0.03, "free", "loguniform", "shortcut=absent", ""),
        ("conversion", "medium", 0.12, "given", "lognormal", "shortcut=converts", ""),
        ("saturation", "small", 0.06, "free", "loguniform", "turnover=converts/saturating", ""),
        ("saturation", "medium", 0.12, "replicates", "lognormal", "turnover=converts/linear", ""),
        ("oscillator", "small", 0.12, "free", "lognormal", "extra=absent", ""),
        ("oscillator", "medium", 0.03, "given", "loguniform", "extra=absent", ""),
        ("relay", "medium", 0.06, "free", "lognormal", "brake=absent", "heavy tails"),
        ("relay", "medium", 0.06, "free", "lognormal", "brake=absent", "autocorrelated"),
        ("relay", "medium", 0.06, "given", "lognormal", "brake=absent", "understated sd"),
        ("relay", "medium", 0.06, "free", "lognormal", "brake=absent", "outliers"),
        ("gene", "medium", 0.06, "free", "lognormal", "self=inhibits", "truth not listed"),
    )
    return tuple(
        Cell(f"{i + 1:02d}_{row[0]}_{row[1]}", *row[:6], 4100 + i, 5100 + i, row[6])
        for i, row in enumerate(rows)
    )


CELLS = _cells()


class Bench:
    """A cell made ready: its case on the design's points, the truth's posterior and true sd."""

    def __init__(self, cell: Cell) -> None:
        self.cell = cell
        self.shape = SHAPES[cell.shape]
        self.case = _template(cell, listed=True)
        self.bench = Workbench(self.case)
        # A truth outside the list is simulated from the full mechanism, judged without it.
        labels = {name: v.label for name, v in self.bench.variants.variants.items()}
        self.truth = next(name for name, label in labels.items() if cell.truth in label)
        self.posterior: Posterior = self.bench.posterior(self.truth)
        nominal = self.posterior.zeta(self._coordinates(self.shape.values))[0][0]
        which = self.posterior.observations.which
        width = np.array([np.ptp(nominal[which == r]) for r in range(which.max() + 1)])
        self.sd = cell.noise * width[which]
        if cell.trouble == "truth not listed":
            self.case = _template(cell, listed=False)

    def _coordinates(self, values: Mapping[str, float]) -> NDArray[np.float64]:
        return coordinates(self.posterior, values)[None]

    def values(self, rng: np.random.Generator) -> dict[str, float]:
        """Return the truth of one data set."""
        jitter = np.log(SPREAD) / 1.96 * rng.standard_normal(len(self.shape.values))
        return {
            name: value * float(np.exp(j))
            for (name, value), j in zip(self.shape.values.items(), jitter, strict=True)
        }

    def draw(self, i: int, seed: int) -> tuple[Case, dict[str, float]]:
        """Return the simulated case of data set ``i`` and its truth."""
        rng = generator(seed, self.cell.name, "data", i)
        values = self.values(rng)
        simulated = simulate(_with_sd(self.case, self.sd), self.posterior, values, rng, sd=self.sd)
        data = simulated.experiments.data
        assert data is not None
        if self.cell.trouble:
            clean = self.posterior.zeta(self._coordinates(values))[0][0]
            value, stated = _troubled(self.cell.trouble, clean, self.sd, data, rng)
            data["value"], data["sd"] = value, stated
        truth = dict(values)
        observations = self.posterior.observations
        for r, readout in enumerate(observations.readouts):
            if readout.noise == "free":
                truth[f"{readout.name}.sd"] = float(self.sd[observations.which == r][0])
        return simulated, truth


def _troubled(
    trouble: str,
    clean: NDArray[np.float64],
    sd: NDArray[np.float64],
    data: pd.DataFrame,
    rng: np.random.Generator,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return values whose errors break an assumption, and the sd stated for them."""
    n = len(clean)
    normal = rng.standard_normal(n)
    match trouble:
        case "heavy tails":
            return clean + sd * rng.standard_t(3, n) / np.sqrt(3.0), sd
        case "autocorrelated":
            error = normal.copy()
            rho = SERIAL_CORRELATION
            for _, series in data.groupby(["condition", "readout"], sort=False):
                at = series.index.to_numpy()
                for before, now in pairwise(at):
                    error[now] = rho * error[before] + np.sqrt(1 - rho**2) * normal[now]
            return clean + sd * error, sd
        case "understated sd":
            return clean + sd * normal, 0.8 * sd
        case "outliers":
            wild = rng.uniform(size=n) < 0.03
            return clean + sd * np.where(wild, 5.0 * np.sign(normal), normal), sd
    return clean + sd * normal, sd


def _with_sd(case: Case, sd: NDArray[np.float64]) -> Case:
    data = case.experiments.data
    assert data is not None
    return replace(case, experiments=replace(case.experiments, data=data.assign(sd=sd)))


def _template(cell: Cell, listed: bool) -> Case:
    """Return the cell's case with placeholder values."""
    shape = SHAPES[cell.shape]
    mechanism = shape.mechanism
    if not listed:
        mechanism = mechanism.replace(
            '["stimulates", "inhibits", "absent"]', '["stimulates", "absent"]'
        )
    priors = []
    for name, nominal in shape.values.items():
        contested = (
            name.endswith(".strength")
            and f"[edge.{name.split('.')[0]}]" in mechanism
            and ("contested" in mechanism.split(f"[edge.{name.split('.')[0]}]")[1].split("[")[0])
        )
        if contested:
            prior = f"{{ low = {nominal * 1e-4:g}, high = {nominal * 30:g} }}"
        elif cell.prior == "lognormal":
            fold = 100 if name in shape.wide else 10
            prior = f"{{ median = {1.5 * nominal:g}, fold = {fold} }}"
        else:
            top = 1000 if name in shape.wide else 30
            prior = f"{{ low = {nominal / 30:g}, high = {nominal * top:g} }}"
        priors.append(f'"{name}" = {prior}')
    if "[prior]" not in mechanism:
        mechanism += "[prior]\n"
    text = f'title = "{cell.name}"\n{HEAD}{mechanism}' + "\n".join(priors) + "\n"
    readouts = [f'[readout.{n}_seen]\nof = "{n}"\nnoise = "{cell.kind}"' for n in shape.readouts]
    conditions = [f"[condition.{n}]\n{body}" for n, body in shape.conditions.items()]
    times = shape.times[cell.size]
    repeats = 1
    if cell.kind == "replicates":
        times, repeats = times[1::3], 3
    rows = [
        f"{c},{t:g},{n}_seen,{1 + 0.1 * k},1.0,{k + 1}"
        for c in shape.conditions
        for n in shape.readouts
        for t in times
        for k in range(repeats)
    ]
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "mechanism.toml").write_text(text)
        (folder / "experiments.toml").write_text("\n".join(readouts + conditions) + "\n")
        (folder / "data.csv").write_text(
            "\n".join(["condition,time,readout,value,sd,replicate", *rows]) + "\n"
        )
        return read_case(folder)


def plain_p(bench: Workbench, settled: Settled, seed: int) -> NDArray[np.float64]:
    """Return p-values of the plain predictive check of every variant, (V,).

    Replicates are drawn from the best fit and compared with the data at that fit, none refitted:
    serial correlation and, where the noise is known, misfit, combined as in the calibrated check.
    """
    out = np.full(len(settled.order), np.nan)
    for v, name in enumerate(settled.order):
        checker = bench.checker(name)
        posterior, statistics = checker.posterior, checker._statistics
        counting = np.flatnonzero([c.counts for c in statistics.columns])
        best = settled.fits[name].best[None]
        zeta, _ = posterior.zeta(best)
        if not len(counting) or not np.isfinite(zeta).all():
            continue
        columns = tuple(statistics.columns[j] for j in counting)
        rngs = [generator(seed, name, "plain", b) for b in range(2 * PLAIN_REPLICATES)]
        many = np.repeat(best, len(rngs), axis=0)
        curves = np.repeat(zeta, len(rngs), axis=0)
        sample = posterior.noise.draw(many, curves, posterior.observed, rngs)
        middle = np.full(curves.shape, 0.5)
        replicated = statistics(many, curves, sample, middle)[:, counting]
        observed = statistics(best, zeta, posterior.observed, middle[:1])[:, counting]
        standard = standardise(replicated[:PLAIN_REPLICATES], columns)
        extreme = maximum(observed, columns, standard)[0]
        m = maximum(replicated[PLAIN_REPLICATES:], columns, standard)
        out[v] = (np.sum(m >= extreme) + 1) / (PLAIN_REPLICATES + 1)
    return out


def run(out: Path, sets: int, cells: list[Cell], again: bool, minutes: float) -> None:
    """Simulate and judge, going on from what is in ``out``."""
    store = Store(out)
    benches = {cell.name: Bench(cell) for cell in cells}
    begun = time.monotonic()
    for i in range(sets):
        for cell in cells:
            if time.monotonic() - begun > 60 * minutes:
                return
            seed = cell.again if again else cell.seed
            fingerprint = digest(__version__, cell, EFFORT, seed)
            key = f"{cell.name}/{seed}-{i:04d}"
            if store.get(key, fingerprint) is not None:
                continue
            bench = benches[cell.name]
            case, values = bench.draw(i, seed)
            judged = Workbench(case)
            child = int(sequence(seed, cell.name, "judged", i).generate_state(1)[0])
            settings = Spending(seed=child, effort=EFFORT, alpha=ALPHA)
            settled = judge_simulated(case, settings, known_everywhere(judged.variants, values))
            store.put(
                key, fingerprint, {**outcome(settled), "plain": plain_p(judged, settled, child)}
            )


def tables(out: Path, cells: list[Cell]) -> pd.DataFrame:
    """Return one row per cell and run."""
    store = Store(out)
    rows = []
    for cell in cells:
        bench = Bench(cell)
        variants = Workbench(bench.case).variants
        names = list(variants.variants)
        for run_name, seed in (("first", cell.seed), ("again", cell.again)):
            found = []
            while True:
                key = f"{cell.name}/{seed}-{len(found):04d}"
                piece = store.get(key, digest(__version__, cell, EFFORT, seed))
                if piece is None:
                    break
                found.append(piece)
            if found:
                stacked = {k: np.stack([f[k] for f in found]) for k in found[0]}
                rows.append(_row(cell, run_name, seed, bench, variants, names, stacked))
    return pd.DataFrame(rows)


def _row(cell, run_name, seed, bench, variants, names, found):  # type: ignore[no-untyped-def]
    listed = cell.trouble != "truth not listed"
    n = len(found["verdict"])
    ruled_out = found["verdict"] == VERDICTS.index(RULED_OUT)
    row = {
        "cell": cell.name,
        "run": run_name,
        "seed": seed,
        "trouble": cell.trouble,
        "shape": cell.shape,
        "points": len(bench.case.experiments.data),
        "noise": cell.noise,
        "noise_known_from": cell.kind,
        "prior": cell.prior,
        "truth": cell.truth,
        "data_sets": n,
        "not_judged": int(np.sum(np.any(found["verdict"] == VERDICTS.index(NOT_JUDGED), axis=1))),
    }
    if listed:
        holds = hold_truth(variants, bench.truth)
        t = names.index(bench.truth)
        wrong = wrong_statements(
            variants, bench.truth, found["verdict"], found["claim"], found["contains"]
        )
        row |= {
            "truth_ruled_out": int(ruled_out[:, t].sum()),
            "truth_p_at_most_alpha": int(np.sum(found["p_value"][:, t] <= ALPHA)),
            "truth_checked": int(np.isfinite(found["p_value"][:, t]).sum()),
            "wrong_statement": int(wrong.sum()),
            "plain_truth_ruled_out": int(np.sum(found["plain"][:, t] <= ALPHA)),
        }
        rivals = [j for j in range(len(names)) if not holds[j]]
    else:
        rivals = list(range(len(names)))
    row["power"] = ";".join(f"{names[j]}={ruled_out[:, j].mean():.2f}" for j in rivals)
    row["plain_power"] = ";".join(
        f"{names[j]}={np.mean(found['plain'][:, j] <= ALPHA):.2f}" for j in rivals
    )
    if listed:
        low, high = binomial_interval(row["truth_ruled_out"], n)
        row |= {"size": row["truth_ruled_out"] / n, "size_low": low, "size_high": high}
    return row


def main() -> None:
    """Run from the command line."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("what", choices=["run", "tables"])
    parser.add_argument("--out", type=Path, required=True)
    parser.add_argument("--sets", type=int, default=100)
    parser.add_argument("--minutes", type=float, default=1e9)
    parser.add_argument("--cells", nargs="*", default=[c.name for c in CELLS])
    parser.add_argument("--again", action="store_true")
    given = parser.parse_args()
    cells = [c for c in CELLS if c.name in given.cells]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        if given.what == "run":
            run(given.out, given.sets, cells, given.again, given.minutes)
        else:
            found = tables(given.out, cells)
            found.to_csv(HERE / "cells.csv", index=False, float_format="%.4g")
            print(found.to_string())


if __name__ == "__main__":
    main()
