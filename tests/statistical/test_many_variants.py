"""A dispute of 64 wirings of five nodes, judged in one go (slow: minutes on two cores)."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from ruleout.case import read_case
from ruleout.pipeline import Settings, judge

CHAIN = ("signal", "gate", "relay", "switch", "effector")
CONTESTED = {
    "effector_on_gate": ("effector", "gate", "inhibits", "hill"),
    "effector_on_relay": ("effector", "relay", "inhibits", "saturating"),
    "switch_on_gate": ("switch", "gate", "inhibits", "saturating"),
    "signal_on_relay": ("signal", "relay", "stimulates", "linear"),
    "signal_on_effector": ("signal", "effector", "stimulates", "linear"),
    "gate_on_switch": ("gate", "switch", "stimulates", "linear"),
}


def edge(name, source, target, effect, law, contested):
    return (
        f'[edge.{name}]\nfrom = "{source}"\nto = "{target}"\neffect = "{effect}"\n'
        f'law = "{law}"\n' + ("contested = true\n" if contested else "")
    )


def mechanism():
    text = 'title = "Five in a row"\ntime_unit = "min"\namount_unit = "uM"\n'
    kinds = ("input", "switched", "switched", "switched", "expressed")
    for node, kind in zip(CHAIN, kinds, strict=True):
        text += f'[node.{node}]\nkind = "{kind}"\n'
    for source, target in pairwise(CHAIN):
        text += edge(f"{source}_on_{target}", source, target, "stimulates", "linear", False)
    for name, parts in CONTESTED.items():
        text += edge(name, *parts, True)
    text += "[prior]\n" + "".join(f'"{node}.basal" = 0\n' for node in CHAIN[1:])
    for node in CHAIN[1:]:
        text += f'"{node}.loss_rate" = {{ median = 0.2, fold = 10 }}\n'
    for source, target in pairwise(CHAIN):
        text += f'"{source}_on_{target}.strength" = {{ median = 0.4, fold = 10 }}\n'
    for name, (_, _, effect, _) in CONTESTED.items():
        prior = (
            "half = { median = 1, fold = 100 }"
            if effect == "inhibits"
            else "strength = { low = 1e-5, high = 10 }"
        )
        key, value = prior.split(" = ", 1)
        text += f'"{name}.{key}" = {value}\n'
    return text


def truth(_t, y, level, effector):
    """The chain with the effector's inhibition of the gate; no other contested edge."""
    gate, relay, switch, _ = y
    amount = y[3] if effector else 0.0
    brake = 1 / (1 + (amount / 0.4) ** 2)
    return [
        0.4 * level * brake * (1 - gate) - 0.1 * gate,
        0.6 * gate * (1 - relay) - 0.3 * relay,
        0.5 * relay * (1 - switch) - 0.3 * switch,
        (0.4 * switch - 0.06 * y[3]) if effector else 0.0,
    ]


@pytest.mark.slow
def test_sixty_four_wirings_are_judged_without_help(tmp_path):
    """Every variant is judged; the true edge is needed, and no false one is."""
    rng = np.random.default_rng(1)
    times = np.array([1, 2, 4, 6, 9, 13, 18, 24, 32, 45.0])
    rows = ["condition,time,readout,value"]
    for name, level, effector in (("step", 1, True), ("mild", 0.2, True), ("without", 1, False)):
        found = solve_ivp(
            truth, (0, 50), np.zeros(4), t_eval=times, args=(level, effector), rtol=1e-9, atol=1e-12
        )
        for readout, state, sd in (("relay", 1, 0.02), ("switch", 2, 0.02), ("effector", 3, 0.05)):
            if readout == "effector" and not effector:
                continue
            values = found.y[state] + sd * rng.standard_normal(len(times))
            rows += [
                f"{name},{t:g},{readout}_seen,{v:.4g}" for t, v in zip(times, values, strict=True)
            ]
    (tmp_path / "case").mkdir()
    (tmp_path / "case" / "mechanism.toml").write_text(mechanism())
    (tmp_path / "case" / "experiments.toml").write_text(
        "".join(f'[readout.{n}_seen]\nof = "{n}"\n' for n in ("relay", "switch", "effector"))
        + "[condition.step]\ninput.signal = 1.0\n[condition.mild]\ninput.signal = 0.2\n"
        + '[condition.without]\ninput.signal = 1.0\nremove = ["effector"]\n'
    )
    (tmp_path / "case" / "data.csv").write_text("\n".join(rows))
    case = read_case(tmp_path / "case")
    found = judge(case, Settings(seed=1, effort="quick", workers=2), out=tmp_path / "run")
    assert len(found.variants) == 64
    assert found.fully_judged, found.variants[["variant", "edges", "verdict", "flags"]].to_string()
    claims = found.claims.set_index("claim")["verdict"]
    assert claims["effector_on_gate"] == "needed"
    # Where the prior of a half leaves no-effect out of reach, 'undecided' is the honest word.
    others = claims[[n for n in CONTESTED if n != "effector_on_gate"]]
    assert others.isin({"not_needed", "undecided"}).all()
