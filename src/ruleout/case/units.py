"""Whether rates and times can be in the same unit."""

from __future__ import annotations

from collections.abc import Iterator
from math import inf, isfinite

from ruleout.case.context import MECHANISM, Context
from ruleout.mechanism.types import Fixed, LogNormal, LogUniform, Normal, Prior, Tied, Uniform

TOO_SLOW = 1e-4
"""Turnovers within the whole experiment below which nothing can be seen to move."""
TOO_FAST = 1e4
"""Turnovers before the first measurement above which all is over by then."""


def check_time_unit(context: Context) -> None:
    """Raise InputError where every rate constant is absurd beside the times measured.

    Looks at first-order rate constants (per time, whatever the amounts) that all have a prior in
    the file; default priors follow the times by themselves.
    """
    data = context.experiments.data
    times = [] if data is None else [t for t in data["time"] if t > 0 and isfinite(t)]
    names = list(_first_order(context))
    priors = [context.mechanism.priors.get(name) for name in names]
    ranges = [_range(prior) for prior in priors if prior is not None]
    if not times or not names or len(ranges) < len(names):
        return
    unit = context.mechanism.time_unit
    field = f"prior.{names[0]}"
    if max(high for _, high in ranges) * max(times) < TOO_SLOW:
        context.refuse(
            field,
            f"every rate is so slow that nothing moves within the {max(times):g} {unit} measured; "
            "are rates and times in the same unit?",
            MECHANISM,
        )
    if min(low for low, _ in ranges) * min(times) > TOO_FAST:
        context.refuse(
            field,
            f"every rate is so fast that all is over long before the first time, {min(times):g} "
            f"{unit}; are rates and times in the same unit?",
            MECHANISM,
        )


def _first_order(context: Context) -> Iterator[str]:
    edges = context.mechanism.edges
    for name, role in context.roles.items():
        if role.part == "loss_rate":
            yield name
        elif role.part == "rate":
            edge = edges[role.owner]
            if edge.laws == ("linear",) and len(edge.sources) == 1 and edge.sources[0][1] == 1:
                yield name


def _range(prior: Prior) -> tuple[float, float]:
    """Return where nearly all of a prior lies; everywhere if it is tied."""
    match prior:
        case LogNormal(median, fold):
            return median / fold, median * fold
        case LogUniform(low, high) | Uniform(low, high):
            return low, high
        case Normal(mean, sd):
            return mean - 2 * sd, mean + 2 * sd
        case Fixed(value):
            return value, value
        case Tied():
            return 0.0, inf
