"""Reading ``[prior]``."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.errors import InputError
from ruleout.files import Section, describe
from ruleout.mechanism.types import Fixed, LogNormal, LogUniform, Normal, Prior, Tied, Uniform

FORMS = (
    '{ median, fold }, { low, high }, { low, high, scale = "linear" }, { mean, sd }, a number '
    "(fixed) or another parameter's name (tied)"
)


def read_priors(top: Section) -> dict[str, Prior]:
    """Return the priors of the file, by parameter name, in file order.

    Whether the parameters exist is checked once the experiments are known.

    Raises
    ------
    InputError
        At the first prior that is malformed or excludes everything, and on ties in a circle.
    """
    table = top.section("prior")
    priors = {
        name: _read_prior(name, value, table) for name, value in top.parameters("prior").items()
    }
    _check_circles(priors, table)
    return priors


def _read_prior(name: str, value: object, table: Section) -> Prior:
    if isinstance(value, str):
        if value == name:
            table.fail(name, "tied to itself; give it a prior, or tie it to another parameter")
        return Tied(value)
    if not isinstance(value, Mapping):
        if isinstance(value, bool) or not isinstance(value, int | float):
            table.fail(name, f"{describe(value)} was given; a prior is {FORMS}")
        return Fixed(table.as_number(name, value))
    # Quoted and unquoted names lie at different depths, so the prior gets a table of its own.
    inner = Section(table.path, f"{table.name}.{name}", value, table.lines)
    keys = set(value)
    if keys == {"median", "fold"}:
        return LogNormal(inner.number("median", above=0.0), inner.number("fold", above=1.0))
    if keys == {"mean", "sd"}:
        return Normal(inner.number("mean"), inner.number("sd", above=0.0))
    if keys in ({"low", "high"}, {"low", "high", "scale"}):
        return _read_range(inner)
    inner.only(("median", "fold", "mean", "sd", "low", "high", "scale"))
    raise InputError(
        f"keys {', '.join(value) or 'none'} were given; a prior is {FORMS}",
        where=table.where(name),
    )


def _read_range(inner: Section) -> Prior:
    linear = inner.word("scale", ("log", "linear"), "log") == "linear"
    low = inner.number("low")
    if not linear and low <= 0:
        inner.fail(
            "low",
            f"{low:g} was given; a range uniform in the logarithm starts above 0 "
            '(scale = "linear" makes it flat)',
        )
    high = inner.number("high")
    if high <= low:
        inner.fail(
            "high", f"low = {low:g} and high = {high:g} exclude everything; high must be above low"
        )
    return Uniform(low, high) if linear else LogUniform(low, high)


def _check_circles(priors: Mapping[str, Prior], table: Section) -> None:
    for name in priors:
        chain = [name]
        prior = priors[name]
        while isinstance(prior, Tied) and prior.to in priors:
            if prior.to in chain:
                raise InputError(
                    f"tied in a circle: {' -> '.join([*chain, prior.to])}; give one of them a "
                    "prior",
                    where=table.where(name),
                )
            chain.append(prior.to)
            prior = priors[prior.to]
