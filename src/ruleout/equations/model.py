"""The equations of a variant with nothing removed."""

from __future__ import annotations

from ruleout.equations.assembly import Assembly
from ruleout.equations.assumptions import assumptions
from ruleout.equations.parameters import equation_parameters
from ruleout.equations.starts import node_start, state_start
from ruleout.equations.types import Model, Start
from ruleout.experiments.types import Experiments
from ruleout.expressions import symbols
from ruleout.mechanism.types import Fixed, Mechanism
from ruleout.variants import Variant, Wiring


def _fixed_at_zero(mechanism: Mechanism) -> frozenset[str]:
    """Return the nodes whose basal term is fixed at zero."""
    return frozenset(
        name
        for name in mechanism.nodes
        if isinstance(prior := mechanism.priors.get(f"{name}.basal"), Fixed) and prior.value == 0.0
    )


def _start_symbols(wiring: Wiring, starts: dict[str, Start], experiments: Experiments) -> set[str]:
    """Return the parameters in starts that some condition really uses."""
    conditions = experiments.conditions.values()
    used: set[str] = set()
    for name, start in starts.items():
        found = [start]
        if name in wiring.nodes and conditions:
            found = [node_start(wiring.nodes[name], condition) for condition in conditions]
        for own in found:
            if own.value is not None:
                used |= {symbol.partition("@")[0] for symbol in symbols(own.value)}
    own_only = {
        f"{name}.start"
        for name in starts
        if conditions and all(name in condition.start for condition in conditions)
    }
    return used - own_only


def build(variant: Variant, mechanism: Mechanism, experiments: Experiments) -> Model:
    """Write the equations of a variant.

    Parameters
    ----------
    variant : Variant
    mechanism : Mechanism
    experiments : Experiments
        Conditions may give starts of their own.

    Returns
    -------
    Model
        Its parameters are named without conditions: one that a condition frees stands as
        ``NAME@CONDITION`` in that condition's setup alone.
    """
    wiring = variant.wiring
    equations = Assembly(wiring, _fixed_at_zero(mechanism)).equations()
    starts = {name: state_start(name, wiring) for name in equations}
    used = {name for name in symbols(*equations.values()) if "." in name}
    used |= _start_symbols(wiring, starts, experiments)
    return Model(
        variant=variant,
        parameters=equation_parameters(wiring, mechanism, used),
        states=tuple(equations),
        rhs=tuple(equations.values()),
        starts=starts,
        assumptions=assumptions(wiring),
    )
