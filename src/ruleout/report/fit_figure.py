"""Fitted bands over the data, and check statistics against their replicates."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Final

import numpy as np
import pandas as pd

from ruleout.report.panels import STEADY, Panel, panels_of, value_range
from ruleout.report.style import (
    COLUMN,
    FAINT,
    INK,
    MM,
    PAGE,
    VERDICT_COLOURS,
    VERDICT_SIGNS,
    condition_styles,
)
from ruleout.report.tables import variant_row
from ruleout.report.words import VERDICTS, check_words, p_text
from ruleout.verdicts.types import Judgement

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_COLUMNS: Final = 4
PANEL_HEIGHT: Final = 34.0
MOST_CHECK_PANELS: Final = 24


def conditions_in(judgement: Judgement) -> list[str]:
    """Return the names of all conditions, in file order."""
    return list(dict.fromkeys(judgement.residuals["condition"]))


def fit_figure(judgement: Judgement, variant: str) -> Figure:
    """Return a variant's fitted bands (5-95 %) over the data, one panel a condition and readout."""
    from matplotlib.figure import Figure

    panels = panels_of(judgement, variant)
    styles = condition_styles(conditions_in(judgement))
    readouts = list(dict.fromkeys(p.readout for p in panels))
    per_row = max(sum(p.readout == r for p in panels) for r in readouts)
    columns = min(per_row, MOST_COLUMNS)
    rows_of = {r: -(-sum(p.readout == r for p in panels) // columns) for r in readouts}
    rows = sum(rows_of.values())
    width = PAGE if columns > 2 else COLUMN
    height = PANEL_HEIGHT * rows + 8
    figure = Figure(figsize=(width * MM, height * MM))
    figure.text(
        2 / width, 1 - 2 / height, _title(judgement, variant), va="top", fontsize=7, weight="bold"
    )
    grid = figure.add_gridspec(
        rows,
        columns,
        left=13 / width,
        right=1 - 2 / width,
        bottom=9 / height,
        top=1 - 10.5 / height,
        wspace=0.28,
        hspace=0.55,
    )
    row = 0
    for readout in readouts:
        mine = [p for p in panels if p.readout == readout]
        limits = value_range(mine)
        for i, panel in enumerate(mine):
            axes = figure.add_subplot(grid[row + i // columns, i % columns])
            _draw_panel(axes, panel, styles)
            axes.set_ylim(*limits)
            axes.set_ylabel(readout if i % columns == 0 else "")
            last = i + columns >= len(mine) and panel.condition != STEADY
            axes.set_xlabel(f"time ({judgement.meta['time_unit']})" if last else "")
        row += rows_of[readout]
    return figure


def _title(judgement: Judgement, variant: str) -> str:
    row = variant_row(judgement, variant)
    p = f", p = {p_text(row['p_value'])}" if row["verdict"] != "not_judged" else ""
    why = f", decided by: {check_words(row['decisive_check'])}" if row["decisive_check"] else ""
    return f"{variant}: {VERDICTS[row['verdict']]}{p}{why}"


def _draw_panel(axes: Axes, panel: Panel, styles: Mapping[str, tuple[str, str]]) -> None:
    if panel.condition == STEADY:
        _draw_steady(axes, panel, styles)
    else:
        colour, marker = styles[panel.condition]
        for _, curve in panel.curves.groupby("replicate", sort=False):
            _draw_band(axes, curve.sort_values("time"), colour)
        _draw_points(axes, panel.points["time"], panel.points, colour, marker)
    name = "steady states" if panel.condition == STEADY else panel.condition
    axes.set_title(name + (" (held out)" if panel.held_out else ""), loc="left", pad=3)
    if panel.fails:
        red = VERDICT_COLOURS["ruled_out"]
        for spine in axes.spines.values():
            spine.set(visible=True, color=red, linewidth=1.0)
        # More words than two would run into the condition's name.
        more = ", …" if len(panel.fails) > 2 else ""
        failed = f"{VERDICT_SIGNS['ruled_out']} {', '.join(panel.fails[:2])}{more}"
        axes.set_title(failed, loc="right", pad=3, color=red, fontsize=6)


def _draw_band(axes: Axes, curve: pd.DataFrame, colour: str) -> None:
    time = curve["time"].to_numpy(float)
    axes.fill_between(time, curve["low"], curve["high"], color=colour, alpha=0.25, linewidth=0)
    best = curve["best"].to_numpy(float)
    beyond = curve["extrapolated"].to_numpy(bool)
    axes.plot(time, np.where(beyond, np.nan, best), color=colour)
    if beyond.any():
        joined = beyond | np.append(beyond[1:], False)
        axes.plot(time, np.where(joined, best, np.nan), color=colour, linestyle=(0, (2, 1.5)))


def _draw_points(axes: Axes, x: pd.Series, points: pd.DataFrame, colour: str, marker: str) -> None:
    open_ = (points["held_out"].astype(bool) | points["censored"].astype(bool)).to_numpy()
    for which, face in ((~open_, colour), (open_, "white")):
        axes.plot(
            x[which],
            points["value"][which],
            linestyle="none",
            marker=marker,
            markersize=3.2,
            markerfacecolor=face,
            markeredgecolor=INK,
            markeredgewidth=0.4,
            clip_on=False,
            zorder=5,
        )


def _draw_steady(axes: Axes, panel: Panel, styles: Mapping[str, tuple[str, str]]) -> None:
    names = list(dict.fromkeys(panel.points["condition"]))
    for x, name in enumerate(names):
        colour, marker = styles[name]
        for row in panel.curves[panel.curves["condition"] == name].itertuples():
            axes.plot(
                [x, x],
                [row.low, row.high],
                color=colour,
                alpha=0.35,
                linewidth=5,
                solid_capstyle="butt",
            )
            axes.plot([x - 0.3, x + 0.3], [row.best, row.best], color=colour)
        points = panel.points[panel.points["condition"] == name]
        where = pd.Series(np.full(len(points), x), index=points.index)
        _draw_points(axes, where, points, colour, marker)
    axes.set_xticks(range(len(names)), names, rotation=90 if len(names) > 4 else 0)


def checks_figure(judgement: Judgement, variants: Sequence[str]) -> Figure | None:
    """Return the most telling check of each variant against its replicates.

    The observed value is the vertical line; the histogram is what the variant itself produces.
    """
    from matplotlib.figure import Figure

    told = [(v, c) for v in variants[:MOST_CHECK_PANELS] if (c := _telling_check(judgement, v))]
    if not told:
        return None
    columns = min(len(told), MOST_COLUMNS)
    rows = -(-len(told) // columns)
    width = PAGE if columns > 2 else COLUMN
    height = 30.0 * rows + 6
    figure = Figure(figsize=(width * MM, height * MM))
    grid = figure.add_gridspec(
        rows,
        columns,
        left=9 / width,
        right=1 - 2 / width,
        bottom=8 / height,
        top=1 - 8 / height,
        wspace=0.25,
        hspace=0.75,
    )
    verdicts = judgement.variants.set_index("variant")["verdict"]
    for i, (variant, check) in enumerate(told):
        axes = figure.add_subplot(grid[i // columns, i % columns])
        _draw_check(axes, judgement, variant, check, verdicts[variant])
        if i % columns == 0:
            axes.set_ylabel("replicates")
    return figure


def _telling_check(judgement: Judgement, variant: str) -> str:
    """Return the decisive check, else the counting one with the smallest p, that has replicates."""
    drawn = set(judgement.replicates["check"][judgement.replicates["variant"] == variant])
    row = variant_row(judgement, variant)
    if row["decisive_check"] in drawn:
        return str(row["decisive_check"])
    checks = judgement.checks
    mine = checks[(checks["variant"] == variant) & checks["check"].isin(drawn)]
    return "" if mine.empty else str(mine["check"].iloc[int(mine["p_value"].argmin())])


def _draw_check(axes: Axes, judgement: Judgement, variant: str, check: str, verdict: str) -> None:
    replicates, checks = judgement.replicates, judgement.checks
    draws = replicates["value"][(replicates["variant"] == variant) & (replicates["check"] == check)]
    row = checks[(checks["variant"] == variant) & (checks["check"] == check)].iloc[0]
    colour = VERDICT_COLOURS[verdict]
    draws = draws[np.isfinite(draws)]
    axes.hist(draws, bins=min(30, max(8, len(draws) // 10)), color=FAINT, edgecolor="none")
    axes.axvline(row["observed"], color=colour, linewidth=1.2)
    axes.plot(
        [row["observed"]],
        [1.0],
        transform=axes.get_xaxis_transform(),
        marker="v",
        markersize=4,
        color=colour,
        clip_on=False,
    )
    axes.set_title(
        f"{variant}: {VERDICTS[verdict]}, p = {p_text(row['p_value'])}", loc="left", pad=6
    )
    axes.set_xlabel(check_words(check), fontsize=6)
