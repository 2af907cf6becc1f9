"""The mechanism graph, painted with matplotlib."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from ruleout.report.picture import Ink, Picture, inks
from ruleout.report.routing import bezier
from ruleout.report.style import COLUMN, CONTESTED, FAINT, INK, MM, NODE_FILL, PAGE

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

COLOURS = {"settled": INK, "contested": CONTESTED, "absent": FAINT}
DASHES: Mapping[str, Any] = {
    "settled": "solid",
    "contested": (0, (3.2, 1.8)),
    "absent": (0, (1, 2)),
}


def paint(axes: Axes, painted: Sequence[Ink], scale: float = 1.0) -> None:
    """Paint on axes whose unit is a millimetre of the picture, shown at ``scale``."""
    from matplotlib.patches import PathPatch
    from matplotlib.path import Path

    for z, ink in enumerate(painted):
        colour = COLOURS[ink.role]
        if ink.kind == "text":
            x, y = ink.points[0]
            axes.text(
                x,
                y,
                ink.text,
                ha="center",
                va="center_baseline",
                zorder=z,
                fontsize=7.0 * scale,
                color=INK if ink.role == "settled" else colour,
            )
            continue
        if ink.kind == "curve":
            path = Path(ink.points, [Path.MOVETO, Path.CURVE4, Path.CURVE4, Path.CURVE4])
        else:
            codes = [Path.MOVETO] + [Path.LINETO] * (len(ink.points) - 1)
            path = Path(ink.points, codes)
            if ink.closed:
                path = Path([*ink.points, ink.points[0]], [*codes, Path.CLOSEPOLY])
        face = {"none": "none", "paper": "white", "node": NODE_FILL, "line": colour}[ink.fill]
        # A dashed arrowhead is no arrowhead: only strokes and outlines of nodes are dashed.
        dashed = ink.kind == "curve" or ink.fill == "node"
        axes.add_patch(
            PathPatch(
                path,
                facecolor=face,
                edgecolor=colour,
                linewidth=(0.6 if ink.fill == "node" else 0.9) * scale,
                linestyle=DASHES[ink.role] if dashed else "solid",
                capstyle="butt",
                joinstyle="miter",
                zorder=z,
            )
        )


def graph_axes(figure: Figure, picture: Picture, left: float, top: float, scale: float) -> Axes:
    """Add axes in the picture's own millimetres, its corner at (left, top) mm of the figure."""
    width, height = figure.get_size_inches() / MM
    w, h = picture.size[0] * scale, picture.size[1] * scale
    axes = figure.add_axes((left / width, 1 - (top + h) / height, w / width, h / height))
    axes.set_xlim(0, picture.size[0])
    axes.set_ylim(picture.size[1], 0)
    axes.set_axis_off()
    return axes


def mechanism_figure(picture: Picture) -> Figure:
    """Return the graph of a mechanism with contested parts dashed and lettered, and their key."""
    from matplotlib.figure import Figure

    scale = min(1.0, (PAGE - 4) / picture.size[0])
    width = COLUMN if picture.size[0] * scale <= COLUMN - 4 else PAGE
    keys = [f"{letter}  {name}" for name, letter in picture.letters.items()]
    columns = max(1, int((width - 4) // (1.35 * max(map(len, keys), default=1) + 6)))
    rows = -(-len(keys) // columns)
    graph_height = picture.size[1] * scale
    height = graph_height + 4 + (3.4 * rows + 6 if rows else 0)
    figure = Figure(figsize=(width * MM, height * MM))
    left = (width - picture.size[0] * scale) / 2
    axes = graph_axes(figure, picture, left, 2, scale)
    paint(axes, inks(picture), scale)
    _paint_letters(axes, picture, scale)
    if keys:
        _paint_key(figure, keys, columns, graph_height + 4)
    return figure


def _paint_letters(axes: Axes, picture: Picture, scale: float) -> None:
    done = set()
    for stroke in picture.strokes:
        name = stroke.piece.edge
        if name in picture.letters and name not in done:
            done.add(name)
            x, y = bezier(stroke.curve, 0.5)
            axes.text(
                x,
                y,
                picture.letters[name],
                ha="center",
                va="center_baseline",
                zorder=1000,
                fontsize=max(6.0, 6.5 * scale),
                color=CONTESTED,
                bbox={"boxstyle": "circle,pad=0.15", "facecolor": "white", "edgecolor": "none"},
            )
    for point in picture.points:
        if point.name in picture.letters:
            x, y = picture.at[point.name]
            w, h = point.size
            axes.text(
                x + w / 2 - 1.3,
                y - h / 2 + 1.4,
                picture.letters[point.name],
                ha="center",
                va="center_baseline",
                zorder=1000,
                fontsize=max(6.0, 6.5 * scale),
                color=CONTESTED,
            )


def _paint_key(figure: Figure, keys: Sequence[str], columns: int, top: float) -> None:
    width, height = figure.get_size_inches() / MM
    figure.text(2 / width, 1 - (top + 1) / height, "dashed: contested", va="top", fontsize=6)
    for i, key in enumerate(keys):
        row, column = divmod(i, columns)
        x = 2 + column * (width - 4) / columns
        y = top + 4.4 + 3.4 * row
        letter, _, name = key.partition("  ")
        figure.text(x / width, 1 - y / height, letter, va="top", fontsize=6, color=CONTESTED)
        figure.text((x + 3) / width, 1 - y / height, name, va="top", fontsize=6)
