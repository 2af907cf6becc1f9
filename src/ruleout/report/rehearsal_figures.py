"""Figures of a rehearsal: which wirings could be ruled out, and how that grows with the effort."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from ruleout.rehearsal import AS_GIVEN, Rehearsal
from ruleout.report.style import COLOURS, COLUMN, FAINT, INK, MARKERS, MM, PAGE

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

CELL: Final = 9.0
"""Side of a cell of the heat map, in millimetres."""
MOST_NUMBERED: Final = 20
"""Variants up to which cells carry their numbers."""
_RAMP: Final = ("#ffffff", "#dbe6f2", "#9fbfdf", "#5489c0", "#1f5fa8", "#0f3765")
AXIS_WORDS: Final = {
    "replicates": "replicates of every point",
    "noise": "noise, as a factor",
    "times": "times of every series",
}


def power_figure(rehearsal: Rehearsal, design: str = AS_GIVEN) -> Figure:
    """Return a heat map of how often each variant (column) was ruled out, by true variant (row).

    Cells of variants that are or contain the true one are framed: there, low is right.
    """
    from matplotlib.colors import LinearSegmentedColormap
    from matplotlib.figure import Figure

    table = rehearsal.power[rehearsal.power["design"] == design]
    truths = list(dict.fromkeys(table["truth"]))
    rivals = list(dict.fromkeys(table["rival"]))
    values = table["rate"].to_numpy(dtype=float).reshape(len(truths), len(rivals))
    holds = table["holds_truth"].to_numpy(dtype=bool).reshape(values.shape)
    side = min(CELL, (PAGE - 40) / len(rivals))
    left, top, bottom, right = 14.0, 12.0, 4.0, 18.0
    width, height = side * len(rivals), side * len(truths)
    size = max(left + width + right, COLUMN / 2), top + max(height, 24.0) + bottom
    figure = Figure(figsize=(size[0] * MM, size[1] * MM))
    axes = figure.add_axes(
        (left / size[0], 1 - (top + height) / size[1], width / size[0], height / size[1])
    )
    ramp = LinearSegmentedColormap.from_list("power", _RAMP)
    drawn = axes.imshow(values, vmin=0, vmax=1, cmap=ramp, aspect="auto")
    axes.set_xticks(range(len(rivals)), rivals)
    axes.set_yticks(range(len(truths)), truths)
    axes.xaxis.tick_top()
    axes.xaxis.set_label_position("top")
    axes.tick_params(length=0)
    axes.set(xlabel="ruled out", ylabel="true")
    if len(rivals) > MOST_NUMBERED:
        axes.tick_params(axis="x", rotation=90)
    _cells(axes, values, holds, numbered=len(rivals) <= MOST_NUMBERED)
    for spine in axes.spines.values():
        spine.set(visible=True, color=FAINT)
    bar = figure.add_axes(
        ((left + width + 4) / size[0], 1 - (top + 22) / size[1], 2.5 / size[0], 20 / size[1])
    )
    figure.colorbar(drawn, cax=bar, ticks=[0, 0.5, 1])
    bar.set_title("rate", loc="left", fontsize=6)
    return figure


def _cells(axes: Axes, values: np.ndarray, holds: np.ndarray, *, numbered: bool) -> None:
    from matplotlib.patches import Rectangle

    for (i, j), value in np.ndenumerate(values):
        if numbered and np.isfinite(value):
            axes.text(
                j,
                i,
                f"{100 * value:.0f}",
                ha="center",
                va="center",
                fontsize=6,
                color="white" if value > 0.55 else INK,
            )
        if holds[i, j]:
            axes.add_patch(
                Rectangle((j - 0.46, i - 0.46), 0.92, 0.92, fill=False, edgecolor=INK, lw=0.9)
            )


def variation_figure(rehearsal: Rehearsal) -> Figure | None:
    """Return power against what was varied, one panel per true variant; None if nothing was.

    Rivals that are false are coloured, with 95 % binomial intervals; the true variant is grey.
    """
    from matplotlib.figure import Figure

    what = rehearsal.meta["varied"]
    if not what:
        return None
    table = rehearsal.power[rehearsal.power["design"] != AS_GIVEN]
    table = table.assign(at=table["design"].str.partition("=")[2].astype(float))
    truths = list(dict.fromkeys(table["truth"]))
    rivals = list(dict.fromkeys(table["rival"]))
    columns = min(3, len(truths))
    rows = -(-len(truths) // columns)
    figure = Figure(
        figsize=(max(COLUMN, 60 * columns) * MM, (46 * rows + 8) * MM), layout="constrained"
    )
    panels = np.ravel(figure.subplots(rows, columns, sharex=True, sharey=True, squeeze=False))
    for axes, truth in zip(panels, truths, strict=False):
        mine = table[table["truth"] == truth]
        for k, rival in enumerate(rivals):
            line = mine[mine["rival"] == rival].sort_values("at")
            holds = bool(line["holds_truth"].iloc[0])
            if holds and rival != truth:
                continue
            colour = FAINT if holds else COLOURS[k % len(COLOURS)]
            middle = line["rate"].to_numpy(dtype=float)
            reach = [middle - line["low"], line["high"] - middle]
            axes.errorbar(
                line["at"],
                middle,
                yerr=np.abs(np.array(reach, dtype=float)),
                color=colour,
                marker=MARKERS[k % len(MARKERS)],
                markersize=3,
                elinewidth=0.6,
                label=f"{rival} (true)" if holds else rival,
            )
        axes.axhline(rehearsal.meta["alpha"], color=INK, lw=0.5, ls=(0, (4, 3)))
        axes.set(title=f"{truth} true", ylim=(-0.03, 1.03), xlabel=AXIS_WORDS[what])
        axes.legend(fontsize=5.5, loc="center right")
    for axes in panels[::columns]:
        axes.set_ylabel("rate of ruling out")
    for axes in panels[len(truths) :]:
        axes.set_axis_off()
    return figure
