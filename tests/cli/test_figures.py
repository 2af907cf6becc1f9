"""Figures for papers: what they hold, their size, and that nothing in a graph overlaps."""

from __future__ import annotations

import itertools
import re
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from ruleout.errors import InputError
from ruleout.mechanism.types import Edge, Mechanism, Node
from ruleout.report.fit_figure import checks_figure, fit_figure
from ruleout.report.graph_figure import mechanism_figure
from ruleout.report.layout import abbreviations, label_lines
from ruleout.report.panels import panels_of
from ruleout.report.picture import inks, lay_out
from ruleout.report.routing import bezier
from ruleout.report.style import COLOURS, COLUMN, PAGE, condition_styles, figure_style
from ruleout.report.table_figure import table_figure
from ruleout.report.tables import choices_of, option_words, present_parts
from ruleout.report.writing import save_figure
from ruleout.verdicts.types import Judgement


def edge(name: str, source: str, target: str, effect: str = "stimulates", **more: Any) -> Edge:
    ends = {"sources": ((source, 1.0),), "targets": ((target, 1.0),) if target else ()}
    return Edge(name=name, effects=(effect,), **{**ends, **more})


def mechanism(nodes: Mapping[str, str], *edges: Edge) -> Mechanism:
    return Mechanism(
        title="A mechanism",
        time_unit="min",
        amount_unit="uM",
        nodes={n: Node(n, kind) for n, kind in nodes.items()},
        edges={e.name: e for e in edges},
    )


def chain(length: int) -> Mechanism:
    """A chain with a feedback, a shortcut and a self-loop."""
    names = ["signal", *(f"protein_{i}" for i in range(1, length))]
    nodes = dict.fromkeys(names, "expressed") | {"signal": "input"}
    edges = [edge(f"e{i}", a, b) for i, (a, b) in enumerate(itertools.pairwise(names))]
    edges.append(edge("back", names[-1], names[1], "inhibits", removable=True))
    edges.append(edge("short", names[0], names[-1], removable=True))
    edges.append(edge("self", names[-1], names[-1], "inhibits", removable=True))
    return mechanism(nodes, *edges)


FORK = mechanism(
    dict.fromkeys("abcdefg", "switched") | {"a": "input"},
    edge("ab", "a", "b"),
    edge("ac", "a", "c"),
    edge("bd", "b", "d"),
    edge("cd", "c", "d", "inhibits"),
    edge("de", "d", "e"),
    edge("df", "d", "f"),
    edge("fb", "f", "b", "inhibits", removable=True),
    edge("ec", "e", "c", removable=True),
    edge("eg", "e", "g"),
    edge("fg", "f", "g"),
    edge("ga", "g", "b", "inhibits", removable=True),
)
POOLS = mechanism(
    {"gut": "pool", "plasma": "pool", "tissue": "pool", "drug": "input"},
    edge("absorb", "gut", "plasma", "converts"),
    edge("spread", "plasma", "tissue", "converts", reversible=True, removable=True),
    edge("clear", "plasma", "", "converts"),
    edge("block", "drug", "", "inhibits", onto="absorb", removable=True),
)


@pytest.mark.parametrize(
    "drawn", [chain(n) for n in (3, 4, 6, 9, 12)] + [FORK, POOLS], ids=lambda m: len(m.nodes)
)
@pytest.mark.parametrize("compact", [False, True])
def test_nothing_overlaps_in_a_graph(drawn: Mechanism, compact: bool) -> None:
    picture = lay_out(drawn, compact=compact)
    for a, b in itertools.combinations(picture.points, 2):
        apart = np.abs(picture.at[a.name] - picture.at[b.name])
        assert (apart >= (np.array(a.size) + np.array(b.size)) / 2).any(), (a.name, b.name)
    for stroke in picture.strokes:
        xy = bezier(stroke.curve, np.linspace(0, 1, 60))
        assert (xy >= -1e-9).all()
        assert (xy <= np.array(picture.size) + 1e-9).all()
        ends = {stroke.piece.source, stroke.piece.target}
        for point in picture.points:
            if point.name not in ends:
                inside = np.abs(xy - picture.at[point.name]) < np.array(point.size) / 2
                assert not inside.all(axis=1).any(), (stroke.piece, point.name)


def test_arrowheads_on_one_node_stand_apart() -> None:
    picture = lay_out(FORK)
    tips: dict[str, list[np.ndarray]] = {}
    for stroke in picture.strokes:
        tips.setdefault(stroke.piece.target, []).append(stroke.curve[-1])
    for ends in tips.values():
        for a, b in itertools.combinations(ends, 2):
            assert np.hypot(*(a - b)) > 1.5


def test_a_feedback_is_curved_and_a_step_of_the_chain_is_straight() -> None:
    picture = lay_out(chain(4))
    strokes = {s.piece.edge: s.curve for s in picture.strokes}

    def bulge(curve: np.ndarray) -> float:
        chord = curve[3] - curve[0]
        normal = np.array([-chord[1], chord[0]]) / np.hypot(*chord)
        return float(np.abs((bezier(curve, np.linspace(0, 1, 20)) - curve[0]) @ normal).max())

    assert bulge(strokes["back"]) > 2.0
    assert bulge(strokes["e0"]) < 0.1


def test_every_contested_part_is_dashed_and_an_absent_one_is_told_apart() -> None:
    picture = lay_out(chain(4))
    assert set(picture.letters) == {"back", "short", "self"}
    choices = {"back": "absent", "short": "stimulates/linear", "self": "absent"}
    roles = {ink.of: ink.role for ink in inks(picture, choices) if ink.kind == "curve"}
    assert roles["back"] == "absent"
    assert roles["short"] == "contested"
    assert roles["e0"] == "settled"


def test_a_sign_in_dispute_takes_the_heads_of_its_choice() -> None:
    doubtful = Edge("ab", (("a", 1.0),), (("b", 1.0),), ("stimulates", "inhibits"), removable=True)
    picture = lay_out(mechanism({"a": "input", "b": "expressed"}, doubtful))

    def head(choices: Mapping[str, str] | None) -> int:
        return len(next(i for i in inks(picture, choices) if i.kind == "shape").points)

    assert head(None) == 4  # a diamond: unknown
    assert head({"ab": "stimulates/linear"}) == 3  # a triangle
    assert head({"ab": "inhibits/hill"}) == 2  # a bar


def test_abbreviations_are_distinct_and_short() -> None:
    names = ["protein", "protease", "protectant", "pro", "kinase_one", "kinase_two", "k"]
    short = abbreviations(names)
    assert len(set(short.values())) == len(names)
    assert all(len(s) <= 4 for s in short.values())


def test_long_names_break_at_underscores() -> None:
    assert label_lines("kinase") == ("kinase",)
    assert "".join(label_lines("phosphorylated_kinase_two")) == "phosphorylated_kinase_two"
    assert len(label_lines("phosphorylated_kinase_two")) > 1


def test_choices_are_read_back_from_the_table() -> None:
    cell = "a=stimulates/hill;b=absent"
    assert choices_of(cell) == {"a": "stimulates/hill", "b": "absent"}


def test_options_are_told_apart_by_what_differs() -> None:
    cells = [
        "there=inhibits/hill;sign=stimulates/hill;law=converts/linear;both=absent",
        "there=absent;sign=inhibits/hill;law=converts/saturating;both=stimulates/hill",
        "there=absent;sign=absent;law=converts/linear;both=inhibits/linear",
    ]
    words = option_words(cells)
    assert present_parts(cells[0], words) == ["there", "sign (stimulates)", "law (linear)"]
    assert present_parts(cells[1], words)[-1] == "both (stimulates, hill)"
    assert list(words["law"].values()) == ["linear", "saturating"]


def test_figures_have_the_widths_of_journals(frost_judgement: Judgement, frost_case: Any) -> None:
    picture = lay_out(frost_case.mechanism)
    with figure_style():
        figures = [
            mechanism_figure(picture),
            table_figure(frost_judgement, picture),
            fit_figure(frost_judgement, "v1"),
            checks_figure(frost_judgement, ["v1", "v3"]),
        ]
    for figure in figures:
        assert figure is not None
        width = figure.get_size_inches()[0] * 25.4
        assert min(abs(width - COLUMN), abs(width - PAGE)) < 0.01


def test_text_stays_text_and_the_same_figure_gives_the_same_file(
    frost_judgement: Judgement, frost_case: Any, tmp_path: Path
) -> None:
    picture = lay_out(frost_case.mechanism)
    for run in ("one", "two"):
        with figure_style():
            save_figure(table_figure(frost_judgement, picture), tmp_path / run, "variants")
    svg = (tmp_path / "one" / "variants.svg").read_text()
    assert ">ruled out</text>" in svg
    assert b"/Type3" not in (tmp_path / "one" / "variants.pdf").read_bytes()
    for kind in ("svg", "pdf", "png"):
        first, second = (
            (tmp_path / run / f"variants.{kind}").read_bytes() for run in ("one", "two")
        )
        assert first == second


def test_fonts_are_6_to_8_points(frost_judgement: Judgement, tmp_path: Path) -> None:
    with figure_style():
        save_figure(fit_figure(frost_judgement, "v1"), tmp_path, "fit")
    sizes = {
        float(s)
        for s in re.findall(
            r"font(?:-size)?: (?:\w+ )*?([\d.]+)px", (tmp_path / "fit.svg").read_text()
        )
    }
    assert sizes
    assert min(sizes) >= 6
    assert max(sizes) <= 8


def test_the_panel_where_the_check_fails_is_marked(frost_judgement: Judgement) -> None:
    panels = {(p.condition, p.readout): p for p in panels_of(frost_judgement, "v1")}
    assert panels["step", "active_kinase"].fails == ("peak",)
    assert panels["pulse", "active_kinase"].fails == ()
    assert not any(p.fails for p in panels_of(frost_judgement, "v3"))


def test_steady_states_of_many_conditions_share_a_panel(
    judgement_with: Callable[..., Judgement], frost_judgement: Judgement
) -> None:
    residuals = frost_judgement.residuals.assign(time=np.inf)
    curves = frost_judgement.curves.groupby(["variant", "condition", "readout"]).head(1)
    judgement = judgement_with(residuals=residuals, curves=curves.assign(time=np.inf))
    panels = panels_of(judgement, "v1")
    assert [p.readout for p in panels] == ["active_kinase", "protectant_level"]
    with figure_style():
        assert len(fit_figure(judgement, "v1").axes) == 2


def test_a_condition_has_its_own_colour_and_marker_everywhere() -> None:
    styles = condition_styles([f"c{i}" for i in range(20)])
    assert len(set(styles.values())) == 20


def test_a_style_file_overrides_ours_and_a_bad_one_is_bad_input(tmp_path: Path) -> None:
    import matplotlib as mpl

    good, bad = tmp_path / "good", tmp_path / "bad"
    good.write_text("font.size: 8\n")
    bad.write_text("font.size: large as life\n")
    with figure_style(good):
        assert mpl.rcParams["font.size"] == 8
    with pytest.raises(InputError, match="style file"), figure_style(bad):
        pass


# Machado, Oliveira & Fernandes 2009, severity 1: linear RGB to what is seen.
# doi:10.1109/TVCG.2009.113
DEUTERANOPIA = np.array(
    [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ]
)
PROTANOPIA = np.array(
    [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ]
)


def lab(colour: str, seen_through: np.ndarray) -> np.ndarray:
    rgb = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    to_xyz = np.array(
        [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    )
    xyz = to_xyz @ np.clip(seen_through @ linear, 0, 1) / np.array([0.9505, 1.0, 1.089])
    f = np.where(xyz > 0.008856, np.cbrt(xyz), 7.787 * xyz + 16 / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("sight", [np.eye(3), DEUTERANOPIA, PROTANOPIA], ids=["full", "d", "p"])
def test_the_palette_stays_apart_for_the_colour_blind(sight: np.ndarray) -> None:
    # A difference of 2.3 is just noticeable in CIE Lab; 20 is plain.
    for a, b in itertools.combinations(COLOURS, 2):
        assert np.linalg.norm(lab(a, sight) - lab(b, sight)) > 20, (a, b)
