"""Adaptation in three-node enzyme networks.

Ma, Trusina, El-Samad, Lim and Tang, Cell 138 (2009) 760-773, doi:10.1016/j.cell.2009.06.013: every
network that adapts has a negative feedback loop with a buffering node or an incoherent
feed-forward loop with a proportioner node. Criteria (sensitivity > 1, precision > 10, input 0.5 to
0.6) and ranges are quoted from memory.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from ruleout.survey import FamilyFile, Settings, read_family, survey
from ruleout.survey.enumeration import from_label
from ruleout.survey.features import find_features
from ruleout.survey.sampling import parameter_sets
from ruleout.survey.systems import Member

FAMILY = Path(__file__).parents[2] / "families" / "adaptation.toml"
BUFFER = "a negative loop through a buffer node"
PROPORTIONER = "an incoherent feed-forward to the output"


def family(most_edges: int) -> FamilyFile:
    source = read_family(FAMILY)
    return replace(source, family=replace(source.family, most_edges=most_edges))


@pytest.mark.parametrize("sets", [128, pytest.param(8192, marks=pytest.mark.slow)])
def test_no_small_network_outside_the_two_published_families_adapts(sets):
    source = family(3)
    result = survey(source, Settings(sets=sets))
    assert len(result.topologies) == 310
    signs = np.array([from_label(t) for t in result.topologies["topology"]])
    features = find_features(source.family, signs)
    inside = features.have[:, [features.names.index(n) for n in (BUFFER, PROPORTIONER)]].any(axis=1)
    shown = result.topologies["shown"].to_numpy()
    assert not shown[~inside].any()
    assert shown[inside].any()
    # A check that could pass by judging nothing: nearly all sets outside are judged.
    judged = result.topologies["judged"].to_numpy()[~inside]
    assert judged.sum() > 0.99 * sets * len(judged)


@pytest.mark.parametrize(
    "label",
    [
        pytest.param("0++|00-|000", id="incoherent feed-forward, A stimulates C"),
        pytest.param("0+-|00+|000", id="incoherent feed-forward, A inhibits C"),
        pytest.param("00+|00-|0+0", id="negative feedback on the output"),
        pytest.param("0++|-00|000", id="negative feedback on the receiver"),
    ],
)
def test_members_of_the_families_adapt(label):
    source = family(3)
    member = Member(source.family, from_label(label))
    sets = parameter_sets(source.family, member.parameters, 8192, "sobol", 1, label)
    (adaptation,) = source.behaviours
    score = adaptation.score(member.subject(sets))
    assert score.shown.any()
    assert (score.measures["precision"][score.shown] > 10).all()
    assert (score.measures["sensitivity"][score.shown] > 1).all()
