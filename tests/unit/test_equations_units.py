"""Units that nothing fixes, found by linear algebra and checked by rescaling in numbers."""

import numpy as np
import pytest

from ruleout.equations import build, unit_ties
from ruleout.equations.units import scaling
from ruleout.expressions import evaluate
from ruleout.variants import expand

CHAIN = """
[node.u]
kind = "input"
[node.x]
kind = "switched"
[node.z]
kind = "expressed"
[edge.ux]
from = "u"
to = "x"
effect = "stimulates"
[edge.xz]
from = "x"
to = "z"
effect = "stimulates"
{xz}
[edge.zx]
from = "z"
to = "x"
effect = "inhibits"
law = "hill"
contested = true
"""
PLAIN = CHAIN.format(xz="")
READ_X = '[readout.y]\nof = "x"\n[condition.c]\ninput.u = 1.0\n'


def ties(case):
    return unit_ties(expand(case.mechanism, case.experiments), case.experiments)


def test_a_hidden_node_gets_its_unit_from_its_strongest_claim(case_of):
    found, sentences = ties(case_of(PLAIN, READ_X))
    assert found == {"xz.strength": "z.loss_rate"}
    assert len(sentences) == 1
    assert "unit of z" in sentences[0]


def test_a_node_read_on_a_free_scale_is_free_as_well(case_of):
    found, _ = ties(case_of(PLAIN, READ_X.replace('of = "x"', 'of = "z"\nscale = "free"')))
    assert found == {"xz.strength": "z.loss_rate"}


@pytest.mark.parametrize(
    "experiments",
    [
        '[readout.y]\nof = "z"\n[condition.c]\n',  # absolute
        '[readout.y]\nof = "z"\nscale = 2.5\n[condition.c]\n',
        '[readout.y]\nof = "x + z"\nscale = "free"\n[condition.c]\n',  # tied to a fraction
        '[readout.y]\nof = "z / (1 + z)"\nscale = "free"\n[condition.c]\n',
        READ_X + "start.z = 2.0\n",
        READ_X + "clamp.z = 2.0\n",
        READ_X + "add.z = [[5, 1.0]]\n",
    ],
)
def test_what_is_absolute_in_an_experiment_fixes_the_unit(case_of, experiments):
    assert ties(case_of(PLAIN, experiments)) == ({}, ())


@pytest.mark.parametrize(
    "experiments",
    [
        READ_X + "start.z = 0.0\n",
        READ_X + 'start.z = "free"\n',
        READ_X + 'change = { "z.basal" = 2.0 }\n',
        READ_X + 'remove = ["z"]\n',
        '[readout.y]\nof = "z"\nrelative_to = { time = 0 }\n[condition.c]\n',
        '[readout.y]\nof = "z / (z + 2 * z)"\n[condition.c]\n',
    ],
)
def test_what_is_relative_does_not(case_of, experiments):
    assert ties(case_of(PLAIN, experiments))[0] == {"xz.strength": "z.loss_rate"}


@pytest.mark.parametrize(
    "prior",
    [
        '"xz.strength" = 0.1',
        '"xz.strength" = { median = 1.0, fold = 10 }',
        '"z.basal" = { median = 1.0, fold = 10 }',
    ],
)
def test_a_prior_on_a_gain_is_the_users_decision(case_of, prior):
    assert ties(case_of(PLAIN + f"[prior]\n{prior}\n", READ_X)) == ({}, ())


@pytest.mark.parametrize(
    "prior",
    [
        '"z.loss_rate" = 0.1',
        '"zx.hill" = { low = 1, high = 4 }',
        '"z.basal" = 0',
        '"ux.strength" = 2.0',
    ],
)
def test_priors_that_carry_no_unit_of_the_node_are_not(case_of, prior):
    found, _ = ties(case_of(PLAIN + f"[prior]\n{prior}\n", READ_X))
    assert found == {"xz.strength": "z.loss_rate"}


def test_a_prior_that_fixes_some_variants_only_leaves_a_hint_and_no_tie(case_of):
    found, sentences = ties(case_of(PLAIN + '[prior]\n"zx.half" = 1.0\n', READ_X))
    assert found == {}
    assert "1 of 2 variants" in sentences[0]


def test_where_every_edge_is_contested_the_basal_gain_is_tied(case_of):
    found, _ = ties(case_of(CHAIN.format(xz="contested = true"), READ_X))
    assert found == {"z.basal": "z.loss_rate"}


def test_without_any_uncontested_gain_the_user_is_asked(case_of):
    text = CHAIN.format(xz="contested = true") + '[prior]\n"z.basal" = 0\n'
    found, sentences = ties(case_of(text, READ_X))
    assert found == {}
    assert "give z.basal or the strength of an edge to it a fixed value" in sentences[0]


def test_parameters_with_own_values_are_no_yardstick(case_of):
    found, _ = ties(case_of(PLAIN, READ_X + 'free = ["xz.strength"]\n'))
    assert found == {"z.basal": "z.loss_rate"}
    assert ties(case_of(PLAIN, READ_X + 'free = ["z.loss_rate"]\n'))[0] == {}


CASCADE = """
[node.u]
kind = "input"
[node.p]
kind = "expressed"
[node.q]
kind = "expressed"
[edge.pq]
from = "p"
to = "q"
effect = "stimulates"
[edge.up]
from = "u"
to = "p"
effect = "stimulates"
"""
READ_Q = '[readout.y]\nof = "q"\nscale = "free"\n[condition.c]\ninput.u = 1.0\n'


def test_a_unit_that_hangs_on_another_one_is_fixed_after_it(case_of):
    """In whichever order the nodes stand in the file."""
    expected = {"up.strength": "p.loss_rate", "pq.strength": "q.loss_rate"}
    assert ties(case_of(CASCADE, READ_Q))[0] == expected
    node = '[node.p]\nkind = "expressed"\n'
    assert ties(case_of(CASCADE.replace(node, "") + node, READ_Q))[0] == expected


def test_nodes_that_share_material_share_one_tie(case_of):
    text = CASCADE.replace('effect = "stimulates"', 'effect = "converts"', 1)
    found, _ = ties(case_of(text, READ_Q))
    assert found == {"up.strength": "p.loss_rate"}


def test_pools_and_switched_nodes_keep_their_units(case_of):
    text = CASCADE.replace('[node.q]\nkind = "expressed"', '[node.q]\nkind = "pool"\nstart = 1.0')
    text = text.replace('effect = "stimulates"', 'effect = "converts"', 1)
    assert ties(case_of(text, READ_Q)) == ({}, ())


def test_rescaling_along_the_removed_direction_changes_no_readout(case_of):
    """The exponents found by hand for z -> c z leave dx/dt alone and scale dz/dt by c."""
    case = case_of(PLAIN, READ_X)
    variant = list(expand(case.mechanism, case.experiments).variants.values())[-1]
    model = build(variant, case.mechanism, case.experiments)
    rng = np.random.default_rng(1)
    at = {name: rng.uniform(0.2, 0.9) for name in (*model.parameters, *model.states, "u")}
    c = 7.0
    moved = dict.fromkeys(("z", "z.basal", "xz.strength", "zx.half"), c)
    before = evaluate(model.rhs, at)
    after = evaluate(model.rhs, {name: v * moved.get(name, 1.0) for name, v in at.items()})
    assert after == pytest.approx([before[0], c * before[1]], rel=1e-12)
    system = scaling(model, case.mechanism, case.experiments)
    every = (*model.parameters, *model.states)
    assert {name for name in every if system.leaves_open(name)} == set(moved)


@pytest.mark.parametrize(
    ("rate", "open_"),
    [
        ("k * z", True),
        ("v * z / (m + z)", True),
        ("k * sqrt(z)", True),
        ("k * max(z, m)", True),
        ("k * exp(-z / m)", True),
        ("k * z ** h", False),  # z ** h with h unknown: no power of the scale
        ("k * exp(-z)", False),
        ("k * max(z, 0.5)", False),
        ("k * (1 + z)", False),
        ("k * tanh(z)", False),
    ],
)
def test_rate_expressions_keep_the_unit_open_or_fix_it(case_of, rate, open_):
    text = PLAIN + f'[edge.e]\nfrom = "z"\neffect = "converts"\nrate = "{rate}"\n'
    case = case_of(text, READ_X)
    variant = expand(case.mechanism, case.experiments).variants["v1"]
    model = build(variant, case.mechanism, case.experiments)
    assert scaling(model, case.mechanism, case.experiments).leaves_open("z") is open_
