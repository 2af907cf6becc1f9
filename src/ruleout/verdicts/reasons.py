"""Why a variant fails, in words."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ruleout.checks import Column

Array = NDArray[np.float64]


def _number(x: float) -> str:
    return f"{x:.2g}" if abs(x) < 100 else f"{x:.0f}"


def where_it_shows(columns: tuple[Column, ...], observed: Array, replicated: Array) -> str:
    """Return where the fit leaves the data most, against what replicates do, or an empty string.

    Parameters
    ----------
    columns : tuple of Column, length C
    observed : (C,) array
    replicated : (R, C) array
    """
    best, sentence = 0.0, ""
    for j, column in enumerate(columns):
        kind = column.check.split(":")[0]
        if kind not in ("above", "below"):
            continue
        spread = replicated[:, j].std()
        excess = (observed[j] - replicated[:, j].mean()) / spread if spread > 0 else 0.0
        if excess > best and np.mean(replicated[:, j] >= observed[j]) <= 0.02:
            low, high = np.quantile(replicated[:, j], [0.05, 0.95])
            word = "undershoots" if kind == "above" else "overshoots"
            best = excess
            sentence = (
                f"the fitted {column.readout} in `{column.condition}` {word} by "
                f"{_number(observed[j])} where replicates reach {_number(low)} to {_number(high)}"
            )
    return sentence


def reason(
    decisive: Column, columns: tuple[Column, ...], observed: Array, replicated: Array
) -> str:
    """Return one or two clauses that say what ruled a variant out."""
    j = columns.index(decisive)
    value = observed[j]
    top = np.quantile(replicated[:, j], 0.95)
    kind, _, subject = decisive.check.partition(":")
    match kind:
        case "edge":
            what = " and ".join(f"`{name}`" for name in subject.split("+"))
            first = (
                f"letting {what} in improves the fit by {_number(value)} in -2 log posterior; "
                f"without it in truth, by {_number(max(top, 0.0))} at most in 95 % of replicates"
            )
        case "misfit":
            first = (
                f"the residuals are too large for the noise: chi-square {_number(value)}, "
                f"replicates up to {_number(top)}"
            )
        case _:
            first = (
                f"neighbouring residuals go together: serial correlation {_number(value)}, "
                f"replicates up to {_number(top)}"
            )
    shown = where_it_shows(columns, observed, replicated)
    return f"{first}; {shown}" if shown else first
