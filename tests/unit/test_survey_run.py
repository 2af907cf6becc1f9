"""A whole survey of a small family: tables, blocks, resuming, sampling."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from ruleout.errors import InputError
from ruleout.progress import Silent
from ruleout.store import Store
from ruleout.survey import FamilyFile, Settings, read_family, survey
from ruleout.survey.reading import BEHAVIOURS

FAMILY = """
title = "Small"
[node.I]
kind = "input"
[node.A]
kind = "switched"
[node.B]
kind = "switched"
[node.C]
kind = "switched"
[edge.I_on_A]
from = "I"
to = "A"
effect = "stimulates"
[family]
style = "enzyme"
output = "C"
self_edges = false
most_edges = 3
[sampling]
sets = 128
[behaviour.adaptation]
sensitivity = 0.5
precision = 5
[behaviour.pulse]
"""


CASE = Path(__file__).parents[2] / "mechanisms_demo" / "frost_relay"


def written(folder: Path, text: str = FAMILY) -> Path:
    path = folder / "family.toml"
    path.write_text(text)
    return path


@pytest.fixture
def small(tmp_path: Path) -> FamilyFile:
    return read_family(written(tmp_path))


def tables(result) -> list[pd.DataFrame]:
    return [result.topologies, result.features, result.principles, result.examples, result.links]


def assert_equal(one, other) -> None:
    for a, b in zip(tables(one), tables(other), strict=True):
        pd.testing.assert_frame_equal(a, b, check_exact=True)


def test_a_survey_counts_every_topology_and_finds_the_published_principle(small):
    result = survey(small, Settings(sets=256))
    rows = result.topologies[result.topologies["behaviour"] == "adaptation"]
    assert len(rows) == result.meta["family_size"] == result.meta["surveyed"]
    working = rows[rows["works"]]
    assert len(working) > 0
    assert (rows["judged"] <= rows["sets"]).all()
    assert ((rows["low"] <= rows["robustness"]) & (rows["robustness"] <= rows["high"])).all()
    assert rows.loc[rows["minimal"], "works"].all()
    required = result.principles.query("behaviour == 'adaptation' and kind == 'requires'")
    published = {
        "an incoherent feed-forward to the output",
        "a negative loop through a buffer node",
    }
    found = required[[set(p.replace("not ", "").split("; ")) == published
                      for p in required["literals"]]]  # fmt: skip
    assert found["counterexamples"].tolist() == [0]
    assert 0.0 < found["bound"].iloc[0] < found["bound_one"].iloc[0] < 1.0
    status = result.principles["status"]
    assert not status.str.contains("proven|prove").any()
    assert status.str.contains("parameter sets").all()
    best = result.examples.query("behaviour == 'adaptation'")
    assert (best["sensitivity"] > 0.5).all()
    assert (best["precision"] > 5).all()


def test_a_stopped_survey_goes_on_to_the_same_result(small, tmp_path, monkeypatch):
    monkeypatch.setattr("ruleout.survey.running._SETS_PER_BLOCK", 64 * 40)
    settings = Settings(sets=64)
    whole = survey(small, settings)

    class Stops(Silent):
        def advance(self, *_: object, **__: object) -> None:
            self.seen = getattr(self, "seen", 0) + 1
            if self.seen == 3:
                raise KeyboardInterrupt

    out = tmp_path / "run"
    with pytest.raises(KeyboardInterrupt):
        survey(small, settings, out=out, progress=Stops())
    kept = sorted((out / "stages").glob("*.npz"))
    assert len(kept) == 3
    kept[1].write_bytes(kept[1].read_bytes()[:100])
    calls = []
    put = Store.put
    monkeypatch.setattr(
        Store, "put", lambda self, key, *rest: (calls.append(key), put(self, key, *rest))
    )
    assert_equal(survey(small, settings, out=out), whole)
    stages = len(list((out / "stages").glob("*.npz")))
    assert len(calls) == stages - 2
    assert_equal(survey(small, settings, out=out), whole)
    assert len(calls) == stages - 2


def test_results_depend_neither_on_blocks_nor_on_workers(small, monkeypatch):
    settings = Settings(sets=32)
    whole = survey(small, settings)
    monkeypatch.setattr("ruleout.survey.running._SETS_PER_BLOCK", 32 * 100)
    assert_equal(survey(small, replace(settings, workers=2)), whole)


def test_a_sample_is_a_part_of_the_whole_and_says_what_it_could_miss(small):
    settings = Settings(sets=64)
    whole = survey(small, settings).topologies
    part = survey(small, replace(settings, sample=40))
    assert part.meta["surveyed"] == 40
    merged = part.topologies.merge(whole, on=["topology", "behaviour"], suffixes=("", "_whole"))
    assert len(merged) == 80
    assert (merged["shown"] == merged["shown_whole"]).all()
    # (1 - x)^40 = 0.05
    missed = part.meta["results"]["adaptation"]["missed_at_most"]
    assert missed == pytest.approx(1 - 0.05 ** (1 / 40))


def test_another_seed_draws_other_sets(small):
    one, other = (survey(small, Settings(sets=64, seed=s)) for s in (1, 2))
    assert not np.array_equal(one.topologies["shown"], other.topologies["shown"])


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('style = "enzyme"', 'style = "enzymes"', "is not one of enzyme, gene"),
        ('output = "C"', 'output = "D"', "'D' is no node that moves"),
        ("most_edges = 3", "most_edges = -1", "a whole number from 0"),
        ("[behaviour.pulse]", "[behaviour.pulses]", "is not one of adaptation"),
        ("[behaviour.pulse]", "[behaviour.delay]", "simple regulation"),
        ("sensitivity = 0.5", "sensitivty = 0.5", "did you mean 'sensitivity'?"),
        ("[sampling]", "[range]\nhalf = 1\n[sampling]", "ranges are for strength, target_half"),
        (
            "[sampling]",
            '[range]\n"A_on_D.strength" = 1\n[sampling]',
            "'A_on_D' is no edge or node",
        ),
        ('effect = "stimulates"', 'contested = ["inhibits", "absent"]', "is in every wiring"),
        ('[node.I]\nkind = "input"\n', "", "'I' is no node that moves"),
    ],
)
def test_what_cannot_be_used_is_told_with_its_place(tmp_path, old, new, message):
    assert old in FAMILY
    with pytest.raises(InputError) as raised:
        read_family(written(tmp_path, FAMILY.replace(old, new)))
    assert message in str(raised.value)
    assert "family.toml" in str(raised.value)


def test_a_family_without_members_is_refused(tmp_path):
    text = FAMILY.replace("most_edges = 3", "most_edges = 0")
    with pytest.raises(InputError, match="no wiring fits"):
        survey(read_family(written(tmp_path, text)))


def test_listed_edges_limit_the_family(tmp_path):
    listed = """
[edge.a]
from = "A"
to = "C"
effect = "stimulates"
[edge.b]
from = "C"
to = "B"
contested = ["stimulates", "absent"]
[edge.c]
from = "B"
to = "A"
contested = ["inhibits", "absent"]
"""
    text = FAMILY.replace("self_edges", 'edges = "listed"\nself_edges') + listed
    result = survey(read_family(written(tmp_path, text)), Settings(sets=8))
    assert result.meta["family_size"] == 4


def test_every_behaviour_can_be_written_in_a_family_file(tmp_path):
    text = (
        FAMILY.replace('"switched"', '"expressed"')
        .replace('"enzyme"', '"gene"')
        .replace("most_edges = 3", "most_edges = 2")
    )
    text = text[: text.index("[behaviour")] + "".join(f"[behaviour.{b}]\n" for b in BEHAVIOURS)
    text += f'case = "{CASE}"\ncondition = "pulse"\nreadout = "active_kinase"\n'
    result = survey(read_family(written(tmp_path, text)), Settings(sets=8, sample=6))
    assert set(result.topologies["behaviour"]) == set(BEHAVIOURS)


@pytest.mark.parametrize(
    ("condition", "message"),
    [("no_protectant", "does more than to step an input"), ("cold", "is not one of step")],
)
def test_conditions_that_no_family_can_follow_are_refused(tmp_path, condition, message):
    text = FAMILY[: FAMILY.index("[behaviour")] + (
        f'[behaviour.resemblance]\ncase = "{CASE}"\ncondition = "{condition}"\n'
        'readout = "active_kinase"\n'
    )
    with pytest.raises(InputError, match=message):
        read_family(written(tmp_path, text))
