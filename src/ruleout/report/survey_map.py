"""The one-edge map: working wirings, linked where they differ by one edge."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

from ruleout.report.style import COLOURS, FAINT, MM, PAGE
from ruleout.report.survey_figures import best_first, of_behaviour
from ruleout.survey.types import Survey

if TYPE_CHECKING:
    from matplotlib.figure import Figure

MOST: Final = 400
"""Topologies on the map, the most robust (and the minimal ones) first."""


def map_figure(survey: Survey, behaviour: str) -> Figure | None:
    """Return the map: rows by number of edges, area by robustness, minimal wirings filled."""
    from matplotlib.collections import LineCollection
    from matplotlib.figure import Figure

    rows = best_first(survey, behaviour)
    rows = rows.sort_values("minimal", ascending=False, kind="stable").head(MOST)
    if not len(rows):
        return None
    place = {name: k for k, name in enumerate(rows["topology"])}
    links = of_behaviour(survey.links, behaviour)
    pairs = np.array(
        [
            (place[a], place[b])
            for a, b in zip(links["topology"], links["other"], strict=True)
            if a in place and b in place
        ],
        dtype=np.int64,
    ).reshape(-1, 2)
    edges = rows["n_edges"].to_numpy(int)
    across = _across(edges, pairs)
    at = np.column_stack([across, edges + _lanes(edges, across)])
    levels = np.unique(edges)
    figure = Figure(figsize=(PAGE * MM, (22 + 17 * len(levels)) * MM), layout="constrained")
    axes = figure.add_subplot()
    axes.add_collection(LineCollection(list(at[pairs]), colors=FAINT, linewidths=0.3, zorder=1))
    size = 2.0 + 60.0 * rows["robustness"].to_numpy(float) / rows["robustness"].max()
    for minimal, face in ((False, "white"), (True, COLOURS[1])):
        mine = rows["minimal"].to_numpy(bool) == minimal
        axes.scatter(
            at[mine, 0], at[mine, 1], s=size[mine], c=face, edgecolors=COLOURS[0],
            linewidths=0.5, zorder=2 + minimal, label="minimal" if minimal else "not minimal",
        )  # fmt: skip
    axes.set_yticks(levels)
    axes.set_ylabel("edges")
    axes.set_xticks([])
    axes.spines["bottom"].set_visible(False)
    total = int(of_behaviour(survey.topologies, behaviour)["works"].sum())
    shown = (
        f"the {len(rows)} minimal or most robust of {total}" if total > len(rows) else f"{total}"
    )
    axes.set_title(
        f"Topologies that show {behaviour} ({shown}), linked where one edge differs; area: "
        "robustness",
        loc="left",
    )
    axes.legend(loc="upper left", bbox_to_anchor=(0.0, -0.01), ncols=2)
    return figure


def _across(edges: NDArray[np.int64], pairs: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return positions along the rows: near the mean of linked ones, evenly spread."""
    count = len(edges)
    near: list[list[int]] = [[] for _ in range(count)]
    for a, b in pairs:
        near[a].append(b)
        near[b].append(a)
    x = np.zeros(count)
    for level in np.unique(edges):
        mine = np.flatnonzero(edges == level)
        x[mine] = _spread(len(mine))
    for _ in range(24):
        for level in np.unique(edges):
            mine = np.flatnonzero(edges == level)
            mean = np.array([np.mean(x[near[k]]) if near[k] else x[k] for k in mine])
            x[mine[np.argsort(mean, kind="stable")]] = _spread(len(mine))
    return x


def _lanes(edges: NDArray[np.int64], across: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return small shifts in turn, so that links within a row do not lie on each other."""
    shift = np.zeros(len(edges))
    for level in np.unique(edges):
        mine = np.flatnonzero(edges == level)
        mine = mine[np.argsort(across[mine], kind="stable")]
        shift[mine] = 0.16 * (np.array([0, 2, -1, 1, -2])[np.arange(len(mine)) % 5])
    return shift


def _spread(count: int) -> NDArray[np.float64]:
    return (np.arange(count) + 0.5) / count
