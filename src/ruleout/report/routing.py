"""How the edges of a mechanism's picture run between its nodes.

Each stroke is a cubic Bezier curve, chosen from a fixed set of bends and docking places by a
price on what makes a picture hard to read: running through nodes or along other strokes, crossing,
arrowheads on top of each other, length, grazing a node's side. Strokes are improved in turn until
none gets cheaper.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from ruleout.report.layout import Piece, Point

Array = NDArray[np.float64]

_SAMPLES: Final = 33
_T: Final = np.linspace(0.0, 1.0, _SAMPLES)
_BASIS: Final = np.stack(
    [(1 - _T) ** 3, 3 * _T * (1 - _T) ** 2, 3 * _T**2 * (1 - _T), _T**3], axis=1
)
_BENDS: Final = (0.0, 3.0, 6.0, 9.0, 12.5, 16.5, 21.0, 27.0)
GAP: Final = 0.7
"""Room between a stroke's end and the outline of what it points at."""


@dataclass(frozen=True, slots=True)
class Stroke:
    """A drawn piece.

    Attributes
    ----------
    piece : Piece
    curve : (4, 2) array
        Control points of the Bezier curve, from outline to outline.
    """

    piece: Piece
    curve: Array


def bezier(curve: Array, t: Array | float) -> Array:
    """Return the points of a curve at parameters ``t``, an array of shape ``t.shape + (2,)``."""
    t = np.asarray(t, float)[..., None]
    a, b, c, d = curve
    return np.asarray(
        (1 - t) ** 3 * a + 3 * t * (1 - t) ** 2 * b + 3 * t**2 * (1 - t) * c + t**3 * d
    )


def part(curve: Array, start: float, stop: float) -> Array:
    """Return the control points of the curve between two of its parameters."""

    def split(points: Array, t: float) -> tuple[Array, Array]:
        left, right = [points[0]], [points[-1]]
        while len(points) > 1:
            points = points[:-1] * (1 - t) + points[1:] * t
            left.append(points[0])
            right.append(points[-1])
        return np.array(left), np.array(right[::-1])

    _, tail = split(curve, start)
    head, _ = split(tail, (stop - start) / (1 - start) if start < 1 else 0.0)
    return head


def _docks(point: Point | None) -> list[Array]:
    if point is None or point.kind != "node":
        return [np.zeros(2)]
    w, h = point.size
    return [
        np.array(offset)
        for offset in ((0.0, 0.0), (-w / 4, 0.0), (w / 4, 0.0), (0.0, -h / 4), (0.0, h / 4))
    ]


def _candidates(
    a: Array, b: Array, source: Point, target: Point | None, backward: bool
) -> NDArray[np.float64]:
    """Return control points of all routes from centre ``a`` to centre ``b``: (C, 4, 2)."""
    routes: list[Array] = []
    if target is source:
        w, h = source.size
        for side in (-1.0, 1.0):
            for shift in (-w / 4, 0.0, w / 4):
                out = side * (h / 2 + 11.0)
                path = np.array([(-2.2, 0.0), (-5.5, out), (5.5, out), (2.2, 0.0)])
                routes.append(a + np.array([shift, 0.0]) + path)
        return np.array(routes)
    for start in _docks(source):
        for stop in _docks(target):
            p, q = a + start, b + stop
            chord = q - p
            length = float(np.hypot(*chord)) or 1.0
            normal = np.array([-chord[1], chord[0]]) / length
            for bend in _BENDS:
                if backward and bend < 6.0:
                    continue
                for side in (1.0, -1.0) if bend else (1.0,):
                    lift = normal * side * bend * 4 / 3
                    near, far = p + 0.2 * chord + lift, p + 0.8 * chord + lift
                    routes.append(np.array([p, near, far, q]))
            if not backward:
                flats = (np.array([chord[0], 0.0]), np.array([0.0, chord[1]]))
                routes += [np.array([p, p + f / 2, q - f / 2, q]) for f in flats]
    return np.array(routes)


def _inside(points: Array, centre: Array, size: tuple[float, float], margin: float) -> Array:
    half = np.array(size) / 2 + margin
    return np.asarray((np.abs(points - centre) <= half).all(axis=-1))


def _clip(
    curves: Array, ends: Sequence[tuple[Array, tuple[float, float]]]
) -> tuple[Array, NDArray[np.bool_]]:
    """Cut curves (C, 4, 2) at the outlines of what they join; say which are left with anything."""
    clipped, good = curves.copy(), np.ones(len(curves), bool)
    fine = np.linspace(0, 1, 129)
    for i, curve in enumerate(curves):
        xy = bezier(curve, fine)
        (a, size_a), (b, size_b) = ends
        first = np.flatnonzero(~_inside(xy, a, size_a, GAP * 0.4))
        last = np.flatnonzero(~_inside(xy, b, size_b, GAP))
        if not len(first) or not len(last) or last[-1] - first[0] < 8:
            good[i] = False
            continue
        start, stop = first[0], last[-1]
        clipped[i] = part(curve, fine[start], fine[stop])
    return clipped, good


def _own_price(xy: Array, backward: bool, box: Array) -> Array:
    """Return the price of each route for its own shape."""
    steps = np.hypot(*np.moveaxis(np.diff(xy, axis=1), -1, 0))
    length = steps.sum(axis=1)
    chord = np.hypot(*(xy[:, -1] - xy[:, 0]).T)
    price = 0.25 * length + 0.35 * (length - chord)
    # Wanting to arrive square to the side: the end's direction against the nearer axis.
    for tip, before in ((xy[:, -1], xy[:, -3]), (xy[:, 0], xy[:, 2])):
        way = tip - before
        way /= np.maximum(np.hypot(*way.T), 1e-9)[:, None]
        price += 6.0 * (1 - np.abs(way).max(axis=1))
    middle = xy[:, _SAMPLES // 2, 1] - (xy[:, 0, 1] + xy[:, -1, 1]) / 2
    wrong_side = middle < -1.0 if backward else middle > 1.0
    price += 2.5 * wrong_side
    outside = np.maximum(box[0] - xy, 0) + np.maximum(xy - box[1], 0)
    return np.asarray(price + 0.4 * outside.max(axis=(1, 2)))


def _price_against_nodes(
    xy: Array, points: Mapping[str, Point], at: Mapping[str, Array], skip: set[str]
) -> Array:
    price = np.zeros(len(xy))
    for name, point in points.items():
        margin = -0.2 if name in skip else 1.6
        inside = _inside(xy, at[name], point.size, margin)
        price += (60.0 if name not in skip else 25.0) * inside.sum(axis=1)
    return price


def _price_against_strokes(xy: Array, others: Sequence[Array]) -> Array:
    """Return the price of coming close to the sampled strokes ``others``."""
    if not others:
        return np.zeros(len(xy))
    near = np.concatenate(others)
    d2 = ((xy[:, :, None, :] - near[None, None]) ** 2).sum(axis=-1)
    close = np.exp(-d2 / 1.8**2).max(axis=2).sum(axis=1)
    price = 4.0 * close
    for other in others:
        for mine in (xy[:, -1], xy[:, 0]):
            for its in (other[-1], other[0]):
                d = np.hypot(*(mine - its).T)
                price += 40.0 * np.maximum(0.0, 1 - d / 4.2)
    return np.asarray(price)


def route(
    points: Sequence[Point], pieces: Sequence[Piece], at: Mapping[str, Array]
) -> list[Stroke]:
    """Return one stroke per piece, in the order of ``pieces``.

    Parameters
    ----------
    at : mapping of str to (2,) array
        Centres of the points.
    """
    by_name = {p.name: p for p in points}
    corners = np.array([at[p.name] + np.array(p.size) / 2 * s for p in points for s in (-1, 1)])
    box = np.array([corners.min(axis=0), corners.max(axis=0)])
    flow = int(np.argmax(np.ptp([at[p.name] for p in points], axis=0)))
    chosen: dict[int, Array] = {}
    on_nodes = [i for i, p in enumerate(pieces) if not p.onto]
    on_edges = [i for i, p in enumerate(pieces) if p.onto]
    # Direct neighbours first: long and returning strokes bend around them.
    on_nodes.sort(key=lambda i: float(np.hypot(*(at[pieces[i].target] - at[pieces[i].source]))))
    for group in (on_nodes, on_edges):
        options = {i: _options(i, pieces, by_name, at, box, flow, chosen) for i in group}
        for _ in range(4):
            before = {i: chosen.get(i) for i in group}
            for i in group:
                curves, xy, price = options[i]
                others = [bezier(c, _T) for j, c in chosen.items() if j != i]
                total = price + _price_against_strokes(xy, others)
                chosen[i] = curves[int(np.argmin(total))]
            if all(before[i] is not None and np.array_equal(before[i], chosen[i]) for i in group):
                break
    return [Stroke(piece, chosen[i]) for i, piece in enumerate(pieces)]


def _options(
    index: int,
    pieces: Sequence[Piece],
    points: Mapping[str, Point],
    at: Mapping[str, Array],
    box: Array,
    flow: int,
    chosen: Mapping[int, Array],
) -> tuple[Array, Array, Array]:
    """Return the clipped routes a piece may take, sampled, with their own prices."""
    piece = pieces[index]
    source, a = points[piece.source], at[piece.source]
    target: Point | None
    if piece.onto:
        hosts = [j for j, p in enumerate(pieces) if p.edge == piece.target and j in chosen]
        rivals = [j for j, p in enumerate(pieces) if p.onto and p.target == piece.target]
        share = (rivals.index(index) + 1) / (len(rivals) + 1)
        host = chosen[hosts[-1]] if hosts else np.tile(at[piece.source], (4, 1))
        target, b, size = None, bezier(host, share), (0.6, 0.6)
    else:
        target, b = points[piece.target], at[piece.target]
        size = target.size
    backward = not piece.onto and target is not source and bool(b[flow] < a[flow] - 1.0)
    curves = _candidates(a, b, source, target, backward)
    curves, good = _clip(curves, ((a, source.size), (b, size)))
    if good.any():
        curves = curves[good]
    xy = np.einsum("tk,ckd->ctd", _BASIS, curves)
    price = _own_price(xy, backward, box)
    price += _price_against_nodes(xy, points, at, {piece.source, piece.target})
    return curves, xy, price
