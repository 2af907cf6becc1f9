"""Outlines of nodes and arrowheads, after the Systems Biology Graphical Notation.

Activity Flow glyphs for influences (open triangle: positive; bar: negative; bar and triangle:
necessary; diamond: unknown sign) and Process Description glyphs for material (filled triangle:
production; circle: catalysis; square: process). doi:10.2390/biecoll-jib-2015-265,
doi:10.1515/jib-2019-0022.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from ruleout.mechanism.types import Edge, NodeKind
from ruleout.report.routing import bezier, part

Array = NDArray[np.float64]
Head = Literal["positive", "negative", "necessary", "unknown", "production", "catalysis", "none"]

HEAD_LENGTH: Final = 2.4
HEAD_HALF: Final = 1.15


@dataclass(frozen=True, slots=True)
class Shape:
    """A closed or open polyline; ``fill`` is ``"line"`` (the stroke's colour), ``"paper"`` or none.

    Attributes
    ----------
    points : (P, 2) array
    """

    points: Array
    closed: bool
    fill: Literal["line", "paper", "none"]


def head_of(edge: Edge, effect: str | None) -> Head:
    """Return the arrowhead of an edge with the given net effect, ``None`` if it is in dispute."""
    if edge.onto is None and edge.material:
        return "production"
    if effect is None:
        return "unknown"
    if effect == "inhibits":
        return "negative"
    if edge.onto is not None:
        return "catalysis"
    return "necessary" if edge.necessary else "positive"


def with_head(curve: Array, head: Head) -> tuple[Array, list[Shape]]:
    """Return the curve shortened to where its head begins, and the head's shapes."""
    if head == "none":
        return curve, []
    t = np.linspace(0, 1, 201)
    xy = bezier(curve, t)
    left = np.cumsum(np.hypot(*np.diff(xy[::-1], axis=0).T))[::-1]
    left = np.append(left, 0.0)

    def at_distance(distance: float) -> float:
        return float(t[np.argmin(np.abs(left - distance))])

    tip = xy[-1]
    base_t = at_distance(HEAD_LENGTH)
    way = tip - bezier(curve, base_t)
    way /= max(float(np.hypot(*way)), 1e-9)
    side = np.array([-way[1], way[0]]) * HEAD_HALF
    base = tip - way * HEAD_LENGTH
    if head == "negative":
        bar = Shape(np.array([tip + 1.25 * side, tip - 1.25 * side]), False, "none")
        return curve, [bar]
    if head == "catalysis":
        angles = np.linspace(0, 2 * np.pi, 25)[:-1]
        centre = tip - way * HEAD_HALF
        ring = centre + HEAD_HALF * np.stack([np.cos(angles), np.sin(angles)], axis=1)
        return part(curve, 0.0, at_distance(2 * HEAD_HALF)), [Shape(ring, True, "paper")]
    if head == "unknown":
        middle = tip - way * HEAD_LENGTH / 2
        diamond = np.array([tip, middle + side, base, middle - side])
        return part(curve, 0.0, base_t), [Shape(diamond, True, "paper")]
    triangle = np.array([tip, base + side, base - side])
    fill: Literal["line", "paper"] = "line" if head == "production" else "paper"
    shapes = [Shape(triangle, True, fill)]
    if head == "necessary":
        back = base - way * 0.9
        shapes.append(Shape(np.array([back + 1.25 * side, back - 1.25 * side]), False, "none"))
    return part(curve, 0.0, base_t), shapes


def outline(kind: NodeKind, centre: Array, size: tuple[float, float]) -> Array:
    """Return the closed outline of a node: notched for an input, square, rounded or a stadium."""
    w, h = size[0] / 2, size[1] / 2
    if kind == "input":
        n = 0.45 * h
        corners = [(-w, -h), (w, -h), (w - n, 0), (w, h), (-w, h), (-w + n, 0)]
        return np.asarray(centre + np.array(corners))
    radius = {"switched": 0.0, "expressed": 0.35 * h, "pool": h}[kind]
    if radius == 0.0:
        return np.asarray(centre + np.array([(-w, -h), (w, -h), (w, h), (-w, h)]))
    return np.asarray(centre + _rounded(w, h, radius))


def _rounded(w: float, h: float, r: float) -> Array:
    quarter = np.linspace(0, np.pi / 2, 9)
    corners = [(w - r, h - r, 0), (r - w, h - r, 1), (r - w, r - h, 2), (w - r, r - h, 3)]
    arcs = [
        np.stack(
            [
                x + r * np.cos(quarter + k * np.pi / 2),
                y + r * np.sin(quarter + k * np.pi / 2),
            ],
            axis=1,
        )
        for x, y, k in corners
    ]
    return np.concatenate(arcs)
