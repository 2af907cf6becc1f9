"""Wirings of a family as small pictures in which every node keeps its place."""

from __future__ import annotations

from typing import Final

import numpy as np

from ruleout.mechanism.types import Mechanism
from ruleout.report.layout import points_and_pieces
from ruleout.report.picture import Ink, Picture, inks, lay_out
from ruleout.report.routing import Stroke, bezier, route
from ruleout.survey.enumeration import from_label
from ruleout.survey.mechanisms import AnyFamily, MechanismFamily, VariantRoster
from ruleout.survey.systems import CONSTANT, wiring
from ruleout.survey.types import Family, Signs

MARGIN: Final = 1.5
_APART: Final = (17.0, 15.0)


class Pictures:
    """Draws the topologies of a family by their labels.

    Parameters
    ----------
    family : Family or MechanismFamily
    """

    def __init__(self, family: AnyFamily) -> None:
        self._family = family
        if isinstance(family, MechanismFamily):
            self._whole = lay_out(family.mechanism, compact=True)
            self._options = VariantRoster(family).options()

    def of(self, label: str) -> tuple[Picture, list[Ink]]:
        """Return a topology's picture and what to paint of it."""
        if isinstance(self._family, MechanismFamily):
            return self._whole, inks(self._whole, self._options[label])
        picture = topology_picture(self._family, from_label(label))
        return picture, inks(picture)


def places(family: Family) -> dict[str, tuple[float, float]]:
    """Return where nodes stand: the input's targets left, the output right, the rest below."""
    driven = list(dict.fromkeys(target for target, _ in family.drives))
    first = [k for k in driven if k != family.output] or ([] if driven else [0])
    last = [family.output] if family.output not in first else []
    rest = [k for k in range(len(family.nodes)) if k not in (*first, *last)]
    across, down = _APART
    at: dict[str, tuple[float, float]] = {}
    for row, k in enumerate(first):
        at[family.nodes[k]] = (0.0, -down * row)
    for k in last:
        at[family.nodes[k]] = (across, 0.0)
    width = max(len(rest) - 1, 0)
    for column, k in enumerate(rest):
        at[family.nodes[k]] = (across * (0.5 + column - width / 2), down)
    if family.source:
        at[family.source] = (-0.8 * across, 0.0)
    return at


def topology_picture(family: Family, signs: Signs) -> Picture:
    """Return the picture of a wiring, without constant enzymes."""
    made = wiring(family, signs)
    mechanism = Mechanism(
        title="",
        time_unit="",
        amount_unit="",
        nodes={n: node for n, node in made.nodes.items() if n != CONSTANT},
        edges={n: e for n, e in made.edges.items() if e.sources[0][0] != CONSTANT},
    )
    points, pieces = points_and_pieces(mechanism, compact=True)
    at = {name: np.array(xy) for name, xy in places(family).items()}
    strokes = route(points, pieces, at, reach=1.2)
    half = max(p.size[0] for p in points) / 2 + MARGIN
    # The same frame for every wiring, wide enough for self-edges, so that pictures line up.
    everything = np.array(list(at.values()))
    corner = everything.min(axis=0) - half - 4.0
    size = everything.max(axis=0) + half + 4.0 - corner
    seen = [bezier(s.curve, np.linspace(0.0, 1.0, 33)) for s in strokes]
    if seen:
        reach = np.concatenate(seen)
        corner = np.minimum(corner, reach.min(axis=0) - MARGIN)
        size = np.maximum(size, reach.max(axis=0) + MARGIN - corner)
    return Picture(
        mechanism=mechanism,
        points=tuple(points),
        at={name: xy - corner for name, xy in at.items()},
        strokes=tuple(Stroke(s.piece, s.curve - corner) for s in strokes),
        size=(float(size[0]), float(size[1])),
        letters={},
    )
