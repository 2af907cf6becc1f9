"""Whether what the priors predict reaches the data."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.inspection.probe import Probe
from ruleout.inspection.types import Finding
from ruleout.kernel import Status

Array = NDArray[np.float64]
EXPECTED_SHARE = 0.9
"""Share of the data points that should lie within the 95 % range of what the priors predict."""
FEWEST = 20
"""Draws that must be solvable for a range to mean anything."""


@dataclass(frozen=True, slots=True, eq=False)
class Foresight:
    """Prior predictive range at every point, on the working scale; all (n,) arrays.

    ``value`` is NaN where nothing was measured.
    """

    low: Array
    median: Array
    high: Array
    value: Array


def foresee(probe: Probe, q: Array, rng: np.random.Generator) -> Foresight | None:
    """Return what the priors predict at draws ``q``; None where too few can be solved."""
    mu, status = probe.predict(q, 1e-4)
    fine = (status == Status.OK) & np.isfinite(mu).all(axis=1)
    if fine.sum() < FEWEST or not mu.shape[1]:
        return None
    q, mu = q[fine], mu[fine]
    value = np.full(mu.shape[1], np.nan)
    if probe.posterior is not None:
        noise = probe.posterior.noise
        sample = probe.posterior.observed
        mu = noise.working(mu)
        sigma, _ = noise.sigma(q, mu, sample)
        mu = mu + np.nan_to_num(sigma) * rng.standard_normal(mu.shape)
        value = sample.z[0]
    low, median, high = np.nanquantile(mu, [0.025, 0.5, 0.975], axis=0)
    return Foresight(low, median, high, value)


def foresight_table(probe: Probe, found: Foresight | None) -> pd.DataFrame:
    """Return one row per point; none without a foresight."""
    points = probe.points
    use = slice(None) if found is not None else slice(0)
    frame = {
        "variant": np.full(len(points), probe.variant.name, dtype=object)[use],
        "condition": points.condition[use],
        "readout": points.readout[use],
        "time": points.time[use],
    }
    for column in ("low", "median", "high", "value"):
        frame[column] = getattr(found, column) if found is not None else np.empty(0)
    return pd.DataFrame(frame)


def foresight_findings(probe: Probe, found: Foresight) -> Iterator[Finding]:
    """Yield a finding if the priors do not reach the data."""
    use = probe.points.fitted & np.isfinite(found.value)
    if not use.any():
        return
    below, above = use & (found.value < found.low), use & (found.value > found.high)
    outside = below | above
    share = 1.0 - outside.sum() / use.sum()
    if share >= EXPECTED_SHARE:
        return
    counts: dict[tuple[str, str], int] = {}
    for i in np.flatnonzero(outside):
        where = (str(probe.points.readout[i]), str(probe.points.condition[i]))
        counts[where] = counts.get(where, 0) + 1
    readout, condition = max(counts, key=lambda key: counts[key])
    here = (probe.points.readout == readout) & (probe.points.condition == condition)
    side = "above" if (above & here).sum() >= (below & here).sum() else "below"
    yield Finding(
        probe.variant.name,
        "prior predictive",
        readout,
        f"Only {share:.0%} of the data points lie in the 95 % range of what the priors predict; "
        f"most of the others are {readout} in `{condition}`, {side} that range.",
        "Check units, scale and offset of the readout, then widen or move the priors.",
    )
