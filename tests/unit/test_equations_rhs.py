"""Right-hand sides against formulas written out by hand."""

import numpy as np
import pytest

from ruleout.equations import build
from ruleout.expressions import evaluate, symbols
from ruleout.variants import expand

NODES = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.w]
kind = "switched"
[node.s]
kind = "switched"
acts_on = "saturating"
"""
READ = '[readout.y]\nof = "{}"\n[condition.c]\n'


def edge(name: str, source: str, target: str, effect: str = "stimulates", more: str = "") -> str:
    to = f'to = "{target}"' if target else ""
    return f'[edge.{name}]\nfrom = "{source}"\n{to}\neffect = "{effect}"\n{more}\n'


def model_of(case, name: str | None = None):
    variants = expand(case.mechanism, case.experiments).variants
    variant = variants[name] if name else next(iter(variants.values()))
    return build(variant, case.mechanism, case.experiments)


def point(model, seed: int = 3) -> dict[str, float]:
    """Return random positive values of every symbol, fractions below one."""
    rng = np.random.default_rng(seed)
    names = sorted(symbols(*model.rhs) | set(model.states))
    return {name: float(rng.uniform(0.2, 0.9)) for name in names}


def rate(case, state: str):
    """Return dX/dt at a random point, and the point under short names (a.half -> a_half)."""
    model = model_of(case)
    at = point(model)
    value = evaluate([model.rhs[model.states.index(state)]], at)[0]
    return value, type("At", (), {k.replace(".", "_").replace(":", "_"): v for k, v in at.items()})


def test_expressed_node_with_basal_and_first_order_loss(case_of):
    got, p = rate(case_of(NODES), "x")
    assert got == pytest.approx(p.x_basal - p.x_loss_rate * p.x, rel=1e-14)


def test_switched_node(case_of):
    got, p = rate(case_of(NODES), "w")
    assert got == pytest.approx(p.w_basal * (1 - p.w) - p.w_loss_rate * p.w, rel=1e-14)


def test_switched_node_that_acts_on_saturating(case_of):
    got, p = rate(case_of(NODES), "s")
    gain = p.s_basal * (1 - p.s) / (p.s_half_gain + 1 - p.s)
    assert got == pytest.approx(gain - p.s_loss_rate * p.s / (p.s_half_loss + p.s), rel=1e-14)


LAWS = {
    "linear": lambda s, _: s,
    "saturating": lambda s, p: s / (p.e_half + s),
    "hill": lambda s, p: s**p.e_hill / (p.e_half**p.e_hill + s**p.e_hill),
}


@pytest.mark.parametrize("law", LAWS)
def test_additive_gain(case_of, law):
    got, p = rate(case_of(NODES + edge("e", "w", "x", more=f'law = "{law}"')), "x")
    gain = p.x_basal + p.e_strength * LAWS[law](p.w, p)
    assert got == pytest.approx(gain - p.x_loss_rate * p.x, rel=1e-13)


@pytest.mark.parametrize("law", ["saturating", "hill"])
def test_necessary_gain(case_of, law):
    text = NODES + edge("e", "w", "x", more=f'law = "{law}"\nnecessary = true')
    got, p = rate(case_of(text + edge("a", "u", "x")), "x")
    gain = (p.x_basal + p.a_strength * p.u) * LAWS[law](p.w, p)
    assert got == pytest.approx(gain - p.x_loss_rate * p.x, rel=1e-13)


@pytest.mark.parametrize(("law", "power"), [("linear", 1), ("saturating", 1), ("hill", None)])
def test_inhibited_gain(case_of, law, power):
    text = NODES + edge("e", "x", "w", "inhibits", f'law = "{law}"') + edge("a", "u", "w")
    got, p = rate(case_of(text), "w")
    divisor = 1 + (p.x / p.e_half) ** (power or p.e_hill)
    gain = (p.w_basal + p.a_strength * p.u) / divisor
    assert got == pytest.approx(gain * (1 - p.w) - p.w_loss_rate * p.w, rel=1e-13)


def test_two_inhibitors_divide_one_after_the_other(case_of):
    text = NODES + edge("e", "x", "w", "inhibits") + edge("f", "s", "w", "inhibits")
    got, p = rate(case_of(text), "w")
    gain = p.w_basal / (1 + p.x / p.e_half) / (1 + p.s / p.f_half)
    assert got == pytest.approx(gain * (1 - p.w) - p.w_loss_rate * p.w, rel=1e-13)


@pytest.mark.parametrize("law", LAWS)
def test_inhibiting_through_the_loss_adds_to_it(case_of, law):
    text = NODES + edge("e", "w", "x", "inhibits", f'law = "{law}"\non = "loss"')
    got, p = rate(case_of(text), "x")
    loss = p.x_loss_rate + p.e_strength * LAWS[law](p.w, p)
    assert got == pytest.approx(p.x_basal - loss * p.x, rel=1e-13)


def test_stimulating_through_the_loss_divides_it(case_of):
    text = NODES + edge("e", "w", "x", "stimulates", 'law = "hill"\non = "loss"')
    got, p = rate(case_of(text), "x")
    loss = p.x_loss_rate / (1 + (p.w / p.e_half) ** p.e_hill)
    assert got == pytest.approx(p.x_basal - loss * p.x, rel=1e-13)


def test_necessary_loss_is_a_factor_of_all_of_it(case_of):
    more = 'law = "saturating"\non = "loss"\nnecessary = true'
    got, p = rate(case_of(NODES + edge("e", "w", "x", "inhibits", more)), "x")
    loss = p.x_loss_rate * p.w / (p.e_half + p.w)
    assert got == pytest.approx(p.x_basal - loss * p.x, rel=1e-13)


def test_edges_with_their_own_target_half_leave_the_shared_factor(case_of):
    """Enzyme networks: every edge is a saturable term of its own on the gain or the loss."""
    text = (
        NODES
        + edge("on", "u", "s", "stimulates", 'acts_on = "saturating"')
        + edge("off", "w", "s", "inhibits", 'on = "loss"\nacts_on = "saturating"')
        + edge("plain", "x", "s", "stimulates", 'acts_on = "linear"')
        + edge("brake", "x", "s", "inhibits")
    )
    got, p = rate(case_of(text), "s")
    free = 1 - p.s
    gain = (
        p.s_basal * free / (p.s_half_gain + free)
        + p.on_strength * p.u * free / (p.on_target_half + free)
        + p.plain_strength * p.x * free
    ) / (1 + p.x / p.brake_half)
    loss = p.s_loss_rate * p.s / (p.s_half_loss + p.s)
    loss += p.off_strength * p.w * p.s / (p.off_target_half + p.s)
    assert got == pytest.approx(gain - loss, rel=1e-13)


ONTO = {
    "additive": (edge("e", "w", "x"), lambda p, m: p.x_basal + m * p.e_strength * p.w),
    "necessary": (
        edge("e", "w", "x", more='law = "saturating"\nnecessary = true'),
        lambda p, m: p.x_basal * m * p.w / (p.e_half + p.w),
    ),
    "dividing": (
        edge("e", "w", "x", "inhibits"),
        lambda p, m: p.x_basal / (1 + m * p.w / p.e_half),
    ),
}


@pytest.mark.parametrize("target", ONTO)
@pytest.mark.parametrize("effect", ["stimulates", "inhibits"])
def test_edge_onto_an_edge_multiplies_its_term(case_of, target, effect):
    text, gain = ONTO[target]
    got, p = rate(case_of(NODES + text + edge("m", "u", "", effect, 'onto = "e"')), "x")
    factor = 1 + p.m_strength * p.u if effect == "stimulates" else 1 / (1 + p.u / p.m_half)
    assert got == pytest.approx(gain(p, factor) - p.x_loss_rate * p.x, rel=1e-13)


@pytest.mark.parametrize("effect", ["stimulates", "inhibits"])
def test_edge_onto_a_half_multiplies_it(case_of, effect):
    text = NODES + edge("e", "w", "x", more='law = "hill"')
    text += edge("m", "u", "", effect, 'onto = "e.half"\nlaw = "saturating"')
    got, p = rate(case_of(text), "x")
    if effect == "stimulates":
        half = p.e_half * (1 + p.m_strength * p.u / (p.m_half + p.u))
    else:
        half = p.e_half / (1 + p.u / p.m_half)
    gain = p.x_basal + p.e_strength * p.w**p.e_hill / (half**p.e_hill + p.w**p.e_hill)
    assert got == pytest.approx(gain - p.x_loss_rate * p.x, rel=1e-13)


def test_edges_onto_edges_onto_edges(case_of):
    text = NODES + edge("e", "w", "x") + edge("m", "u", "", "inhibits", 'onto = "e"')
    text += edge("n", "s", "", "stimulates", 'onto = "m"')
    got, p = rate(case_of(text), "x")
    ratio = (1 + p.n_strength * p.s) * p.u / p.m_half
    gain = p.x_basal + p.e_strength * p.w / (1 + ratio)
    assert got == pytest.approx(gain - p.x_loss_rate * p.x, rel=1e-13)


POOLS = """
[node.u]
kind = "input"
[node.a]
kind = "pool"
start = 1.0
[node.b]
kind = "pool"
[node.c]
kind = "pool"
"""


def material(fields: str, name: str = "v") -> str:
    return f"[edge.{name}]\n{fields}\n"


MATERIAL = {
    "mass action": (
        'from = "a"\nto = "b"\neffect = "converts"',
        lambda p: p.v_rate * p.a,
        {"a": -1, "b": 1},
    ),
    "stoichiometry": (
        'from = { a = 2, b = 1 }\nto = { c = 3 }\neffect = "converts"',
        lambda p: p.v_rate * p.a**2 * p.b,
        {"a": -2, "b": -1, "c": 3},
    ),
    "fractional order": (
        'from = { a = 1.5 }\nto = "b"\neffect = "converts"',
        lambda p: p.v_rate * p.a**1.5,
        {"a": -1.5, "b": 1},
    ),
    "catalyst": (
        'from = ["a", "c"]\nto = ["b", "c"]\neffect = "converts"',
        lambda p: p.v_rate * p.a * p.c,
        {"a": -1, "b": 1, "c": 0},
    ),
    "reversible": (
        'from = "a"\nto = { b = 2 }\neffect = "converts"\nreversible = true',
        lambda p: p.v_rate * p.a - p.v_rate_back * p.b**2,
        {"a": -1, "b": 2},
    ),
    "Michaelis-Menten": (
        'from = "a"\nto = "b"\neffect = "converts"\nlaw = "saturating"',
        lambda p: p.v_rate * p.a / (p.v_half + p.a),
        {"a": -1, "b": 1},
    ),
    "binding": (
        'from = ["a", "b"]\nto = "c"\neffect = "binds"',
        lambda p: p.v_rate * p.a * p.b - p.v_release * p.c,
        {"a": -1, "b": -1, "c": 1},
    ),
    "dimer": (
        'from = { a = 2 }\nto = "c"\neffect = "binds"',
        lambda p: p.v_rate * p.a**2 - p.v_release * p.c,
        {"a": -2, "c": 1},
    ),
    "inflow": ('to = "b"\neffect = "converts"', lambda p: p.v_rate, {"b": 1}),
    "loss": ('from = "a"\neffect = "converts"', lambda p: p.v_rate * p.a, {"a": -1}),
    "rate expression": (
        'from = "a"\nto = "b"\neffect = "converts"\nrate = "k * a * u / (m + b) + exp(-time)"',
        lambda p: p.v_k * p.a * p.u / (p.v_m + p.b) + np.exp(-p.time),
        {"a": -1, "b": 1},
    ),
}


@pytest.mark.parametrize("kind", MATERIAL)
def test_material_edges(case_of, kind):
    fields, flux, amounts = MATERIAL[kind]
    model = model_of(case_of(POOLS + material(fields), READ.format("a")))
    at = point(model)
    p = type("At", (), {k.replace(".", "_"): v for k, v in at.items()})
    got = dict(zip(model.states, evaluate(model.rhs, at), strict=True))
    for node in "abc":
        assert got[node] == pytest.approx(amounts.get(node, 0) * flux(p), rel=1e-13), node


def test_an_edge_onto_a_material_edge_scales_its_net_turnover(case_of):
    fields = 'from = "a"\nto = "b"\neffect = "converts"\nreversible = true'
    text = POOLS + material(fields) + edge("m", "u", "", "inhibits", 'onto = "v"')
    got, p = rate(case_of(text, READ.format("a")), "b")
    flux = (p.v_rate * p.a - p.v_rate_back * p.b) / (1 + p.u / p.m_half)
    assert got == pytest.approx(flux, rel=1e-13)


def test_several_rates_at_one_node_add_up(case_of):
    text = POOLS + material('from = "a"\nto = "b"\neffect = "converts"')
    text += material('from = "b"\neffect = "converts"', "w")
    got, p = rate(case_of(text, READ.format("a")), "b")
    assert got == pytest.approx(p.v_rate * p.a - p.w_rate * p.b, rel=1e-13)


def test_an_expressed_node_may_take_part_in_conversions(case_of):
    text = (
        NODES + '[node.a]\nkind = "pool"\n' + material('from = "x"\nto = "a"\neffect = "converts"')
    )
    got, p = rate(case_of(text), "x")
    assert got == pytest.approx(p.x_basal - p.x_loss_rate * p.x - p.v_rate * p.x, rel=1e-13)


def test_delay_of_a_regulating_edge_is_a_chain_of_stages(case_of):
    text = NODES + edge("e", "w", "x", more="delay = true\nstages = 2")
    model = model_of(case_of(text))
    assert model.states == ("x", "w", "s", "e:1", "e:2")
    at = point(model)
    got = dict(zip(model.states, evaluate(model.rhs, at), strict=True))
    k = 2 / at["e.delay"]
    assert got["e:1"] == pytest.approx(k * (at["w"] - at["e:1"]), rel=1e-13)
    assert got["e:2"] == pytest.approx(k * (at["e:1"] - at["e:2"]), rel=1e-13)
    gain = at["x.basal"] + at["e.strength"] * at["e:2"]
    assert got["x"] == pytest.approx(gain - at["x.loss_rate"] * at["x"], rel=1e-13)


def test_a_known_delay_is_a_number(case_of):
    model = model_of(case_of(NODES + edge("e", "w", "x", more="delay = 6.0\nstages = 3")))
    assert "e.delay" not in model.parameters
    at = point(model)
    got = dict(zip(model.states, evaluate(model.rhs, at), strict=True))
    assert got["e:1"] == pytest.approx(0.5 * (at["w"] - at["e:1"]), rel=1e-13)


def test_material_under_way_is_neither_lost_nor_made(case_of):
    fields = 'from = "a"\nto = "b"\neffect = "converts"\ndelay = true\nstages = 3'
    model = model_of(case_of(POOLS + material(fields), READ.format("a")))
    at = point(model)
    got = dict(zip(model.states, evaluate(model.rhs, at), strict=True))
    assert sum(got.values()) == pytest.approx(0.0, abs=1e-14)
    assert got["a"] == pytest.approx(-at["v.rate"] * at["a"], rel=1e-13)
    assert got["b"] == pytest.approx(3 / at["v.delay"] * at["v:3"], rel=1e-13)


def test_a_basal_rate_fixed_at_zero_is_left_out(case_of):
    model = model_of(case_of(NODES + '[prior]\n"x.basal" = 0\n"w.basal" = 0.5\n'))
    assert "x.basal" not in model.parameters
    assert "w.basal" in model.parameters
    at = point(model)
    assert evaluate([model.rhs[0]], at)[0] == pytest.approx(-at["x.loss_rate"] * at["x"])


@pytest.mark.parametrize("law", ["linear", "saturating", "hill"])
@pytest.mark.parametrize("effect", ["stimulates", "inhibits"])
def test_rates_stay_finite_and_drive_back_below_zero(case_of, law, effect):
    """Solvers step a little below zero: nothing may be NaN, and no rate may run away there."""
    text = NODES + edge("e", "x", "w", effect, f'law = "{law}"')
    text += edge("f", "w", "s", "inhibits", 'on = "loss"\nlaw = "hill"\nacts_on = "saturating"')
    model = model_of(case_of(text))
    at = point(model)
    for state in model.states:
        values = np.array(evaluate(model.rhs, at | {state: -1e-3}))
        assert np.isfinite(values).all()
        assert values[model.states.index(state)] > 0.0


@pytest.mark.parametrize("order", [1, 2, 3, 0.5, 1.5])
def test_mass_action_never_uses_up_what_is_not_there(case_of, order):
    """A plain square would drain a level that is a little below zero faster and faster."""
    fields = f'from = {{ a = {order} }}\nto = "b"\neffect = "converts"'
    model = model_of(case_of(POOLS + material(fields), READ.format("a")))
    at = point(model) | {"a": -1e-6}
    assert evaluate(model.rhs, at)[0] >= 0.0


def test_parameters_have_kinds_units_and_sources(case_of):
    text = NODES + edge("e", "x", "w", "stimulates", 'law = "hill"\ndelay = true')
    text += edge("f", "w", "x", "stimulates", 'law = "saturating"')
    text += edge("g", "u", "", "stimulates", 'onto = "f"') + edge("h", "x", "x", "inhibits")
    model = model_of(case_of(text))
    found = {p.name: (p.kind, p.unit, p.source) for p in model.parameters.values()}
    assert found["x.basal"] == ("rate", "uM/min", "")
    assert found["x.loss_rate"] == ("rate", "1/min", "")
    assert found["w.basal"] == ("rate", "1/min", "")
    assert found["s.half_gain"] == ("half", "fraction", "s")
    assert found["e.strength"] == ("rate", "1/min", "")
    assert found["e.half"] == ("half", "uM", "x")
    assert found["e.hill"] == ("hill", "", "")
    assert found["e.delay"] == ("delay", "min", "")
    assert found["f.strength"] == ("rate", "uM/min", "")
    assert found["f.half"] == ("half", "fraction", "w")
    assert found["g.strength"] == ("level", "1/uM", "")
    assert found["h.half"] == ("half", "uM", "x")


def test_parameters_come_in_file_order_nodes_first(case_of):
    text = POOLS + material('from = "b"\nto = "c"\neffect = "converts"', "later")
    text += material('from = "a"\nto = "b"\neffect = "converts"\nlaw = "saturating"', "early")
    text = text.replace("start = 1.0", 'start = "free"')
    model = model_of(case_of(text, READ.format("a")))
    assert list(model.parameters) == ["a.start", "later.rate", "early.rate", "early.half"]
    assert model.parameters["a.start"].kind == "start"


@pytest.mark.parametrize(
    ("rate", "kinds"),
    [
        ("k * a", {"k": "rate"}),
        ("v * a / (half + a)", {"v": "rate", "half": "level"}),
        ("k * a + m * a ** 2", {"k": "rate", "m": "rate"}),
        ("k * (top - a)", {"k": "rate", "top": "level"}),
        ("k * a * (1 - a / top)", {"k": "rate", "top": "level"}),
    ],
)
def test_own_parameters_of_a_rate_are_rates_or_levels(case_of, rate, kinds):
    text = POOLS + material(f'from = "a"\neffect = "converts"\nrate = "{rate}"')
    model = model_of(case_of(text, READ.format("a")))
    assert {n: p.kind for n, p in model.parameters.items()} == {
        f"v.{name}": kind for name, kind in kinds.items()
    }


def test_a_rate_that_speaks_of_an_absent_node_finds_nothing_there(case_of):
    text = POOLS.replace('[node.c]\nkind = "pool"', '[node.c]\nkind = "pool"\ncontested = true')
    text += material('from = "a"\nto = "b"\neffect = "converts"\nrate = "k * a * (1 + c)"')
    case = case_of(text, READ.format("a"))
    model = model_of(case, "v1")
    at = point(model)
    assert set(model.parameters) == {"v.k"}
    assert evaluate(model.rhs, at)[1] == pytest.approx(at["v.k"] * at["a"])


def test_assumptions_name_what_the_laws_rest_on(case_of):
    text = NODES + edge("e", "x", "w", "stimulates", 'law = "hill"\ndelay = true')
    text += edge("f", "w", "x", "stimulates", 'law = "saturating"') + edge("g", "u", "x")
    said = " ".join(model_of(case_of(text)).assumptions)
    for phrase in (
        "well mixed",
        "constant temperature",
        "scarce",
        "linear chain trick",
        "Additive",
    ):
        assert phrase in said
    assert "Mass action" not in said
