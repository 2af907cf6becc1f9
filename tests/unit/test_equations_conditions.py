"""Conditions: what each does to systems, break points, levels and rest.

Trajectories are checked against right-hand sides written by hand and integrated piece by piece.
"""

from itertools import pairwise
from math import inf

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from ruleout.equations import build, setups
from ruleout.expressions import evaluate
from ruleout.variants import expand

RELAY = """
[node.u]
kind = "input"
resting = 0.1
[node.v]
kind = "input"
[node.x]
kind = "switched"
[node.z]
kind = "expressed"
[edge.ux]
from = "u"
to = "x"
effect = "stimulates"
[edge.vz]
from = "v"
to = "z"
effect = "stimulates"
[edge.xz]
from = "x"
to = "z"
effect = "stimulates"
[edge.zx]
from = "z"
to = "x"
effect = "inhibits"
law = "hill"
"""
VALUES = {
    "x.basal": 0.05,
    "x.loss_rate": 0.3,
    "z.basal": 0.02,
    "z.loss_rate": 0.2,
    "ux.strength": 0.8,
    "vz.strength": 0.15,
    "xz.strength": 0.6,
    "zx.half": 0.7,
    "zx.hill": 2.0,
}
TIMES = np.array([0.0, 1.0, 2.5, 4.0, 7.0, 12.0])
READ = '[readout.y]\nof = "x + z"\n'


def prepared(case, times=TIMES):
    """Return the setups of all conditions, by name."""
    (variant,) = expand(case.mechanism, case.experiments).variants.values()
    model = build(variant, case.mechanism, case.experiments)
    asked = dict.fromkeys(case.experiments.conditions, times)
    return {setup.condition: setup for setup in setups(model, case.experiments, asked)}


def one(case_of, condition: str, mechanism: str = RELAY, times=TIMES):
    return prepared(case_of(mechanism, f"{READ}[condition.c]\n{condition}\n"), times)["c"]


def integrate(rhs, y0, start, stop, times):
    """Return states at ``times`` (in [start, stop]) and at ``stop``."""
    if stop == start:
        return np.tile(y0, (len(times), 1)), np.array(y0)
    solved = solve_ivp(
        rhs, (start, stop), y0, method="LSODA", rtol=1e-10, atol=1e-12, dense_output=True
    )
    return solved.sol(np.asarray(times)).T if len(times) else np.empty((0, len(y0))), solved.y[
        :, -1
    ]


def rest_of(setup, values) -> dict[str, float]:
    """Settle the rest system from zero and return its states by name."""
    system = setup.rest_system
    starts = {}
    for name, start in zip(setup.system.states, setup.starts, strict=True):
        if start.value is not None:
            starts[f"start:{name}"] = _value(start, setup, values)
    p = [
        factor * (values | starts).get(name, 0.0) + shift
        for name, factor, shift in zip(
            system.parameters, setup.rest_factor, setup.rest_shift, strict=True
        )
    ]
    at = dict(zip(system.parameters, p, strict=True))

    def rhs(_, y):
        return evaluate(system.rhs, at | dict(zip(system.states, y, strict=True)))

    _, end = integrate(rhs, np.zeros(len(system.states)), 0.0, 1000.0, [])
    return dict(zip(system.states, end, strict=True))


def _value(start, setup, values):
    factors = setup.start_factors
    return evaluate([start.value], {n: v * factors.get(n, 1.0) for n, v in values.items()})[0]


def simulate(setup, values) -> dict[str, np.ndarray]:
    """Follow a setup as the kernel's contract says, with SciPy."""
    system, protocol = setup.system, setup.protocol
    rest = rest_of(setup, values) if setup.rest_system else {}
    y = np.array(
        [
            rest[name] if start.rest else _value(start, setup, values)
            for name, start in zip(system.states, setup.starts, strict=True)
        ]
    )
    base = np.array([values.get(name, 0.0) for name in system.parameters])
    out = np.full((len(protocol.times), len(y)), np.nan)
    ends = [*protocol.breaks[1:], max(protocol.times[-1], protocol.breaks[-1])]
    for s, (begin, end) in enumerate(zip(protocol.breaks, ends, strict=True)):
        y = protocol.keep[s] * y + protocol.add[s]
        at = dict(
            zip(system.parameters, protocol.factor[s] * base + protocol.shift[s], strict=True)
        )

        def rhs(t, y, at=at):
            return evaluate(system.rhs, at | dict(zip(system.states, y, strict=True), time=t))

        last = s == len(ends) - 1
        inside = (protocol.times >= begin) & ((protocol.times < end) | last)
        out[inside], y = integrate(rhs, y, begin, end, protocol.times[inside])
    found = {name: out[:, j] for j, name in enumerate(system.states)}
    return found | {name: np.array(level) for name, level in setup.fixed_levels.items()}


def steady(value):
    return lambda _: value


NOTHING, UNCHANGED = steady(0.0), steady({})


def by_hand(
    u,
    v=NOTHING,
    breaks=(),
    start=None,
    events=None,
    factor=UNCHANGED,
    rest_u=0.1,
    rest_factor=None,
    alive=UNCHANGED,
    times=TIMES,
):
    """Integrate the relay as a biologist would write it, piece by piece."""

    def rhs(y, u, v, p, on):
        x, z = y
        gain = (p["x.basal"] + on.get("ux", 1) * p["ux.strength"] * u) / (
            1 + on.get("zx", 1) * (max(z, 1e-12) / p["zx.half"]) ** p["zx.hill"]
        )
        make = p["z.basal"] + p["vz.strength"] * v + on.get("xz", 1) * p["xz.strength"] * x
        return [
            on.get("x", 1) * (gain * (1 - x) - p["x.loss_rate"] * x),
            on.get("z", 1) * (make - p["z.loss_rate"] * z),
        ]

    def scaled(factors):
        return {name: value * factors.get(name, 1.0) for name, value in VALUES.items()}

    y = start
    if y is None:
        at_rest = scaled(rest_factor or {})
        _, y = integrate(lambda _, y: rhs(y, rest_u, 0.0, at_rest, {}), [0.0, 0.0], 0.0, 1000.0, [])
    edges = sorted({0.0, *breaks, times[-1]})
    out = np.empty((len(times), 2))
    for i, (begin, end) in enumerate(pairwise(edges)):
        y = np.array((events or {}).get(begin, lambda y: y)(np.array(y)))
        middle = (begin + end) / 2
        p, on = scaled(factor(middle)), alive(middle)

        def piece(t, y, p=p, on=on):
            return rhs(y, u(t), v(t), p, on)

        inside = (times >= begin) & ((times < end) | (i == len(edges) - 2))
        out[inside], y = integrate(piece, y, begin, end, times[inside])
    return {"x": out[:, 0], "z": out[:, 1]}


def assert_same(found, expected):
    for name, course in expected.items():
        # Both integrate at rtol 1e-10; interpolation between steps costs a few digits.
        np.testing.assert_allclose(found[name], course, rtol=1e-6, atol=1e-8, err_msg=name)


def test_constant_input_from_rest(case_of):
    setup = one(case_of, "input.u = 1.0")
    assert setup.system.states == ("x", "z")
    assert all(start.rest for start in setup.starts)
    assert_same(simulate(setup, VALUES), by_hand(steady(1.0)))
    assert setup.fixed_levels["u"] == (1.0,) * 6
    assert setup.fixed_levels["v"] == (0.0,) * 6


def test_an_input_not_named_stays_at_its_resting_level(case_of):
    setup = one(case_of, "input.v = 2.0")
    assert setup.fixed_levels["u"] == (0.1,) * 6
    assert_same(simulate(setup, VALUES), by_hand(steady(0.1), steady(2.0)))


def test_a_pulse_breaks_where_it_steps_and_outputs_there_are_after_it(case_of):
    setup = one(case_of, "input.u = [[0, 1.0], [2.5, 0.0], [4, 0.5]]")
    assert list(setup.protocol.breaks) == [0.0, 2.5, 4.0]
    assert setup.fixed_levels["u"] == (1.0, 1.0, 0.0, 0.5, 0.5, 0.5)

    def u(t):
        return 1.0 if t < 2.5 else 0.0 if t < 4 else 0.5

    assert_same(simulate(setup, VALUES), by_hand(u, breaks=(2.5, 4.0)))


def test_a_step_that_begins_late_leaves_the_resting_level_before(case_of):
    setup = one(case_of, "input.u = [[3, 1.0]]")
    assert setup.fixed_levels["u"] == (0.1, 0.1, 0.1, 1.0, 1.0, 1.0)
    expected = by_hand(lambda t: 1.0 if t >= 3 else 0.1, breaks=(3.0,))
    assert_same(simulate(setup, VALUES), expected)


def test_an_interpolated_input_is_exact_between_its_knots(case_of):
    table = [[1.0, 0.2], [3.0, 1.0], [6.0, 0.4]]
    setup = one(case_of, f"input.u = {{ table = {table} }}")
    assert list(setup.protocol.breaks) == [0.0, 1.0, 3.0, 6.0]
    knots = np.array(table)

    def u(t):
        return np.interp(t, knots[:, 0], knots[:, 1])

    assert setup.fixed_levels["u"] == pytest.approx(u(TIMES))
    assert_same(simulate(setup, VALUES), by_hand(u, breaks=(1.0, 3.0, 6.0)))


def test_a_removed_node_is_no_state_and_gone_at_rest_too(case_of):
    setup = one(case_of, 'input.u = 1.0\nremove = ["z"]')
    assert setup.system.states == ("x",)
    assert setup.rest_system.states == ("x",)
    assert not any(name.startswith(("z", "xz", "zx")) for name in setup.system.parameters)
    assert setup.fixed_levels["z"] == (0.0,) * 6
    x = simulate(setup, VALUES)["x"]
    # Without the brake: a first-order approach between two rests.
    p = VALUES
    rates = {u: p["x.basal"] + p["ux.strength"] * u for u in (0.1, 1.0)}
    rest = rates[0.1] / (rates[0.1] + p["x.loss_rate"])
    total = rates[1.0] + p["x.loss_rate"]
    end = rates[1.0] / total
    np.testing.assert_allclose(x, end + (rest - end) * np.exp(-total * TIMES), rtol=1e-6)


def test_a_node_removed_later_stays_a_state_and_vanishes_then(case_of):
    setup = one(case_of, "input.u = 1.0\nremove = { z = 4.0 }")
    assert setup.system.states == ("x", "z")
    assert "on:z" in setup.system.parameters
    found = simulate(setup, VALUES)
    expected = by_hand(
        steady(1.0),
        breaks=(4.0,),
        events={4.0: lambda y: y * [1, 0]},
        alive=lambda t: {"z": t < 4.0},
    )
    assert_same(found, expected)
    assert found["z"][3:] == pytest.approx(0.0, abs=1e-15)


def test_a_node_removed_at_time_zero_takes_part_in_the_rest(case_of):
    setup = one(case_of, "input.u = 1.0\nremove = { z = 0.0 }")
    assert setup.system.states == ("x",)
    assert set(setup.rest_system.states) == {"x", "z"}
    expected = by_hand(steady(1.0), events={0.0: lambda y: y * [1, 0]}, alive=steady({"z": False}))
    assert_same(simulate(setup, VALUES), expected)


def test_a_clamp_holds_from_time_zero_and_not_at_rest(case_of):
    setup = one(case_of, "input.u = 1.0\nclamp.z = 0.9")
    assert setup.system.states == ("x",)
    assert "clamp:z" in setup.system.parameters
    assert setup.fixed_levels["z"] == (0.9,) * 6
    expected = by_hand(steady(1.0), events={0.0: lambda y: [y[0], 0.9]}, alive=steady({"z": False}))
    assert_same(simulate(setup, VALUES), expected)


def test_clamps_at_different_levels_share_a_system(case_of):
    text = READ + "[condition.a]\nclamp.z = 0.1\n[condition.b]\nclamp.z = 0.5\ninput.u = 2.0\n"
    found = prepared(case_of(RELAY, text))
    assert found["a"].system == found["b"].system
    assert hash(found["a"].system) == hash(found["b"].system)


def test_conditions_alike_in_shape_share_their_system(case_of):
    text = (
        READ
        + """
[condition.a]
input.u = 1.0
[condition.b]
input.u = [[0, 1.0], [3, 0.0]]
change = { "x.loss_rate" = 0.1 }
[condition.c]
add.z = [[1, 2.0]]
start.x = 0.5
"""
    )
    found = prepared(case_of(RELAY, text))
    assert found["a"].system == found["b"].system == found["c"].system
    assert found["a"].rest_system == found["b"].rest_system


def test_a_cut_edge_is_left_out_at_rest_as_well(case_of):
    setup = one(case_of, 'input.u = 1.0\ncut = ["zx"]')
    assert "zx.half" not in (*setup.system.parameters, *setup.rest_system.parameters)
    rest = rest_of(setup, VALUES)["x"]
    gain = VALUES["x.basal"] + VALUES["ux.strength"] * 0.1
    assert rest == pytest.approx(gain / (gain + VALUES["x.loss_rate"]))


def test_cutting_an_edge_cuts_what_acts_onto_it(case_of):
    more = '[edge.m]\nfrom = "v"\nonto = "xz"\neffect = "stimulates"\ndelay = 2.0\n'
    setup = one(case_of, 'input.v = 1.0\ncut = ["xz"]', RELAY + more)
    assert setup.system.states == ("x", "z")


@pytest.mark.parametrize("edge", ["ux", "zx", "xz"])
def test_an_edge_cut_later_acts_until_then(case_of, edge):
    setup = one(case_of, f"input.u = 1.0\ncut = {{ {edge} = 2.5 }}")
    expected = by_hand(steady(1.0), breaks=(2.5,), alive=lambda t: {edge: t < 2.5})
    assert_same(simulate(setup, VALUES), expected)


def test_a_necessary_edge_cut_later_is_a_factor_of_one_from_then_on(case_of):
    text = RELAY.replace('to = "z"\n', 'to = "z"\nlaw = "saturating"\nnecessary = true\n', 1)
    setup = one(case_of, "input.v = 1.0\ncut = { vz = 2.5 }", text)
    at = dict.fromkeys((*setup.system.parameters, *setup.system.states), 0.5)
    gone, there = (
        evaluate([setup.system.rhs[1]], at | {"on:vz": on, "input:v": 1.0})[0] for on in (0.0, 1.0)
    )
    loss = 0.5 * 0.5
    assert there + loss == pytest.approx((gone + loss) * 1.0 / (0.5 + 1.0))


def test_a_lasting_change_holds_at_rest_an_acute_one_from_its_time(case_of):
    lasting = one(case_of, 'input.u = 1.0\nchange = { "x.loss_rate" = 0.2 }')
    factors = {"x.loss_rate": 0.2}
    expected = by_hand(steady(1.0), factor=steady(factors), rest_factor=factors)
    assert_same(simulate(lasting, VALUES), expected)
    acute = one(case_of, 'input.u = 1.0\nchange = { "x.loss_rate" = [[2.5, 0.2], [7, 3.0]] }')
    assert list(acute.protocol.breaks) == [0.0, 2.5, 7.0]
    expected = by_hand(
        steady(1.0),
        breaks=(2.5, 7.0),
        factor=lambda t: {"x.loss_rate": 1.0 if t < 2.5 else 0.2 if t < 7 else 3.0},
    )
    assert_same(simulate(acute, VALUES), expected)


def test_doses_are_added_where_they_fall_also_at_time_zero(case_of):
    setup = one(case_of, "input.u = 1.0\nadd.z = [[0, 1.5], [2.5, 0.5]]")
    expected = by_hand(
        steady(1.0),
        breaks=(2.5,),
        events={0.0: lambda y: y + np.array([0, 1.5]), 2.5: lambda y: y + np.array([0, 0.5])},
    )
    found = simulate(setup, VALUES)
    assert_same(found, expected)
    without = simulate(one(case_of, "input.u = 1.0\nadd.z = [[0, 1.5]]"), VALUES)
    assert found["z"][2] - without["z"][2] == pytest.approx(0.5, rel=1e-6)


def test_own_starts(case_of):
    setup = one(case_of, "input.u = 1.0\nstart.x = 0.3\nstart.z = 2.0")
    assert setup.rest_system is None
    assert_same(simulate(setup, VALUES), by_hand(steady(1.0), start=[0.3, 2.0]))


def test_a_given_start_is_held_while_the_others_settle(case_of):
    setup = one(case_of, "input.u = 1.0\nstart.z = 2.0")
    assert setup.rest_system.states == ("x",)
    assert "start:z" in setup.rest_system.parameters
    gain = (VALUES["x.basal"] + VALUES["ux.strength"] * 0.1) / (1 + (2.0 / 0.7) ** 2)
    rest = gain / (gain + VALUES["x.loss_rate"])
    assert rest_of(setup, VALUES)["x"] == pytest.approx(rest)
    assert_same(simulate(setup, VALUES), by_hand(steady(1.0), start=[rest, 2.0]))


def test_a_clamped_node_with_a_given_start_is_held_at_it_at_rest(case_of):
    setup = one(case_of, "input.u = 1.0\nstart.z = 2.0\nclamp.z = 0.0")
    assert setup.rest_system.states == ("x",)
    assert not any(name.startswith("start:") for name in setup.rest_system.parameters)
    gain = (VALUES["x.basal"] + VALUES["ux.strength"] * 0.1) / (1 + (2.0 / 0.7) ** 2)
    assert rest_of(setup, VALUES)["x"] == pytest.approx(gain / (gain + VALUES["x.loss_rate"]))


def test_free_starts_and_expressions_of_parameters(case_of):
    text = RELAY.replace('kind = "expressed"', 'kind = "expressed"\nstart = "free"')
    text += '[node.q]\nkind = "pool"\nstart = "z.basal / z.loss_rate"\n'
    experiments = (
        READ
        + """
[condition.shared]
[condition.own]
start.z = "free"
change = { "z.basal" = 3.0 }
[condition.freed]
free = ["z.start", "z.basal"]
"""
    )
    found = prepared(case_of(text, experiments))
    values = VALUES | {"z.start": 1.0, "z.start@own": 2.0, "z.start@freed": 3.0}
    values |= {"z.basal@freed": 0.5}
    starts = {
        name: [_value(s, setup, values) for s in setup.starts[1:]] for name, setup in found.items()
    }
    assert starts["shared"] == pytest.approx([1.0, 0.02 / 0.2])
    assert starts["own"] == pytest.approx([2.0, 3.0 * 0.02 / 0.2])
    assert starts["freed"] == pytest.approx([3.0, 0.5 / 0.2])


def test_a_start_free_in_every_condition_leaves_no_shared_one(case_of):
    text = RELAY.replace('kind = "expressed"', 'kind = "expressed"\nstart = "free"')
    case = case_of(text, READ + '[condition.a]\nstart.z = "free"\n[condition.b]\nstart.z = 1.0\n')
    (variant,) = expand(case.mechanism, case.experiments).variants.values()
    assert "z.start" not in build(variant, case.mechanism, case.experiments).parameters


def test_freed_parameters_are_the_conditions_own(case_of):
    setup = one(case_of, 'input.u = 1.0\nfree = ["x.loss_rate"]\nchange = { "x.loss_rate" = 0.5 }')
    assert "x.loss_rate@c" in setup.system.parameters
    assert "x.loss_rate" not in setup.system.parameters
    factors = {"x.loss_rate": 0.5}
    values = {n: v for n, v in VALUES.items() if n != "x.loss_rate"}
    found = simulate(setup, values | {"x.loss_rate@c": VALUES["x.loss_rate"]})
    assert_same(found, by_hand(steady(1.0), factor=steady(factors), rest_factor=factors))


def test_rest_is_under_resting_inputs_whatever_the_course(case_of):
    setup = one(case_of, "input.u = 5.0")
    at = dict(zip(setup.rest_system.parameters, setup.rest_shift, strict=True))
    assert at["input:u"] == 0.1
    assert rest_of(setup, VALUES)["x"] == pytest.approx(by_hand(steady(0.1))["x"][0])


def test_steady_state_as_last_output_time(case_of):
    times = np.array([0.0, 5.0, inf])
    setup = one(case_of, "input.u = [[0, 1.0], [50, 0.3]]", times=times)
    assert list(setup.protocol.breaks) == [0.0, 50.0]
    assert setup.protocol.times[-1] == inf
    assert setup.fixed_levels["u"] == (1.0, 1.0, 0.3)


def test_breaks_beyond_the_last_output_are_left_out(case_of):
    setup = one(case_of, "input.u = [[0, 1.0], [50, 0.3]]")
    assert list(setup.protocol.breaks) == [0.0]


def test_delay_stages_rest_at_their_sources_level(case_of):
    text = RELAY.replace(
        'to = "z"\neffect = "stimulates"', 'to = "z"\neffect = "stimulates"\ndelay = 3.0'
    )
    setup = one(case_of, "input.u = 1.0\ninput.v = 2.0", text)
    assert setup.system.states == ("x", "z", *(f"{e}:{i}" for e in ("vz", "xz") for i in (1, 2, 3)))
    starts = dict(zip(setup.system.states, setup.starts, strict=True))
    assert starts["vz:1"].value.value == 0.0  # the input's resting level
    rest = rest_of(setup, VALUES)
    assert [rest[f"xz:{i}"] for i in (1, 2, 3)] == pytest.approx([rest["x"]] * 3)


def test_stages_of_a_source_with_a_given_start_begin_at_it(case_of):
    text = RELAY.replace('from = "x"\nto = "z"', 'from = "x"\nto = "z"\ndelay = 3.0')
    setup = one(case_of, "start.x = 0.4", text)
    starts = dict(zip(setup.system.states, setup.starts, strict=True))
    assert [starts[f"xz:{i}"].value.value for i in (1, 2, 3)] == [0.4] * 3
    assert setup.rest_system.states == ("z",)
    rest = rest_of(setup, VALUES)["z"]
    assert rest == pytest.approx((0.02 + 0.6 * 0.4) / 0.2)


def test_stages_rest_even_if_what_they_lead_to_is_held(case_of):
    text = RELAY.replace('from = "x"\nto = "z"', 'from = "x"\nto = "z"\ndelay = 3.0')
    setup = one(case_of, "start.z = 2.0", text)
    rest = rest_of(setup, VALUES)
    assert [rest[f"xz:{i}"] for i in (1, 2, 3)] == pytest.approx([rest["x"]] * 3)


def test_stages_fed_or_read_by_nothing_are_no_states(case_of):
    text = RELAY.replace('from = "x"\nto = "z"', 'from = "x"\nto = "z"\ndelay = 3.0')
    for condition in ('remove = ["x"]', 'remove = ["z"]', 'cut = ["xz"]', "clamp.z = 0.5"):
        setup = one(case_of, condition, text)
        assert not any(":" in name for name in setup.system.states), condition


def test_what_is_under_way_still_arrives_after_an_acute_removal(case_of):
    text = RELAY.replace('from = "x"\nto = "z"', 'from = "x"\nto = "z"\ndelay = 3.0')
    setup = one(case_of, "input.u = 1.0\nremove = { x = 0.0 }", text)
    assert "xz:3" in setup.system.states
    found = simulate(setup, VALUES)
    assert found["x"] == pytest.approx(0.0, abs=1e-15)
    assert found["xz:3"][1] > 0.9 * found["xz:3"][0] > 0.0


def test_a_linear_chain_delays_by_a_gamma_distribution(case_of):
    """The last stage of a step response is the Erlang distribution function."""
    from scipy.stats import gamma

    text = RELAY.replace('from = "v"\nto = "z"', 'from = "v"\nto = "z"\ndelay = true\nstages = 4')
    setup = one(case_of, "input.v = 1.0", text)
    found = simulate(setup, VALUES | {"vz.delay": 5.0})
    np.testing.assert_allclose(found["vz:4"], gamma.cdf(TIMES, 4, scale=5.0 / 4), atol=1e-7)


def test_readouts_of_absent_nodes_see_zeros(case_of):
    text = RELAY + '[node.w]\nkind = "expressed"\ncontested = true\n'
    case = case_of(text, '[readout.y]\nof = "z + w"\n[condition.c]\n')
    variant = expand(case.mechanism, case.experiments).variants["v1"]
    model = build(variant, case.mechanism, case.experiments)
    (setup,) = setups(model, case.experiments, {"c": TIMES})
    assert setup.fixed_levels["w"] == (0.0,) * 6


def test_time_in_a_rate_is_zero_at_rest(case_of):
    text = RELAY + '[edge.leak]\nto = "z"\neffect = "converts"\nrate = "k * (1 + time)"\n'
    setup = one(case_of, "input.u = 1.0", text)
    rest = rest_of(setup, VALUES | {"leak.k": 0.01})
    expected = (0.02 + 0.01 + 0.6 * rest["x"]) / 0.2
    assert rest["z"] == pytest.approx(expected)


@pytest.mark.parametrize("times", [[-1.0, 0.0], [0.0, 0.0, 1.0], [inf, 1.0], [[0.0]]])
def test_bad_output_times_are_refused(case_of, times):
    with pytest.raises(ValueError, match="must increase from 0"):
        one(case_of, "input.u = 1.0", times=times)
