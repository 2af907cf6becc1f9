"""Small drawings as inline SVG, coloured by the page's style sheet so that dark mode works."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from html import escape
from typing import Final

import numpy as np
from markupsafe import Markup
from numpy.typing import NDArray

from ruleout.report.layout import Point
from ruleout.report.picture import Ink, Picture, inks
from ruleout.report.routing import bezier

Array = NDArray[np.float64]

MARKER_PATHS: Final[Mapping[str, str]] = {
    "o": "M-2.6 0a2.6 2.6 0 1 0 5.2 0a2.6 2.6 0 1 0-5.2 0z",
    "s": "M-2.4-2.4h4.8v4.8h-4.8z",
    "^": "M0-3l2.9 5.2h-5.8z",
    "D": "M0-3.2l3.2 3.2l-3.2 3.2l-3.2-3.2z",
    "v": "M0 3l2.9-5.2h-5.8z",
    "P": "M-1-3h2v2h2v2h-2v2h-2v-2h-2v-2h2z",
    "X": "M-3-1.6l1.4-1.4l1.6 1.6l1.6-1.6l1.4 1.4l-1.6 1.6l1.6 1.6l-1.4 1.4"
    "l-1.6-1.6l-1.6 1.6l-1.4-1.4l1.6-1.6z",
    "*": "M0-3.4l.9 2.4h2.5l-2 1.6l.8 2.5l-2.2-1.5l-2.2 1.5l.8-2.5l-2-1.6h2.5z",
}


def short(value: float) -> str:
    """Return a coordinate with one decimal at most."""
    return f"{value:.1f}".removesuffix(".0").replace("-0.", "-.") if value else "0"


def polyline(points: Iterable[Sequence[float]]) -> str:
    """Return points as the data of an SVG path."""
    return "M" + "L".join(f"{short(x)} {short(y)}" for x, y in points)


def ticks(low: float, high: float, most: int = 4) -> list[float]:
    """Return at most ``most`` round numbers from ``low`` to ``high``."""
    if not high > low:
        return [low]
    raw = (high - low) / most
    unit = 10.0 ** math.floor(math.log10(raw))
    step = next(unit * m for m in (1, 2, 5, 10, 20) if (high - low) / (unit * m) <= most)
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    return [float(f"{k * step:.12g}") for k in range(first, last + 1)]


def _ink(ink: Ink, size: str = "") -> str:
    if ink.kind == "text":
        x, y = ink.points[0]
        kind = f"g-name {size} {ink.role}"
        return f'<text x="{short(x)}" y="{short(y)}" class="{kind}">{escape(ink.text)}</text>'
    if ink.kind == "curve":
        a, b, c, d = (f"{short(x)} {short(y)}" for x, y in ink.points)
        return f'<path class="g-stroke {ink.role}" d="M{a}C{b} {c} {d}"/>'
    closing = "Z" if ink.closed else ""
    kind = "g-box" if ink.fill == "node" else f"g-head on-{ink.fill}"
    return f'<path class="{kind} {ink.role}" d="{polyline(ink.points)}{closing}"/>'


class GraphSymbols:
    """Draws the variants of one mechanism, each part that looks alike stored once.

    Parameters
    ----------
    picture : Picture
    prefix : str
        Of the symbols' identifiers, distinct for every picture on a page.
    """

    def __init__(self, picture: Picture, prefix: str) -> None:
        self._picture = picture
        self._prefix = prefix
        self._symbols: dict[str, str] = {}

    def draw(self, choices: Mapping[str, str] | None, label: str) -> Markup:
        """Return one variant's graph; without choices, the mechanism with all that is contested."""
        parts: dict[str, list[str]] = {}
        for ink in inks(self._picture, choices):
            of = ink.of if ink.role != "settled" else ""
            parts.setdefault(of, []).append(_ink(ink, "small"))
        uses = "".join(f'<use href="#{self._symbol("".join(p))}"/>' for p in parts.values())
        return self._svg(uses, label)

    def draw_with_letters(self, label: str) -> Markup:
        """Return the mechanism with a letter on each contested part."""
        body = "".join(map(_ink, inks(self._picture)))
        return self._svg(body + "".join(_letters(self._picture)), label)

    def _svg(self, body: str, label: str) -> Markup:
        w, h = self._picture.size
        return Markup(
            f'<svg class="graph" viewBox="0 0 {short(w)} {short(h)}" role="img" '
            f'aria-label="{escape(label)}" style="--w:{short(w)}">{body}</svg>'
        )

    def _symbol(self, body: str) -> str:
        return self._symbols.setdefault(body, f"{self._prefix}{len(self._symbols)}")

    def definitions(self) -> Markup:
        """Return the stored parts; to be put on the page once."""
        groups = "".join(f'<g id="{name}">{body}</g>' for body, name in self._symbols.items())
        return Markup(f'<svg class="definitions" aria-hidden="true"><defs>{groups}</defs></svg>')


def _letters(picture: Picture) -> list[str]:
    marks, done = [], set()
    for stroke in picture.strokes:
        name = stroke.piece.edge
        if name in picture.letters and name not in done:
            done.add(name)
            marks.append(_letter(picture.letters[name], *bezier(stroke.curve, 0.5)))
    marks += [_node_letter(picture, p) for p in picture.points if p.name in picture.letters]
    return marks


def _node_letter(picture: Picture, point: Point) -> str:
    x, y = picture.at[point.name] + np.array(point.size) * (0.5, -0.5)
    return _letter(picture.letters[point.name], x, y)


def _letter(letter: str, x: float, y: float) -> str:
    return (
        f'<circle class="g-spot" cx="{short(x)}" cy="{short(y)}" r="1.9"/>'
        f'<text class="g-name letter" x="{short(x)}" y="{short(y)}">{letter}</text>'
    )
