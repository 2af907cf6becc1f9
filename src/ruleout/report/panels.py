"""What each panel of a fit shows, gathered from the tables for every painter."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from ruleout.report.tables import variant_row
from ruleout.report.words import FAILURES
from ruleout.verdicts.types import Judgement

STEADY = ""
"""Condition of a panel that shows steady states side by side."""


@dataclass(frozen=True, slots=True, eq=False)
class Panel:
    """One condition and readout of one variant, or one readout's steady states.

    Attributes
    ----------
    condition, readout : str
        ``condition`` is ``STEADY`` for steady states, one per row of ``curves``.
    curves : DataFrame
        Rows of ``Judgement.curves``.
    points : DataFrame
        Rows of ``Judgement.residuals``.
    fails : tuple of str
        What fails here by the decisive check or those that explain it, in words.
    held_out : bool
    """

    condition: str
    readout: str
    curves: pd.DataFrame
    points: pd.DataFrame
    fails: tuple[str, ...]
    held_out: bool


def _where_it_fails(judgement: Judgement, variant: Mapping[str, Any]) -> pd.DataFrame:
    """Return the located checks that speak against a ruled-out variant."""
    checks = judgement.checks
    mine: pd.DataFrame = checks[
        (checks["variant"] == variant["variant"]) & (checks["readout"] != "")
    ]
    if variant["verdict"] != "ruled_out":
        return mine.iloc[:0]
    decisive = mine["check"] == variant["decisive_check"]
    failing: pd.DataFrame = mine[decisive | (mine["p_value"] <= judgement.meta["alpha"])]
    return failing


def panels_of(judgement: Judgement, variant: str) -> list[Panel]:
    """Return the panels of a variant: readouts in order, conditions in order within each."""
    failing = _where_it_fails(judgement, variant_row(judgement, variant))
    curves = judgement.curves[judgement.curves["variant"] == variant]
    points = judgement.residuals[judgement.residuals["variant"] == variant]
    panels: list[Panel] = []
    readouts = list(dict.fromkeys([*points["readout"], *curves["readout"]]))
    conditions = list(dict.fromkeys([*points["condition"], *curves["condition"]]))
    for readout in readouts:
        drawn, seen = curves[curves["readout"] == readout], points[points["readout"] == readout]
        failed = failing[failing["readout"] == readout]
        for condition in [*conditions, STEADY]:
            if condition == STEADY:
                c, s = drawn[np.isinf(drawn["time"])], seen[np.isinf(seen["time"])]
                fails = failed[failed["condition"].isin(s["condition"])]
            else:
                c = drawn[(drawn["condition"] == condition) & np.isfinite(drawn["time"])]
                s = seen[(seen["condition"] == condition) & np.isfinite(seen["time"])]
                fails = failed[failed["condition"] == condition]
            if len(s):
                held = bool(s["held_out"].astype(bool).all())
                panels.append(Panel(condition, readout, c, s, _failures(fails["check"]), held))
    return panels


def _failures(checks: Sequence[str]) -> tuple[str, ...]:
    kinds = dict.fromkeys(check.split(":")[0] for check in checks)
    return tuple(FAILURES.get(kind, kind) for kind in kinds)


def value_range(panels: Sequence[Panel]) -> tuple[float, float]:
    """Return the range of values the panels show, with a little room, zero included if near."""
    parts = [p.points["value"].to_numpy(float) for p in panels]
    for panel in panels:
        parts += [panel.curves[k].to_numpy(float) for k in ("low", "high", "best")]
    values = np.concatenate(parts)
    values = values[np.isfinite(values)]
    if not len(values):
        return 0.0, 1.0
    low, high = float(values.min()), float(values.max())
    room = 0.06 * (high - low) or 0.1 * abs(high) or 1.0
    if 0 <= low < 0.35 * high:
        low = room if low == 0 else 0.0
        return -room if low else 0.0, high + room
    return low - room, high + room
