"""Verdicts on the demonstrations' truths, measured again and again.

``python -m mechanisms_demo.redraw frost_relay --sets 100 --out DIR`` draws the noise anew with the
seeds 1001, 1002, ... and judges every redrawn data set, the best fit standing for the posterior
draws; finished data sets are kept in DIR. It prints how often each verdict was reached.
"""

from __future__ import annotations

import argparse
import importlib
import warnings
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd

from mechanisms_demo.measuring import measure
from ruleout import __version__
from ruleout.case import Case, read_case
from ruleout.pipeline.tasks import Workbench
from ruleout.rehearsal import Spending, judge_simulated
from ruleout.rehearsal.outcomes import VERDICTS, known_everywhere, outcome
from ruleout.store import Store, digest
from ruleout.verdicts import CLAIM_VERDICTS

FIRST_SEED = 1001
EFFORT = "quick"

TRUTHS = {
    "frost_relay": {
        "cold_on_sensor.strength": 0.3,
        "sensor.loss_rate": 0.12,
        "sensor_on_kinase.strength": 0.9,
        "kinase.loss_rate": 0.6,
        "kinase_on_protectant.strength": 0.5,
        "protectant.loss_rate": 0.05,
        "protectant_on_sensor.half": 0.5,
        "protectant_on_sensor.hill": 2.0,
    },
    "lantern_gene": {
        "activator.basal": 2.0,
        "sugar_on_activator.strength": 40.0,
        "activator.loss_rate": 1.2,
        "activator_on_lamp.strength": 0.8,
        "lamp.loss_rate": 0.5,
        "lamp_on_activator.half": 4.0,
        "lamp_on_activator.hill": 2.0,
        "light.scale": 25.0,
    },
    "salt_sense": {
        "salt_on_channel.strength": 0.8,
        "channel.loss_rate": 0.4,
        "channel_on_pump.strength": 1.2,
        "pump.loss_rate": 0.3,
    },
    "spore_wake": {
        "nutrient_on_receptor.strength": 0.08,
        "receptor.loss_rate": 0.06,
        "receptor_on_protease.strength": 0.4,
        "protease.loss_rate": 0.25,
        "protease_on_debris.strength": 0.6,
        "debris.loss_rate": 0.08,
        "protease_activity.scale": 400.0,
    },
}
"""True values, one more start of every search."""


def redrawn(case: Case, demo: str, seed: int) -> Case:
    """Return the case with its noise drawn anew."""
    made = importlib.import_module(f"mechanisms_demo.{demo}.make_data")
    rows = measure(made.curves(), made.TIMES, made.NOISE, seed)
    data = pd.DataFrame(rows, columns=["condition", "time", "readout", "value"])
    data = data.assign(sd=np.nan, replicate="")
    return replace(
        case,
        experiments=replace(case.experiments, data=data),
        hashes={**case.hashes, "data.csv": digest(demo, seed)},
    )


def main() -> None:
    """Run from the command line."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("demo", choices=list(TRUTHS))
    parser.add_argument("--sets", type=int, default=100)
    parser.add_argument("--out", type=Path, required=True)
    given = parser.parse_args()
    case = read_case(Path(__file__).parent / given.demo)
    variants = Workbench(case).variants
    store = Store(given.out)
    found = []
    for seed in range(FIRST_SEED, FIRST_SEED + given.sets):
        key = f"{given.demo}/{seed}"
        fingerprint = digest(__version__, sorted(case.hashes.items()), EFFORT, seed)
        piece = store.get(key, fingerprint)
        if piece is None:
            known = known_everywhere(variants, TRUTHS[given.demo])
            settled = judge_simulated(
                redrawn(case, given.demo, seed), Spending(seed=seed, effort=EFFORT), known
            )
            piece = {k: np.asarray(v) for k, v in outcome(settled).items()}
            store.put(key, fingerprint, piece)
        found.append(piece)
    print(f"{given.demo}: {len(found)} redraws, seeds {FIRST_SEED} to {seed}")
    for kind, names, words in (
        ("verdict", list(variants.variants), VERDICTS),
        ("claim", [c.name for c in variants.claims], CLAIM_VERDICTS),
    ):
        codes = np.stack([piece[kind] for piece in found])
        for j, name in enumerate(names):
            counts = Counter(words[c] for c in codes[:, j])
            print(f"  {name}: " + ", ".join(f"{w} {n}" for w, n in counts.most_common()))


if __name__ == "__main__":
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        main()
