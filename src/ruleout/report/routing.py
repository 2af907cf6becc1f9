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
_BENDS: Final = (4.0, 6.5, 9.0, 12.5, 16.5, 21.0, 27.0)
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


def part(curves: Array, start: Array | float, stop: Array | float) -> Array:
    """Return the control points of curves (..., 4, 2) between two of their parameters (...)."""

    def blossom(*at: Array | float) -> Array:
        points = curves
        for t in at:
            t = np.asarray(t, float)[..., None, None]
            points = points[..., :-1, :] * (1 - t) + points[..., 1:, :] * t
        return np.asarray(points[..., 0, :])

    corners = ((start, start, start), (start, start, stop), (start, stop, stop), (stop,) * 3)
    return np.stack([blossom(*c) for c in corners], axis=-2)


def _docks(point: Point | None, flow: int) -> list[Array]:
    if point is None or point.kind != "node":
        return [np.zeros(2)]
    along = np.eye(2)[flow] * point.size[flow]
    return [along * share for share in (0.0, -0.27, 0.27)]


def _candidates(
    a: Array, b: Array, source: Point, target: Point | None, flow: int, backward: bool
) -> Array:
    """Return control points of all routes from centre ``a`` to centre ``b``: (C, 4, 2)."""
    routes: list[Array] = []
    if target is source:
        w, h = source.size
        for side in (-1.0, 1.0):
            for shift in (0.0, -w / 4, w / 4):
                out = side * (h / 2 + 9.0)
                path = np.array([(-1.6, 0.0), (-5.0, out), (5.0, out), (1.6, 0.0)])
                routes.append(a + np.array([shift, 0.0]) + path)
        return np.array(routes)
    if not backward:
        across = np.eye(2)[flow] * (b - a) / 2
        routes = [np.linspace(a, b, 4), np.array([a, a + across, b - across, b])]
    for start in _docks(source, flow):
        for stop in _docks(target, flow):
            p, q = a + start, b + stop
            chord = q - p
            length = float(np.hypot(*chord)) or 1.0
            normal = np.array([-chord[1], chord[0]]) / length
            for bend in _BENDS:
                for side in (1.0, -1.0):
                    lift = normal * side * bend * 4 / 3
                    near, far = p + 0.2 * chord + lift, p + 0.8 * chord + lift
                    routes.append(np.array([p, near, far, q]))
    return np.array(routes)


def _inside(
    points: Array, centre: Array, size: tuple[float, float], margin: float
) -> NDArray[np.bool_]:
    half = np.array(size) / 2 + margin
    return np.asarray((np.abs(points - centre) <= half).all(axis=-1), bool)


def _clip(curves: Array, ends: Sequence[tuple[Array, tuple[float, float]]]) -> Array:
    """Cut curves (C, 4, 2) at the outlines of what they join, leaving out those within them."""
    fine = np.linspace(0, 1, 129)
    xy = bezier(curves[:, :, None, :].swapaxes(0, 1), fine)
    (a, size_a), (b, size_b) = ends
    first = np.argmax(~_inside(xy, a, size_a, GAP * 0.4), axis=1)
    last = len(fine) - 1 - np.argmax(~_inside(xy, b, size_b, GAP)[:, ::-1], axis=1)
    good = last - first >= 6
    if not good.any():
        return curves
    return part(curves[good], fine[first[good]], fine[last[good]])


def _own_price(xy: Array, flow: int, backward: bool, box: Array) -> Array:
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
    across = xy[:, :, 1 - flow]
    # Against the flow on one side of it, along it on the other.
    middle = across[:, _SAMPLES // 2] - (across[:, 0] + across[:, -1]) / 2
    wrong_side = middle < -1.0 if backward else middle > 1.0
    price += 14.0 * wrong_side
    outside = np.maximum(box[0] - xy, 0) + np.maximum(xy - box[1], 0)
    return np.asarray(price + 0.4 * outside.max(axis=(1, 2)))


def _price_at_corners(ends: Array, centre: Array, size: tuple[float, float]) -> Array:
    """Return the price of docking close to a corner of a node's box."""
    if max(size) < 5.0:
        return np.zeros(len(ends))
    to_corner = np.hypot(*(np.abs(ends - centre) - np.array(size) / 2).T)
    return np.asarray(5.0 * np.maximum(0.0, 1 - to_corner / 2.5))


def _price_against_nodes(
    xy: Array, points: Mapping[str, Point], at: Mapping[str, Array], skip: set[str]
) -> Array:
    price = np.zeros(len(xy))
    for name, point in points.items():
        margin = -0.2 if name in skip else 1.6
        inside = _inside(xy, at[name], point.size, margin)
        price += (60.0 if name not in skip else 25.0) * inside.sum(axis=1)
    return price


def _price_against_strokes(xy: Array, others: Sequence[Array], reach: float) -> Array:
    """Return the price of coming close, within ``reach``, to the sampled strokes ``others``."""
    if not others:
        return np.zeros(len(xy))
    near = np.concatenate([other[::2] for other in others])
    d2 = ((xy[:, :, None, :] - near[None, None]) ** 2).sum(axis=-1)
    close = np.exp(-d2 / reach**2).max(axis=2).sum(axis=1)
    price = 4.0 * close
    for other in others:
        for mine in (xy[:, -1], xy[:, 0]):
            for its in (other[-1], other[0]):
                d = np.hypot(*(mine - its).T)
                price += 40.0 * np.maximum(0.0, 1 - d / (2.3 * reach))
    return np.asarray(price)


def route(
    points: Sequence[Point], pieces: Sequence[Piece], at: Mapping[str, Array], reach: float = 1.8
) -> list[Stroke]:
    """Return one stroke per piece, in the order of ``pieces``.

    Parameters
    ----------
    at : mapping of str to (2,) array
        Centres of the points.
    reach : float
        Distance within which strokes disturb each other.
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
            before = dict(chosen)
            for i in group:
                curves, xy, price = options[i]
                others = [bezier(c, _T) for j, c in chosen.items() if j != i]
                total = price + _price_against_strokes(xy, others, reach)
                chosen[i] = curves[int(np.argmin(total))]
            if all(i in before and np.array_equal(before[i], chosen[i]) for i in group):
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
    curves = _candidates(a, b, source, target, flow, backward)
    curves = _clip(curves, ((a, source.size), (b, size)))
    xy = np.einsum("tk,ckd->ctd", _BASIS, curves)
    price = _own_price(xy, flow, backward, box)
    price += _price_at_corners(xy[:, 0], a, source.size)
    price += _price_at_corners(xy[:, -1], b, size)
    price += _price_against_nodes(xy, points, at, {piece.source, piece.target})
    return curves, xy, price
