"""Readouts held against the mechanism."""

from __future__ import annotations

from ruleout.case.context import Context
from ruleout.experiments import readout_parameters
from ruleout.expressions import symbols


def check_readouts(context: Context) -> None:
    """Raise InputError where a readout measures no node or shares a parameter's name."""
    for readout in context.experiments.readouts.values():
        field = f"readout.{readout.name}"
        for name in sorted(symbols(readout.of)):
            context.known(name, context.mechanism.nodes, f"{field}.of", "node")
        for name in readout_parameters(readout):
            if name in context.roles:
                context.refuse(
                    field, f"'{name}' is a parameter of an edge as well; rename the readout"
                )
