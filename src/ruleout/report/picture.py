"""A mechanism as a list of things to paint, the same for every painter."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from ruleout.mechanism.types import Mechanism
from ruleout.report.glyphs import head_of, outline, with_head
from ruleout.report.layout import ROOMY, TIGHT, Point, place, points_and_pieces
from ruleout.report.routing import Stroke, bezier, route

Array = NDArray[np.float64]
Role = Literal["settled", "contested", "absent"]

PAGE: Final = 175.0
"""Widest picture in millimetres that still flows from left to right."""
MARGIN: Final = 1.5


@dataclass(frozen=True, slots=True, eq=False)
class Picture:
    """A laid-out mechanism.

    Attributes
    ----------
    mechanism : Mechanism
    points : tuple of Point
    at : mapping of str to (2,) array
        Centres in millimetres, y down, the picture's upper left corner at the origin.
    strokes : tuple of Stroke
    size : (width, height)
    letters : mapping of str to str
        A letter for each contested edge or node, in file order.
    """

    mechanism: Mechanism
    points: tuple[Point, ...]
    at: Mapping[str, Array]
    strokes: tuple[Stroke, ...]
    size: tuple[float, float]
    letters: Mapping[str, str]


@dataclass(frozen=True, slots=True, eq=False)
class Ink:
    """One thing to paint.

    Attributes
    ----------
    kind : {"curve", "shape", "text"}
        A cubic Bezier curve of four control points, a polyline, or text centred at one point.
    points : (P, 2) array
    role : {"settled", "contested", "absent"}
    of : str
        The node or edge it belongs to.
    fill : {"line", "paper", "node", "none"}
    text : str
    """

    kind: Literal["curve", "shape", "text"]
    points: Array
    role: Role
    of: str
    closed: bool = False
    fill: Literal["line", "paper", "node", "none"] = "none"
    text: str = ""


def contested_names(mechanism: Mechanism) -> list[str]:
    """Return the contested nodes and edges in file order, nodes first."""
    nodes = [n.name for n in mechanism.nodes.values() if n.contested]
    edges = [
        e.name
        for e in mechanism.edges.values()
        if e.removable or len(e.effects) > 1 or len(e.laws) > 1 or len(e.rates) > 1
    ]
    return nodes + edges


def _letter(index: int) -> str:
    letters = "abcdefghijklmnopqrstuvwxyz"
    return letters[index] if index < 26 else _letter(index // 26 - 1) + letters[index % 26]


def lay_out(mechanism: Mechanism, *, compact: bool = False) -> Picture:
    """Place the nodes of a mechanism with all its contested parts and route its edges.

    Parameters
    ----------
    mechanism : Mechanism
    compact : bool
        A picture the size of a stamp, with abbreviated names.
    """
    points, pieces = points_and_pieces(mechanism, compact=compact)
    at = place(mechanism, points, pieces, TIGHT if compact else ROOMY, PAGE)
    strokes = route(points, pieces, at, reach=1.2 if compact else 1.8)
    t = np.linspace(0, 1, 33)
    seen = [bezier(s.curve, t) for s in strokes]
    seen += [at[p.name] + np.array(p.size) / 2 * s for p in points for s in (-1, 1)]
    everything = np.concatenate([np.atleast_2d(xy) for xy in seen])
    corner = everything.min(axis=0) - MARGIN
    size = everything.max(axis=0) + MARGIN - corner
    return Picture(
        mechanism=mechanism,
        points=tuple(points),
        at={name: xy - corner for name, xy in at.items()},
        strokes=tuple(Stroke(s.piece, s.curve - corner) for s in strokes),
        size=(float(size[0]), float(size[1])),
        letters={n: _letter(i) for i, n in enumerate(contested_names(mechanism))},
    )


def inks(picture: Picture, choices: Mapping[str, str] | None = None) -> list[Ink]:
    """Return what to paint, back to front.

    Parameters
    ----------
    picture : Picture
    choices : mapping of str to str, optional
        One variant's options (``absent``, ``present``, ``inhibits/hill``, ...); without them the
        mechanism is painted with everything that is in dispute.
    """
    painted: list[Ink] = []
    for stroke in picture.strokes:
        painted += _stroke_inks(picture, stroke, choices)
    for point in picture.points:
        painted += _point_inks(picture, point, choices)
    return painted


def _role(picture: Picture, name: str, choices: Mapping[str, str] | None) -> Role:
    if name not in picture.letters:
        return "settled"
    return "absent" if choices and choices.get(name) == "absent" else "contested"


def _stroke_inks(picture: Picture, stroke: Stroke, choices: Mapping[str, str] | None) -> list[Ink]:
    piece = stroke.piece
    edge = picture.mechanism.edges[piece.edge]
    role = _role(picture, edge.name, choices)
    nodes = [n for n, _ in (*edge.sources, *edge.targets)]
    if any(_role(picture, n, choices) == "absent" for n in nodes):
        role = "absent"
    effect: str | None = edge.effects[0] if len(edge.effects) == 1 else None
    if choices and choices.get(edge.name, "absent") != "absent":
        effect = choices[edge.name].split("/")[0]
    head = head_of(edge, effect) if piece.head else "none"
    curve, shapes = with_head(stroke.curve, head)
    painted = [Ink("curve", curve, role, edge.name)]
    painted += [
        Ink("shape", s.points, role, edge.name, closed=s.closed, fill=s.fill) for s in shapes
    ]
    if edge.reversible and piece.head:
        _, back = with_head(stroke.curve[::-1], head)
        painted += [
            Ink("shape", s.points, role, edge.name, closed=s.closed, fill=s.fill) for s in back
        ]
    return painted


def _point_inks(picture: Picture, point: Point, choices: Mapping[str, str] | None) -> list[Ink]:
    at = picture.at[point.name]
    if point.kind != "node":
        role = _role(picture, point.name.split(":")[0], choices)
        w = point.size[0] / 2
        if point.kind == "process":
            square = at + np.array([(-w, -w), (w, -w), (w, w), (-w, w)])
            return [Ink("shape", square, role, point.name, closed=True, fill="paper")]
        angles = np.linspace(0, 2 * np.pi, 25)[:-1]
        ring = at + 0.8 * w * np.stack([np.cos(angles), np.sin(angles)], axis=1)
        stroke = at + np.array([(-w, w), (w, -w)])
        return [
            Ink("shape", ring, role, point.name, closed=True, fill="paper"),
            Ink("shape", stroke, role, point.name),
        ]
    role = _role(picture, point.name, choices)
    kind = picture.mechanism.nodes[point.name].kind
    box = outline(kind, at, point.size)
    painted = [Ink("shape", box, role, point.name, closed=True, fill="node")]
    step = 3.0
    top = at[1] - step * (len(point.lines) - 1) / 2
    painted += [
        Ink("text", np.array([[at[0], top + step * i]]), role, point.name, text=line)
        for i, line in enumerate(point.lines)
    ]
    return painted
