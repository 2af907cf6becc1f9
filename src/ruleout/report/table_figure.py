"""The falsification table as a figure: variants, their contested parts, verdicts and p-values."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from ruleout.report.picture import Picture
from ruleout.report.style import (
    COLUMN,
    CONTESTED,
    FAINT,
    INK,
    MM,
    PAGE,
    VERDICT_COLOURS,
    VERDICT_SIGNS,
)
from ruleout.report.tables import ABSENT, PRESENT, choices_of, option_words, records
from ruleout.report.words import VERDICTS, by_verdict, check_words, p_text
from ruleout.verdicts.types import Judgement

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ROW: Final = 4.4
MOST_ROWS: Final = 50
SMALLEST_P: Final = 1e-3
_SIGNS: Final[Mapping[str, str]] = {"stimulates": "+", "inhibits": "−"}
_BLANK: Final = {"facecolor": "white", "edgecolor": "none", "pad": 0.4}


def table_figure(judgement: Judgement, picture: Picture) -> Figure:
    """Return one row per variant, the kept first; at most ``MOST_ROWS``, the rest counted."""
    from matplotlib.figure import Figure

    rows = by_verdict(judgement.variants)
    shown = records(rows.head(MOST_ROWS))
    hidden = len(rows) - len(shown)
    letters = picture.letters
    words = option_words(rows["choices"])
    told = {w for found in words.values() for w in found.values()} - {ABSENT, PRESENT, *_SIGNS}
    cell = 1.2 * max(map(len, told)) + 2 if told else 4.5
    x = {"variant": 2.0, "letters": 14.0}
    x["verdict"] = x["letters"] + cell * len(letters) + 3
    x["p"] = x["verdict"] + 19
    x["why"] = x["p"] + 33
    width = max(PAGE if x["why"] < PAGE - 60 else x["why"] + 60, COLUMN)
    key_rows = -(-len(letters) // 3)
    height = ROW * (len(shown) + 2 + bool(hidden)) + 3.6 * key_rows + 7
    figure = Figure(figsize=(width * MM, height * MM))
    axes = figure.add_axes((0, 0, 1, 1))
    axes.set(xlim=(0, width), ylim=(height, 0))
    axes.set_axis_off()
    y = 4.5
    _header(axes, x, y, letters, cell)
    lowest = min([SMALLEST_P, *(r["p_value"] for r in shown if r["p_value"] > 0)])
    bottom = y + 3.2 + ROW * len(shown)
    _p_scale(axes, x["p"], y + 2.6, bottom, judgement.meta["alpha"], lowest)
    for i, row in enumerate(shown):
        at = y + ROW * (i + 1) + 0.8
        _row(axes, row, x, at, lowest)
        chosen = choices_of(row["choices"])
        for j, name in enumerate(letters):
            word = words[name][chosen[name]] if name in chosen else ABSENT
            _choice(axes, word, x["letters"] + cell * (j + 0.5), at)
    if hidden:
        axes.text(2, bottom + 2, f"and {hidden} more, all ruled out", fontsize=6, va="center")
        bottom += ROW
    axes.plot([2, width - 2], [bottom + 0.4] * 2, color=INK, linewidth=0.6)
    _key(axes, letters, bottom + 4.6, width)
    return figure


def _p_position(p: float, left: float, lowest: float) -> float:
    return left + 26.0 * float(np.log10(max(p, lowest) / lowest) / np.log10(1 / lowest))


def _header(
    axes: Axes, x: Mapping[str, float], y: float, letters: Mapping[str, str], cell: float
) -> None:
    width = axes.get_xlim()[1]
    for key, words in (
        ("variant", "variant"),
        ("verdict", "verdict"),
        ("p", "p-value"),
        ("why", "decided by"),
    ):
        axes.text(x[key], y, words, fontsize=6.5, va="center", weight="bold")
    for i, letter in enumerate(letters.values()):
        axes.text(
            x["letters"] + cell * (i + 0.5),
            y,
            letter,
            fontsize=6.5,
            ha="center",
            va="center",
            color=CONTESTED,
            weight="bold",
        )
    for line in (y - 2.6, y + 2.2):
        axes.plot([2, width - 2], [line] * 2, color=INK, linewidth=0.6)


def _p_scale(
    axes: Axes, left: float, top: float, bottom: float, alpha: float, lowest: float
) -> None:
    at = _p_position(alpha, left, lowest)
    axes.plot([at, at], [top, bottom], color=INK, linewidth=0.5, linestyle=(0, (1.5, 1.5)))
    axes.text(at, bottom + 2.2, f"{alpha:g}", fontsize=6, ha="center", va="center")


def _choice(axes: Axes, word: str, x: float, y: float) -> None:
    """Mark a contested part: a dot if present, a speck if absent, else by the option."""
    if word in (ABSENT, PRESENT):
        there = word == PRESENT
        size, colour = (4.0, INK) if there else (1.6, FAINT)
        axes.plot([x], [y], marker="o", markersize=size, color=colour)
    else:
        axes.text(x, y, _SIGNS.get(word, word), fontsize=6, ha="center", va="center")


def _row(
    axes: Axes,
    row: Mapping[str, Any],
    x: Mapping[str, float],
    y: float,
    lowest: float,
) -> None:
    verdict = row["verdict"]
    colour = VERDICT_COLOURS[verdict]
    axes.text(x["variant"], y, row["variant"], fontsize=6.5, va="center")
    axes.text(
        x["verdict"],
        y,
        VERDICT_SIGNS[verdict],
        fontsize=6.5,
        va="center",
        color=colour,
        family="DejaVu Sans",
    )
    axes.text(
        x["verdict"] + 3.2,
        y,
        VERDICTS[verdict],
        fontsize=6.5,
        va="center",
        color=colour,
        weight="bold" if verdict == "ruled_out" else "normal",
    )
    if np.isfinite(row["p_value"]):
        at = _p_position(row["p_value"], x["p"], lowest)
        axes.plot([x["p"], at], [y, y], color=colour, linewidth=0.8)
        axes.plot([at], [y], marker="D", markersize=2.6, color=colour)
        axes.text(at + 1.4, y, p_text(row["p_value"]), fontsize=6, va="center", bbox=_BLANK)
    if row["decisive_check"]:
        axes.text(x["why"], y, check_words(row["decisive_check"]), fontsize=6, va="center")


def _key(axes: Axes, letters: Mapping[str, str], top: float, width: float) -> None:
    step = (width - 4) / 3
    for i, (name, letter) in enumerate(letters.items()):
        row, column = divmod(i, 3)
        at, y = 2 + step * column, top + 3.6 * row
        axes.text(at, y, letter, fontsize=6, va="center", color=CONTESTED, weight="bold")
        axes.text(at + 3, y, name, fontsize=6, va="center")
