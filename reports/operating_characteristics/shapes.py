"""Six mechanism shapes with true parameter values, and the designs they are measured by."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

HEAD = 'time_unit = "h"\namount_unit = "uM"\n'

RELAY = """
[node.u]
kind = "input"
[node.a]
kind = "switched"
[node.b]
kind = "expressed"
[edge.u_on_a]
from = "u"
to = "a"
effect = "stimulates"
[edge.a_on_b]
from = "a"
to = "b"
effect = "stimulates"
[edge.brake]
from = "b"
to = "a"
effect = "inhibits"
law = "hill"
contested = true
[prior]
"a.basal" = 0
"b.basal" = 0
"brake.hill" = 2
"""

FORWARD_OR_BACK = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.y]
kind = "expressed"
[edge.u_on_y]
from = "u"
to = "y"
effect = "stimulates"
[edge.x_on_y]
from = "x"
to = "y"
effect = "inhibits"
law = "hill"
[edge.forward]
from = "u"
to = "x"
effect = "stimulates"
contested = true
[edge.back]
from = "y"
to = "x"
effect = "stimulates"
contested = true
[rule.source]
exactly_one = ["forward", "back"]
[prior]
"x.basal" = 0
"y.basal" = 0
"x_on_y.hill" = 2
"x_on_y.half" = 1
"""

GENE = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[edge.u_on_x]
from = "u"
to = "x"
effect = "stimulates"
[edge.self]
from = "x"
to = "x"
law = "hill"
contested = ["stimulates", "inhibits", "absent"]
[prior]
"x.basal" = 0
"self.hill" = 2
"""

CONVERSION = """
[node.a]
kind = "pool"
start = 1.0
[node.b]
kind = "pool"
start = 0
[node.c]
kind = "pool"
start = 0
[edge.ab]
from = "a"
to = "b"
effect = "converts"
reversible = true
[edge.bc]
from = "b"
to = "c"
effect = "converts"
[edge.shortcut]
from = "a"
to = "c"
effect = "converts"
contested = true
"""

SATURATION = """
[node.s]
kind = "pool"
start = 1.0
[node.p]
kind = "pool"
start = 0
[edge.turnover]
from = "s"
to = "p"
effect = "converts"
law = ["linear", "saturating"]
"""

OSCILLATOR = """
[node.x]
kind = "expressed"
start = 1.0
[node.y]
kind = "expressed"
start = 0.3
[node.z]
kind = "expressed"
start = 0.1
[edge.xy]
from = "x"
to = "y"
effect = "inhibits"
law = "hill"
[edge.yz]
from = "y"
to = "z"
effect = "inhibits"
law = "hill"
[edge.zx]
from = "z"
to = "x"
effect = "inhibits"
law = "hill"
[edge.extra]
from = "x"
to = "z"
effect = "stimulates"
contested = true
[prior]
"xy.hill" = 3
"yz.hill" = 3
"zx.hill" = 3
"xy.half" = 1
"yz.half" = 1
"zx.half" = 1
"y.loss_rate" = "x.loss_rate"
"z.loss_rate" = "x.loss_rate"
"""


@dataclass(frozen=True, slots=True)
class Shape:
    """A mechanism in dispute with nominal parameter values.

    Attributes
    ----------
    mechanism : str
        ``mechanism.toml`` but for its head and the priors of ``values``.
    values : mapping of parameter to float
        Nominal values, of rivals' own parameters too; the centre of the priors.
    readouts : tuple of nodes
    conditions : mapping of name to its text in ``experiments.toml``
    times : mapping of design size to times
    start_only : bool
        Rows at time 0 are left out in any case.
    """

    mechanism: str
    values: Mapping[str, float]
    readouts: tuple[str, ...]
    conditions: Mapping[str, str]
    times: Mapping[str, tuple[float, ...]]
    wide: frozenset[str] = field(default_factory=frozenset)


SHAPES: Mapping[str, Shape] = {
    "relay": Shape(
        RELAY,
        {
            "u_on_a.strength": 0.5,
            "a.loss_rate": 0.2,
            "a_on_b.strength": 0.6,
            "b.loss_rate": 0.1,
            "brake.half": 0.5,
        },
        ("a", "b"),
        {"step": "input.u = 1.0", "pulse": "input.u = [[0, 1.0], [6, 0.0]]"},
        {
            "small": (1, 2, 4, 6, 9, 13, 18, 25),
            "medium": (
                0.5,
                1,
                1.5,
                2,
                3,
                4,
                5,
                6,
                7,
                8,
                9,
                10,
                11,
                12,
                13,
                14,
                15,
                16,
                18,
                20,
                22,
                24,
                26,
                28,
                30,
            ),
        },
        frozenset({"brake.half"}),
    ),
    "forward_or_back": Shape(
        FORWARD_OR_BACK,
        {
            "u_on_y.strength": 2.0,
            "x.loss_rate": 0.15,
            "y.loss_rate": 0.8,
            "forward.strength": 0.5,
            "back.strength": 0.5,
        },
        ("y",),
        {
            "full": "input.u = 1.0",
            "third": "input.u = 0.3",
            "pulse": "input.u = [[0, 1.0], [4, 0.0], [10, 1.0]]",
        },
        {
            "small": (0.5, 1, 1.5, 2.5, 4, 6, 9, 12, 15, 20),
            "medium": (
                0.25,
                0.5,
                0.75,
                1,
                1.25,
                1.5,
                2,
                2.5,
                3,
                3.5,
                4,
                4.5,
                5,
                6,
                7,
                8,
                9,
                10,
                10.5,
                11,
                11.5,
                12,
                12.5,
                13,
                14,
                15,
                16,
                17,
                18,
                19,
                20,
                22,
                24,
            ),
        },
    ),
    "gene": Shape(
        GENE,
        {"u_on_x.strength": 3.0, "x.loss_rate": 0.5, "self.half": 1.5, "self.strength": 1.0},
        ("x",),
        {
            "induced": "input.u = 1.0",
            "washed": "input.u = [[0, 1.0], [3, 0.0]]",
            "faint": "input.u = 0.15",
        },
        {
            "small": (0.3, 0.6, 1, 1.5, 2, 3, 4, 5, 6.5, 8),
            "medium": (
                0.2,
                0.4,
                0.6,
                0.8,
                1,
                1.25,
                1.5,
                1.75,
                2,
                2.25,
                2.5,
                2.75,
                3,
                3.25,
                3.5,
                3.75,
                4,
                4.25,
                4.5,
                4.75,
                5,
                5.25,
                5.5,
                5.75,
                6,
                6.5,
                7,
                7.5,
                8,
                8.5,
                9,
                9.5,
                10,
            ),
        },
        frozenset({"self.half"}),
    ),
    "conversion": Shape(
        CONVERSION,
        {"ab.rate": 0.8, "ab.rate_back": 0.3, "bc.rate": 0.4, "shortcut.rate": 0.3},
        ("a", "b", "c"),
        {"given": ""},
        {
            "small": (0.3, 0.6, 1, 1.5, 2, 3, 4, 5, 7, 10),
            "medium": (
                0.1,
                0.2,
                0.3,
                0.4,
                0.5,
                0.6,
                0.8,
                1,
                1.2,
                1.4,
                1.6,
                1.8,
                2,
                2.25,
                2.5,
                2.75,
                3,
                3.5,
                4,
                4.5,
                5,
                5.5,
                6,
                6.5,
                7,
                7.5,
                8,
                8.5,
                9,
                9.5,
                10,
                11,
                12,
            ),
        },
    ),
    "saturation": Shape(
        SATURATION,
        {"turnover.rate": 0.5, "turnover.half": 0.4},
        ("s", "p"),
        {"low": "start.s = 0.5", "high": "start.s = 2.0"},
        {
            "small": (0.5, 1, 1.5, 2, 3, 4, 6, 8),
            "medium": (
                0.25,
                0.5,
                0.75,
                1,
                1.25,
                1.5,
                1.75,
                2,
                2.25,
                2.5,
                2.75,
                3,
                3.25,
                3.5,
                3.75,
                4,
                4.5,
                5,
                5.5,
                6,
                6.5,
                7,
                7.5,
                8,
                9,
            ),
        },
        frozenset({"turnover.half"}),
    ),
    "oscillator": Shape(
        OSCILLATOR,
        {"x.basal": 4.0, "y.basal": 4.0, "z.basal": 4.0, "x.loss_rate": 1.0, "extra.strength": 1.0},
        ("x", "y", "z"),
        {"free_running": ""},
        {
            "small": (0.5, 1, 2, 3, 4, 5, 6.5, 8, 10, 12),
            "medium": (
                0.2,
                0.4,
                0.6,
                0.8,
                1,
                1.3,
                1.6,
                2,
                2.4,
                2.8,
                3.2,
                3.6,
                4,
                4.4,
                4.8,
                5.2,
                5.6,
                6,
                6.4,
                6.8,
                7.2,
                7.6,
                8,
                8.4,
                8.8,
                9.2,
                9.6,
                10,
                10.4,
                10.8,
                11.2,
                11.6,
                12,
            ),
        },
    ),
}
