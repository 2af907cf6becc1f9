"""What an inspection finds before anything is fitted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import pandas as pd

from ruleout.variants import VariantSet

FINDING_COLUMNS = ("variant", "kind", "subject", "message", "remedy")


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing to know before fitting, with what to do about it.

    Attributes
    ----------
    variant : str
        Empty where it concerns all variants.
    kind : str
        Short word for the check that found it, such as ``"unbounded"``.
    subject : str
        Node, edge, parameter, readout or condition it is about.
    message, remedy : str
        Plain sentences.
    """

    variant: str
    kind: str
    subject: str
    message: str
    remedy: str


@dataclass(frozen=True, slots=True, eq=False)
class Inspection:
    """A case before fitting.

    Attributes
    ----------
    variants : VariantSet
    equations : mapping of variant to dict
        What :func:`ruleout.equations.describe` says.
    findings : DataFrame
        Columns ``variant, kind, subject, message, remedy``; those that concern every variant come
        first, with an empty ``variant``.
    sensitivities : DataFrame
        Columns ``variant, parameter, readout, at_median, typical, largest``: dimensionless
        d ln y / d ln p, taken as the root mean square of dy/d ln p over a readout's points
        divided by that of y. ``at_median`` with every parameter at its prior median, ``typical``
        and ``largest`` the median and maximum over that point and prior draws. A parameter on
        the natural scale (an offset) counts per width of its prior.
    identifiability : DataFrame
        Columns ``variant, free_parameters, insensitive, rank, points``: parameters other than
        noise, how many of them move nothing, the rank of the sensitivity matrix of the others,
        and fitted data points (planned ones where nothing was measured).
    prior_predictive : DataFrame
        Columns ``variant, condition, readout, time, low, median, high, value``: the 95 % range of
        what the priors predict, noise included where it is known, beside the data. On the
        working scale of the readout's family.
    """

    variants: VariantSet
    equations: Mapping[str, dict[str, list[str]]]
    findings: pd.DataFrame
    sensitivities: pd.DataFrame
    identifiability: pd.DataFrame
    prior_predictive: pd.DataFrame
