"""Figures of a survey: atlas of minimal wirings, ranking, enrichment of features, traces."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

import numpy as np
import pandas as pd

from ruleout.report.graph_figure import graph_axes, paint
from ruleout.report.style import COLOURS, FAINT, INK, MM, PAGE
from ruleout.report.survey_graph import Pictures
from ruleout.report.survey_words import percent
from ruleout.survey.mechanisms import AnyFamily
from ruleout.survey.types import Survey

if TYPE_CHECKING:
    from matplotlib.figure import Figure

MOST_TILES: Final = 30
COLUMNS: Final = 6
MOST_RANKED: Final = 40
MOST_FEATURES: Final = 24
MOST_TRACES: Final = 12


def of_behaviour(table: pd.DataFrame, behaviour: str) -> pd.DataFrame:
    """Return the rows of one behaviour."""
    return table[table["behaviour"] == behaviour]


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table by column name."""
    return [{str(k): v for k, v in row.items()} for row in table.to_dict("records")]


def best_first(survey: Survey, behaviour: str) -> pd.DataFrame:
    """Return the working topologies, the most robust first."""
    rows = of_behaviour(survey.topologies, behaviour)
    return rows[rows["works"]].sort_values("robustness", ascending=False, kind="stable")


def atlas_figure(survey: Survey, family: AnyFamily, behaviour: str) -> Figure | None:
    """Return the minimal working wirings, each with its robustness; None if there is none."""
    from matplotlib.figure import Figure

    rows = best_first(survey, behaviour)
    rows = rows[rows["minimal"]].head(MOST_TILES)
    if not len(rows):
        return None
    draw = Pictures(family)
    drawn = [draw.of(name) for name in rows["topology"]]
    pictures = [picture for picture, _ in drawn]
    columns = min(COLUMNS, len(pictures))
    width = PAGE / COLUMNS
    scale = min((width - 3.0) / p.size[0] for p in pictures)
    tall = max(p.size[1] for p in pictures) * scale + 7.0
    count = -(-len(pictures) // columns)
    figure = Figure(figsize=(columns * width * MM, count * tall * MM))
    for k, ((picture, ink), row) in enumerate(zip(drawn, records(rows), strict=True)):
        line, column = divmod(k, columns)
        left = column * width + (width - picture.size[0] * scale) / 2
        axes = graph_axes(figure, picture, left, line * tall + 4.5, scale)
        paint(axes, ink, scale)
        figure.text(
            (column + 0.5) / columns,
            1 - (line * tall + 1.0) / (count * tall),
            f"{percent(row['robustness'])} ({percent(row['low'])} to {percent(row['high'])})",
            ha="center",
            va="top",
            fontsize=5.5,
        )
    return figure


def ranking_figure(survey: Survey, behaviour: str) -> Figure | None:
    """Return the most robust topologies with their exact intervals."""
    from matplotlib.figure import Figure

    rows = best_first(survey, behaviour).head(MOST_RANKED)
    if not len(rows):
        return None
    figure = Figure(figsize=(PAGE * MM, (16 + 3.4 * len(rows)) * MM), layout="constrained")
    axes = figure.add_subplot()
    y = np.arange(len(rows))
    share, low, high = (100 * rows[c].to_numpy(float) for c in ("robustness", "low", "high"))
    axes.hlines(y, low, high, color=COLOURS[0], linewidth=1.2)
    for minimal, face, text in ((True, COLOURS[1], "minimal"), (False, "white", "not minimal")):
        at = rows["minimal"].to_numpy(bool) == minimal
        if at.any():
            axes.plot(
                share[at], y[at], "o", markersize=4, markerfacecolor=face,
                markeredgecolor=COLOURS[1], linestyle="none", label=text,
            )  # fmt: skip
    axes.set_yticks(y, [t.replace(";", ",") for t in rows["edges"]], fontsize=5)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    axes.set_xlabel(
        f"parameter sets that show {behaviour} (%), with exact "
        f"{100 * survey.meta['level']:g} % intervals"
    )
    axes.set_xlim(left=0.0)
    axes.legend(loc="lower right")
    return figure


def features_figure(survey: Survey, behaviour: str) -> Figure | None:
    """Return how common features are among working and among all topologies."""
    from matplotlib.figure import Figure

    rows = of_behaviour(survey.features, behaviour)
    if not len(rows) or not rows["working"].iloc[0]:
        return None
    gap = (rows["share_working"] - rows["share_all"]).abs()
    rows = rows.loc[gap.sort_values(ascending=False, kind="stable").index[:MOST_FEATURES]]
    rows = rows.sort_values("share_working", ascending=False, kind="stable")
    figure = Figure(figsize=(PAGE * 0.75 * MM, (18 + 3.8 * len(rows)) * MM), layout="constrained")
    axes = figure.add_subplot()
    y = np.arange(len(rows))
    everywhere, working = 100 * rows["share_all"], 100 * rows["share_working"]
    axes.hlines(y, everywhere, working, color=FAINT, linewidth=1.5, zorder=1)
    marks: list[tuple[Any, str, str, str]] = [
        (everywhere, "o", "white", "of all topologies"),
        (working, "o", COLOURS[1], "of working topologies"),
        (100 * rows["share_robustness"], "|", COLOURS[0], "of showing parameter sets"),
    ]
    for values, marker, face, text in marks:
        edge = COLOURS[0] if marker == "|" else INK
        axes.plot(
            values, y, marker, markersize=5, markerfacecolor=face, markeredgecolor=edge,
            linestyle="none", label=text,
        )  # fmt: skip
    axes.set_yticks(y, rows["feature"], fontsize=6)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    axes.set_xlim(-3, 103)
    axes.set_xlabel("share that has the feature (%)")
    figure.legend(loc="outside upper center", ncols=3)
    return figure


def traces_figure(survey: Survey, family: AnyFamily, behaviour: str) -> Figure | None:
    """Return what the best sets of the most robust topologies do."""
    from matplotlib.figure import Figure

    rows = of_behaviour(survey.traces, behaviour)
    names = list(dict.fromkeys(rows["topology"]))[:MOST_TRACES]
    if not names:
        return None
    columns = min(4, len(names))
    lines = -(-len(names) // columns)
    figure = Figure(figsize=(PAGE * columns / 4 * MM, (34 * lines + 4) * MM), layout="constrained")
    grid = figure.subplots(lines, columns, squeeze=False)
    words = survey.topologies.drop_duplicates("topology").set_index("topology")["edges"]
    for k, axes in enumerate(grid.flat):
        if k >= len(names):
            axes.set_axis_off()
            continue
        mine = rows[rows["topology"] == names[k]]
        for _, line in mine.groupby("line"):
            axes.plot(line["x"], line["output"], color=COLOURS[0])
        if mine["axis"].iloc[0] == "input":
            axes.set_xscale("log")
        axes.set_title(_wrapped(words[names[k]]), fontsize=5)
        axes.set_ylim(bottom=0.0)
        if k % columns == 0:
            axes.set_ylabel(family.output_name)
        if k // columns == lines - 1:
            axes.set_xlabel("input" if mine["axis"].iloc[0] == "input" else "time")
    return figure


def _wrapped(words: str, most: int = 44) -> str:
    lines = [""]
    for part in words.split("; "):
        joined = f"{lines[-1]}, {part}" if lines[-1] else part
        if len(joined) > most and lines[-1]:
            lines[-1] += ","
            lines.append(part)
        else:
            lines[-1] = joined
    return "\n".join(lines)
