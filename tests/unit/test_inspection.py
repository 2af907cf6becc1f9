"""Findings before fitting: each appears where it should and nowhere else."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from ruleout.case import read_case
from ruleout.inspection import Inspection, inspect_case

TIMES = (0, 1, 2, 4, 8, 16)
HEAD = 'title = "t"\ntime_unit = "min"\namount_unit = "nM"\n'
GENE = (
    HEAD
    + """
[node.signal]
kind = "input"
[node.gene]
kind = "expressed"
[edge.on]
from = "signal"
to = "gene"
effect = "stimulates"
"""
)
FROM_ZERO = GENE.replace('kind = "expressed"', 'kind = "expressed"\nstart = 0.0')
STEP = "[readout.gene]\nof = 'gene'\n[condition.step]\ninput.signal = 1.0\n"


def inspect(
    folder: Path,
    mechanism: str,
    experiments: str,
    data: list[tuple[str, float, str, float]] | None,
) -> Inspection:
    (folder / "mechanism.toml").write_text(mechanism)
    (folder / "experiments.toml").write_text(experiments)
    if data is not None:
        rows = [",".join(map(str, row)) for row in data]
        (folder / "data.csv").write_text("\n".join(["condition,time,readout,value", *rows]) + "\n")
    return inspect_case(read_case(folder, require_data=data is not None), seed=3)


def rise(readout: str = "gene", condition: str = "step", size: float = 1.0, times=TIMES):
    return [
        (condition, t, readout, size * (1 - np.exp(-0.3 * t)) + 0.01 * (-1) ** t) for t in times
    ]


def kinds(found: Inspection, subject: str = "") -> set[str]:
    rows = found.findings
    if subject:
        rows = rows[np.array([subject in s.split(", ") for s in rows["subject"]], dtype=bool)]
    return set(rows["kind"])


def test_a_sound_case_has_no_finding_but_that_nothing_is_contested(tmp_path: Path) -> None:
    """One gene, measured directly with enough points under default priors."""
    data = rise(times=tuple(range(20)))
    found = inspect(tmp_path, GENE, STEP, data)
    assert kinds(found) == {"nothing contested"}
    assert found.identifiability.iloc[0].to_dict() == {
        "variant": "v1",
        "free_parameters": 3,
        "insensitive": 0,
        "rank": 3,
        "points": 20,
    }


def test_every_finding_has_a_message_and_a_remedy(tmp_path: Path) -> None:
    found = inspect(tmp_path, GENE, STEP, rise(size=1e6))
    assert len(found.findings) > 1
    assert found.findings["message"].str.endswith(".").all()
    assert found.findings["remedy"].str.endswith(".").all()


@pytest.mark.parametrize(("loss", "grows"), [("0", True), ("0.1", False)])
def test_what_is_made_and_never_lost_grows_without_bound(
    tmp_path: Path, loss: str, grows: bool
) -> None:
    mechanism = FROM_ZERO + TWO + f'[prior]\n"gene.loss_rate" = {loss}\n'
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(12))))
    assert ("unbounded" in kinds(found, "gene")) == grows
    assert "no rest" not in kinds(found)


@pytest.mark.parametrize(("loss", "missing"), [("0", True), ("0.1", False)])
def test_what_is_made_and_never_lost_has_no_rest(tmp_path: Path, loss: str, missing: bool) -> None:
    mechanism = GENE + TWO + f'[prior]\n"gene.loss_rate" = {loss}\n'
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(12))))
    assert ("no rest" in kinds(found, "step")) == missing


@pytest.mark.parametrize(("strength", "grows"), [("2.0", True), ("0.5", False)])
def test_a_linear_positive_loop_stronger_than_the_loss_explodes(
    tmp_path: Path, strength: str, grows: bool
) -> None:
    """dX/dt = b + s + strength X - X: bounded only while strength < 1."""
    mechanism = (
        FROM_ZERO
        + '[edge.self]\nfrom = "gene"\nto = "gene"\neffect = "stimulates"\n'
        + f'[prior]\n"gene.loss_rate" = 1.0\n"self.strength" = {strength}\n'
    )
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(12))))
    assert ("unbounded" in kinds(found, "gene")) == grows


@pytest.mark.parametrize(("b", "circles"), [(3.0, True), (1.0, False)])
def test_an_oscillator_is_told_to_reach_no_steady_state(
    tmp_path: Path, b: float, circles: bool
) -> None:
    """The Brusselator circles where b > 1 + a**2 (Prigogine & Lefever 1968)."""
    mechanism = HEAD + (
        '[node.x]\nkind = "pool"\nstart = 2.0\n[node.y]\nkind = "pool"\nstart = 1.0\n'
        '[edge.feed]\nto = "x"\neffect = "converts"\nrate = "a"\n'
        '[edge.drain]\nfrom = "x"\neffect = "converts"\nrate = "x"\n'
        '[edge.turn]\nfrom = "x"\nto = "y"\neffect = "converts"\nrate = "b * x"\n'
        '[edge.back]\nfrom = "y"\nto = "x"\neffect = "converts"\nrate = "x ** 2 * y"\n'
        f'[prior]\n"feed.a" = 1.0\n"turn.b" = {{ median = {b}, fold = 1.1 }}\n'
    )
    data = [("run", t, "x", 1.5 + np.sin(t)) for t in range(12)]
    found = inspect(tmp_path, mechanism, "[readout.x]\nof = 'x'\n[condition.run]\n", data)
    assert ("no steady state" in kinds(found, "run")) == circles
    assert not {"unbounded", "negative"} & kinds(found)


def test_a_zero_order_loss_drives_an_amount_below_zero(tmp_path: Path) -> None:
    mechanism = HEAD + (
        '[node.store]\nkind = "pool"\nstart = 1.0\n'
        '[edge.drain]\nfrom = "store"\neffect = "converts"\nrate = "k"\n'
        '[prior]\n"drain.k" = { median = 0.2, fold = 2 }\n'
    )
    data = [("run", t, "store", 1 - 0.1 * t) for t in range(9)]
    found = inspect(tmp_path, mechanism, "[readout.store]\nof = 'store'\n[condition.run]\n", data)
    assert "negative" in kinds(found, "store")


@pytest.mark.parametrize(("basal", "unstable"), [("0", True), ("0.1", False)])
def test_a_loop_at_rest_on_a_knife_edge_is_unstable(
    tmp_path: Path, basal: str, unstable: bool
) -> None:
    """At zero a switched node that feeds itself faster than it is lost cannot rest."""
    mechanism = HEAD + (
        '[node.signal]\nkind = "input"\n[node.switch]\nkind = "switched"\n'
        '[edge.on]\nfrom = "signal"\nto = "switch"\neffect = "stimulates"\n'
        '[edge.self]\nfrom = "switch"\nto = "switch"\neffect = "stimulates"\n'
        f'[prior]\n"switch.basal" = {basal}\n"switch.loss_rate" = 1.0\n"self.strength" = 3.0\n'
    )
    found = inspect(
        tmp_path,
        mechanism,
        "[readout.x]\nof = 'switch'\n[condition.step]\ninput.signal = 1.0\n",
        rise("x"),
    )
    assert ("unstable rest" in kinds(found, "step")) == unstable


@pytest.mark.parametrize(("hill", "several"), [("4.0", True), ("1.0", False)])
def test_a_bistable_gene_has_several_rests(tmp_path: Path, hill: str, several: bool) -> None:
    """dX/dt = 0.02 + X^h / (0.5^h + X^h) - X has two stable states for h = 4, one for h = 1."""
    mechanism = (
        GENE
        + '[edge.self]\nfrom = "gene"\nto = "gene"\neffect = "stimulates"\nlaw = "hill"\n'
        + '[prior]\n"gene.basal" = 0.02\n"gene.loss_rate" = 1.0\n"self.strength" = 1.0\n'
        + f'"self.half" = 0.5\n"self.hill" = {hill}\n'
    )
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(12))))
    assert ("several rests" in kinds(found, "step")) == several


def test_a_parameter_downstream_of_every_readout_is_insensitive(tmp_path: Path) -> None:
    mechanism = GENE + (
        '[node.late]\nkind = "expressed"\nstart = 1.0\n'
        '[edge.next]\nfrom = "gene"\nto = "late"\neffect = "stimulates"\n'
    )
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(20))))
    for name in ("late.loss_rate", "next.strength"):
        assert "insensitive" in kinds(found, name)
    assert "insensitive" not in kinds(found, "on.strength")
    rows = found.sensitivities.set_index("parameter")
    assert rows.loc["late.loss_rate", "largest"] == 0.0
    assert rows.loc["on.strength", "largest"] > 0.01


def test_sensitivities_are_logarithmic_derivatives(tmp_path: Path) -> None:
    """From zero and without basal rate the level is proportional to the strength: exactly 1."""
    mechanism = GENE + '[prior]\n"gene.basal" = 0\n'
    found = inspect(tmp_path, mechanism, STEP, rise(times=tuple(range(20))))
    strength = found.sensitivities.set_index("parameter").loc["on.strength"]
    # Forward differences over 1e-6.
    assert strength["at_median"] == pytest.approx(1.0, abs=1e-5)
    assert strength["typical"] == pytest.approx(1.0, abs=1e-5)


def test_a_product_that_only_shows_as_such_is_named(tmp_path: Path) -> None:
    """With a free scale only strength times scale is seen (the unit is fixed by a prior)."""
    mechanism = GENE + '[prior]\n"gene.basal" = 0\n"on.strength" = { median = 1, fold = 10 }\n'
    free = STEP.replace("of = 'gene'\n", "of = 'gene'\nscale = 'free'\n")
    found = inspect(tmp_path, mechanism, free, rise(times=tuple(range(20))))
    assert "not identifiable" in kinds(found, "on.strength")
    assert "not identifiable" in kinds(found, "gene.scale")
    row = found.identifiability.iloc[0]
    assert (row["free_parameters"], row["rank"]) == (3, 2)


def test_a_sum_that_only_shows_as_such_is_named(tmp_path: Path) -> None:
    """Two first-order losses to nowhere: their sum alone is seen, a curve in the logarithms."""
    mechanism = HEAD + (
        '[node.store]\nkind = "pool"\nstart = 1.0\n'
        '[edge.a]\nfrom = "store"\neffect = "converts"\n'
        '[edge.b]\nfrom = "store"\neffect = "converts"\n'
    )
    data = [("run", t, "store", np.exp(-0.3 * t)) for t in range(12)]
    found = inspect(tmp_path, mechanism, "[readout.store]\nof = 'store'\n[condition.run]\n", data)
    row = found.findings[found.findings["kind"] == "not identifiable"].iloc[0]
    assert row["subject"] == "a.rate, b.rate"
    assert found.identifiability.iloc[0]["rank"] == 1


TWO = """
[node.other]
kind = "expressed"
[edge.basis]
from = "signal"
to = "other"
effect = "stimulates"
[edge.extra]
from = "other"
to = "gene"
effect = "stimulates"
contested = true
"""


@pytest.mark.parametrize(
    ("more", "perturbed"),
    [
        ("", False),
        ("[condition.b]\ninput.signal = 1.0\nremove = ['other']\n", True),
        ("[condition.b]\ninput.signal = 1.0\ncut = ['extra']\n", True),
        ("[condition.b]\ninput.signal = 1.0\nclamp = { other = 0.5 }\n", True),
        ("[condition.b]\ninput.signal = 1.0\nchange = { 'other.loss_rate' = 3.0 }\n", True),
        ("[condition.b]\ninput.signal = 1.0\nchange = { 'gene.loss_rate' = 3.0 }\n", False),
        ("[condition.b]\ninput.signal = 1.0\nremove = ['other']\nhold_out = true\n", False),
    ],
)
def test_an_edge_is_perturbed_by_what_touches_it_or_its_source(
    tmp_path: Path, more: str, perturbed: bool
) -> None:
    data = rise() + (rise(condition="b") if more else [])
    found = inspect(tmp_path, GENE + TWO, STEP + more, data)
    assert ("not perturbed" in kinds(found, "extra")) != perturbed


def test_an_edge_from_an_input_that_is_switched_on_is_perturbed(tmp_path: Path) -> None:
    contested = GENE.replace('effect = "stimulates"', 'effect = "stimulates"\ncontested = true')
    found = inspect(tmp_path, contested, STEP, rise())
    assert "not perturbed" not in kinds(found)


def test_an_edge_that_reaches_no_readout_is_out_of_reach(tmp_path: Path) -> None:
    mechanism = (GENE + TWO).replace('from = "other"\nto = "gene"', 'from = "gene"\nto = "other"')
    found = inspect(tmp_path, mechanism, STEP, rise())
    assert "out of reach" in kinds(found, "extra")
    assert "not perturbed" not in kinds(found, "extra")


@pytest.mark.parametrize(("measured", "imitated"), [(["step"], True), (["step", "half"], False)])
def test_a_constant_push_cannot_be_told_from_the_basal_rate(
    tmp_path: Path, measured: list[str], imitated: bool
) -> None:
    """Under one level of the input from a start at zero only basal + strength is seen."""
    mechanism = GENE.replace(
        'effect = "stimulates"', 'effect = "stimulates"\ncontested = true'
    ).replace('kind = "expressed"', 'kind = "expressed"\nstart = 0.0')
    experiments = STEP + "[condition.half]\ninput.signal = 0.2\n"
    data = [row for name in measured for row in rise(condition=name, times=tuple(range(15)))]
    found = inspect(tmp_path, mechanism, experiments, data)
    assert ("indistinguishable" in kinds(found, "on")) == imitated


@pytest.mark.parametrize(("points", "many"), [(6, True), (12, False)])
def test_three_parameters_want_nine_points(tmp_path: Path, points: int, many: bool) -> None:
    found = inspect(tmp_path, GENE, STEP, rise(times=tuple(range(points))))
    assert ("many parameters" in kinds(found)) == many


@pytest.mark.parametrize(("size", "reached"), [(1.0, True), (1e6, False)])
def test_data_beyond_what_the_priors_predict_are_reported(
    tmp_path: Path, size: float, reached: bool
) -> None:
    mechanism = GENE + '[prior]\n"on.strength" = { median = 0.3, fold = 5 }\n'
    found = inspect(tmp_path, mechanism, STEP, rise(size=size))
    assert ("prior predictive" in kinds(found, "gene")) != reached
    table = found.prior_predictive
    inside = table["value"].between(table["low"], table["high"])
    assert (inside.mean() > 0.9) == reached


def test_own_names_with_default_priors_are_named(tmp_path: Path) -> None:
    mechanism = HEAD + (
        '[node.store]\nkind = "pool"\nstart = 1.0\n'
        '[edge.drain]\nfrom = "store"\neffect = "converts"\nrate = "vmax * store / (km + store)"\n'
        '[prior]\n"drain.vmax" = { median = 0.2, fold = 10 }\n'
    )
    data = [("run", t, "store", np.exp(-0.3 * t)) for t in range(12)]
    found = inspect(tmp_path, mechanism, "[readout.store]\nof = 'store'\n[condition.run]\n", data)
    assert "default prior" in kinds(found, "drain.km")
    assert "default prior" not in kinds(found, "drain.vmax")


def test_steady_states_alone_set_no_time_scale(tmp_path: Path) -> None:
    experiments = STEP + "[condition.half]\ninput.signal = 0.5\n"
    data = [("step", np.inf, "gene", 1.0), ("half", np.inf, "gene", 0.6)]
    found = inspect(tmp_path, GENE, experiments, data)
    assert "time scale" in kinds(found)


def test_times_over_many_decades_spoil_default_rates(tmp_path: Path) -> None:
    data = [("step", t, "gene", 1.0) for t in (0, 0.001, 1, 10, 100, 1000)]
    assert "time scale" in kinds(inspect(tmp_path, GENE, STEP, data))
    assert "time scale" not in kinds(inspect(tmp_path, GENE, STEP, rise()))


def test_units_that_nothing_fixes_are_told(tmp_path: Path) -> None:
    free = STEP.replace("of = 'gene'\n", "of = 'gene'\nscale = 'free'\n")
    assert "units" in kinds(inspect(tmp_path, GENE, free, rise()))
    assert "units" not in kinds(inspect(tmp_path, GENE, STEP, rise()))


def test_what_concerns_every_variant_is_said_once(tmp_path: Path) -> None:
    mechanism = FROM_ZERO + TWO + '[prior]\n"gene.loss_rate" = 0\n'
    found = inspect(tmp_path, mechanism, STEP, rise())
    rows = found.findings[found.findings["kind"] == "unbounded"]
    assert list(rows["variant"]) == [""]
    assert not found.findings.duplicated().any()


def test_a_plan_without_data_is_inspected_as_far_as_it_goes(tmp_path: Path) -> None:
    plan = STEP + "[plan]\ntimes = [0, 1, 2, 4, 8]\n"
    found = inspect(tmp_path, GENE + TWO, plan, None)
    assert "not perturbed" in kinds(found, "extra")
    assert list(found.identifiability["points"]) == [5, 5]
    assert (found.identifiability["rank"] > 0).all()
    assert found.prior_predictive["value"].isna().all()


def test_without_data_or_plan_the_graph_alone_is_inspected(tmp_path: Path) -> None:
    found = inspect(tmp_path, GENE + TWO, STEP, None)
    assert "no data" in kinds(found)
    assert found.sensitivities.empty
    assert set(found.equations) == set(found.variants.variants)


def test_the_same_seed_gives_the_same_tables(tmp_path: Path) -> None:
    first = inspect(tmp_path, GENE + TWO, STEP, rise())
    second = inspect(tmp_path, GENE + TWO, STEP, rise())
    for table in ("findings", "sensitivities", "identifiability", "prior_predictive"):
        assert getattr(first, table).equals(getattr(second, table))
