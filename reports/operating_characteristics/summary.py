"""Sum the study up: sizes pooled and by cell, power beside the plain check, and the figure.

``python -m reports.operating_characteristics.summary`` reads ``cells.csv``, prints the summary and
writes ``summary.csv`` and the figure beside this file.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy import stats

from ruleout.rehearsal.outcomes import binomial_interval

HERE = Path(__file__).parent
ALPHA = 0.05
LEVEL = 0.05
"""Error rate of the acceptance itself."""


def holm(p: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return p-values adjusted for their number.

    References
    ----------
    .. [1] S. Holm, Scand. J. Stat. 6 (1979) 65.
    """
    order = np.argsort(p)
    steps = np.maximum.accumulate((len(p) - np.arange(len(p))) * p[order])
    adjusted = np.empty(len(p))
    adjusted[order] = np.minimum(steps, 1.0)
    return adjusted


def too_many(count: int, total: int, rate: float = ALPHA) -> float:
    """Return the chance of ``count`` or more of ``total`` at ``rate``."""
    return float(stats.binom.sf(count - 1, total, rate))


def pooled(cells: pd.DataFrame) -> pd.DataFrame:
    """Return rates pooled over cells, with intervals and the chance of as many at alpha."""
    rows = []
    for label, column in (
        ("true variant ruled out", "truth_ruled_out"),
        ("any wrong statement", "wrong_statement"),
        ("true variant ruled out by the plain check", "plain_truth_ruled_out"),
    ):
        count, total = int(cells[column].sum()), int(cells["data_sets"].sum())
        low, high = binomial_interval(count, total)
        rows.append((label, count, total, count / total, low, high, too_many(count, total)))
    count, total = int(cells["not_judged"].sum()), int(cells["data_sets"].sum())
    low, high = binomial_interval(count, total)
    rows.append(("some variant not judged", count, total, count / total, low, high, np.nan))
    columns = ["what", "count", "data_sets", "rate", "low", "high", "chance_of_as_many_at_alpha"]
    return pd.DataFrame(rows, columns=columns)


def _pairs(cells: pd.DataFrame) -> list[tuple[str, float, float]]:
    """Return (cell and rival, power, plain power) of every rival."""
    found = []
    for row in cells.to_dict("records"):
        if isinstance(row["power"], str) and row["power"]:
            ours = dict(part.split("=") for part in row["power"].split(";"))
            plain = dict(part.split("=") for part in row["plain_power"].split(";"))
            found += [
                (f"{row['cell']}: {rival}", float(ours[rival]), float(plain[rival]))
                for rival in ours
            ]
    return found


def draw_figure(cells: pd.DataFrame, troubled: pd.DataFrame) -> None:
    """Write sizes by cell, power beside the plain check, and sizes where the guarantee breaks."""
    from matplotlib.figure import Figure

    from ruleout.report.style import COLOURS, FAINT, INK, MM, PAGE, figure_style
    from ruleout.report.writing import save_figure

    with figure_style():
        figure = Figure(figsize=(PAGE * MM, 70 * MM), layout="constrained")
        size, power, broken = figure.subplots(1, 3, width_ratios=[1.1, 1.1, 0.8])
        for axes, table, labels in (
            (size, cells, cells["cell"].str[3:]),
            (broken, troubled, troubled["trouble"]),
        ):
            y = np.arange(len(table))[::-1]
            rate = table["size"].to_numpy(dtype=float)
            reach = np.array([rate - table["size_low"], table["size_high"] - rate])
            axes.errorbar(
                rate, y, xerr=np.abs(reach), fmt="o", color=COLOURS[0], ms=3, elinewidth=0.7
            )
            axes.axvline(ALPHA, color=INK, lw=0.5, ls=(0, (4, 3)))
            axes.set_yticks(y, labels.str.replace("_", " "))
            axes.set_xlabel("true variant ruled out")
        size.set_xlim(left=-0.01)
        broken.set_xlim(-0.03, 1.03)
        found = _pairs(cells)
        y = np.arange(len(found))[::-1]
        ours, plain = (np.array([row[k] for row in found]) for k in (1, 2))
        power.hlines(y, plain, ours, color=FAINT, lw=1.2)
        power.plot(plain, y, "s", color=COLOURS[1], ms=3.5, label="plain predictive check")
        power.plot(ours, y, "o", color=COLOURS[0], ms=3.5, label="calibrated check")
        power.set_yticks(y, [row[0][3:].replace("_", " ") for row in found])
        power.set(xlabel="false variant ruled out", xlim=(-0.03, 1.03))
        power.legend(loc="upper center", bbox_to_anchor=(0.5, 1.14), ncols=2, fontsize=5.5)
        for axes, title in ((size, "size"), (broken, "conditions broken")):
            axes.set_title(title, loc="left")
        save_figure(figure, HERE / "figures", "operating_characteristics")


def main() -> None:
    """Run from the command line."""
    found = pd.read_csv(HERE / "cells.csv", keep_default_na=False, na_values={"size": [""]})
    first = found[found["run"] == "first"]
    sound = first[first["trouble"] == ""].astype(
        dict.fromkeys(("truth_ruled_out", "wrong_statement", "plain_truth_ruled_out"), float)
    )
    chances = np.array(
        [
            too_many(int(k), int(n))
            for k, n in zip(sound["truth_ruled_out"], sound["data_sets"], strict=True)
        ]
    )
    adjusted = holm(chances)
    summary = pooled(sound)
    summary.to_csv(HERE / "summary.csv", index=False, float_format="%.4g")
    print(summary.to_string(index=False))
    print("cells above alpha by Holm:", list(sound["cell"][adjusted <= LEVEL]) or "none")
    troubled = first[(first["trouble"] != "") & (first["trouble"] != "truth not listed")]
    numbers = dict.fromkeys(("size", "size_low", "size_high"), float)
    draw_figure(sound.astype(numbers), troubled.astype(numbers))


if __name__ == "__main__":
    main()
