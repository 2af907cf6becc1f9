"""What the rate laws of a wiring rest on, as sentences."""

from __future__ import annotations

from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge
from ruleout.variants import Wiring
from ruleout.variants.contests import onto_half


def _name(edges: list[Edge]) -> str:
    return ", ".join(edge.name for edge in edges)


def assumptions(wiring: Wiring) -> tuple[str, ...]:
    """Return the assumptions behind a wiring's equations, the general ones first."""
    edges = list(wiring.edges.values())
    regulating = [e for e in edges if not e.material]
    material = [e for e in edges if e.material]
    said = [
        "The system is well mixed, at constant temperature and volume, with enough molecules for "
        "rates to follow mean amounts."
    ]
    switched = [n.name for n in wiring.nodes.values() if n.kind == "switched"]
    if switched:
        said.append(
            f"The total amount of {', '.join(switched)} is constant in time: only the active "
            "fraction changes."
        )
    expressed = [n.name for n in wiring.nodes.values() if n.kind == "expressed"]
    if expressed:
        said.append(f"{', '.join(expressed)}: lost in proportion to the amount (first order).")
    saturable = [n.name for n in wiring.nodes.values() if n.acts_on == "saturating"]
    if saturable:
        said.append(
            f"{', '.join(saturable)}: switched on and off by enzymes that are scarce next to it "
            "(Michaelis-Menten)."
        )
    additive: dict[str, list[Edge]] = {}
    for edge in regulating:
        if edge.onto is None and not edge.necessary and not divides(edge, edge.effects[0]):
            additive.setdefault(f"{edge.targets[0][0]}, {edge.on}", []).append(edge)
    for side, group in additive.items():
        if len(group) > 1:
            said.append(f"Additive and independent ({side}): {_name(group)}.")
    dividing = [e for e in regulating if divides(e, e.effects[0]) and e.onto is None]
    if dividing:
        said.append(
            f"Each of these divides a total rate, without competing with the others: "
            f"{_name(dividing)}."
        )
    necessary = [e for e in regulating if e.necessary]
    if necessary:
        said.append(f"Nothing happens at the target without the source: {_name(necessary)}.")
    linear = [e for e in regulating if e.laws[0] == "linear" and not divides(e, e.effects[0])]
    if linear:
        said.append(f"Far from saturation, in proportion to the source: {_name(linear)}.")
    enzymes = [e for e in material if e.laws[0] == "saturating" and not e.rates]
    enzymes += [e for e in regulating if e.acts_on == "saturating"]
    if enzymes:
        said.append(
            "Michaelis-Menten: the enzyme is scarce next to its substrate and binds it fast: "
            f"{_name(enzymes)}."
        )
    binding = [e for e in regulating if e.laws[0] == "saturating" and not divides(e, e.effects[0])]
    if binding:
        said.append(
            f"Saturating: the source binds fast and reversibly, and is not used up by it: "
            f"{_name(binding)}."
        )
    hill = [e for e in edges if e.laws[0] == "hill" and not e.rates]
    if hill:
        said.append(f"Hill law: a summary of cooperative binding at equilibrium: {_name(hill)}.")
    mass_action = [e for e in material if e.laws[0] == "linear" and not e.rates and e.sources]
    if mass_action:
        said.append(f"Mass action, elementary steps: {_name(mass_action)}.")
    two_way = [e for e in material if e.reversible and e.laws[0] != "linear" and not e.rates]
    if two_way:
        said.append(
            "Both directions saturate with the same half level, without competing: "
            f"{_name(two_way)}."
        )
    written = [e for e in material if e.rates]
    if written:
        said.append(f"The rate is as written in the mechanism: {_name(written)}.")
    modifying = [e for e in regulating if e.onto is not None]
    for edge in modifying:
        part = "half level" if onto_half(edge) else "rate"
        said.append(
            f"{edge.name} scales the {part} of {(edge.onto or '').partition('.')[0]} and nothing "
            "else."
        )
    said += [
        f"{edge.name} is delayed by a chain of {edge.stages} equal first-order steps "
        f"(linear chain trick): a gamma-distributed delay, spread 1/sqrt({edge.stages}) of its "
        "mean."
        for edge in edges
        if edge.delay is not False
    ]
    return tuple(said)
