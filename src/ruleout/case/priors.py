"""Priors held against the parameters that exist."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Literal

from ruleout.case.context import MECHANISM, Context
from ruleout.errors import did_you_mean
from ruleout.experiments import readout_parameters
from ruleout.mechanism.types import FREE, Fixed, Normal, Prior, Tied, Uniform

Range = Literal["positive", "not negative", "any"]
"""The values a parameter may take."""


def check_priors(context: Context) -> None:
    """Raise InputError where a prior is for no parameter, or leaves the values it may take."""
    ranges = _ranges(context)
    for name, prior in context.mechanism.priors.items():
        _check_exists(context, name, name, ranges)
        if isinstance(prior, Tied):
            _check_exists(context, name, prior.to, ranges)
        elif trouble := _outside(prior, ranges[name]):
            context.refuse(f"prior.{name}", trouble, MECHANISM)


def _ranges(context: Context) -> dict[str, Range]:
    """Return the parameters a prior may be for, and what values each may take."""
    found: dict[str, Range] = {}
    for name, role in context.roles.items():
        sign_free = role.part in ("own", "start", "rate")
        found[name] = "positive" if role.positive else "any" if sign_free else "not negative"
    for readout in context.experiments.readouts.values():
        for name in readout_parameters(readout):
            found[name] = "any" if name.endswith(".offset") else "positive"
    return found | _own_of_conditions(context, found) | _own_scales(context)


def _own_of_conditions(context: Context, shared: Mapping[str, Range]) -> dict[str, Range]:
    found: dict[str, Range] = {}
    for condition in context.experiments.conditions.values():
        found |= {f"{name}@{condition.name}": shared[name] for name in condition.free}
        for node, start in condition.start.items():
            if start == FREE:
                found |= {f"{node}.start": "any", f"{node}.start@{condition.name}": "any"}
    return found


def _own_scales(context: Context) -> dict[str, Range]:
    data = context.experiments.data
    found: dict[str, Range] = {}
    for readout in context.experiments.readouts.values():
        if readout.scale_by == "condition":
            keys = list(context.experiments.conditions)
        elif readout.scale_by == "replicate" and data is not None:
            keys = [str(key) for key in data.loc[data["readout"] == readout.name, "replicate"]]
        else:
            keys = []
        found |= {f"{readout.name}.scale@{key}": "positive" for key in keys}
    return found


def _check_exists(context: Context, name: str, wanted: str, ranges: Mapping[str, Range]) -> None:
    if wanted in ranges:
        return
    base, at, condition = wanted.partition("@")
    if at and base in context.roles and condition in context.experiments.conditions:
        trouble = f"condition '{condition}' does not free it; write free = [\"{base}\"] there"
    elif did_you_mean(wanted, ranges):
        trouble = f"no parameter has this name{did_you_mean(wanted, ranges)}"
    else:
        trouble = "no parameter has this name; 'ruleout inspect' lists them"
    given = f"'{wanted}'" if wanted == name else f"tied to '{wanted}'"
    context.refuse(f"prior.{name}", f"{given}: {trouble}", MECHANISM)


def _outside(prior: Prior, allowed: Range) -> str:
    """Return what is wrong with the values a prior gives to its parameter, if anything."""
    strict = allowed == "positive"
    match prior:
        case _ if allowed == "any":
            return ""
        case Normal() if strict:
            return (
                "a normal prior reaches below 0, where this parameter has no meaning; use "
                "{ median, fold } or { low, high }"
            )
        case Fixed(low) | Uniform(low) if low < 0:
            return f"{low:g} was given; this parameter is never negative"
        case Fixed(0.0) if strict:
            return "0 was given; this parameter must be above 0"
    return ""
