"""Where in parameter space solves fail, in words."""

from __future__ import annotations

import numpy as np

from ruleout.fitting import Posterior
from ruleout.pipeline.flow import FAILED_SHARE, Fit

NOTEWORTHY = 0.0005
"""A smaller share of failed solves is not worth a word."""
NAMED = 3
"""Parameters named, at most."""
APART = 1.0
"""Failures lie elsewhere if their median is so many spreads off where the chains are."""


def failed_solves(posterior: Posterior, fit: Fit) -> tuple[str, str, str] | None:
    """Return subject, message and remedy, or None if hardly any solve failed.

    For every parameter the median where solves failed is held against the chains' median, in units
    of half the chains' central 68 %; those farthest off are named, on the natural scale.
    """
    if not fit.failed_share > NOTEWORTHY or not len(fit.failed_at):
        return None
    names = posterior.space.names
    chains = fit.chains.reshape(-1, len(names))
    low, middle, high = np.quantile(chains, [0.16, 0.5, 0.84], axis=0)
    there = np.median(fit.failed_at, axis=0)
    shift = np.abs(there - middle) / np.maximum(0.5 * (high - low), 1e-12)
    units = {entry.name: entry.unit for entry in posterior.catalogue.entries}
    typical, failing = posterior.space.natural(np.stack([middle, there]))
    apart = [j for j in np.argsort(-shift)[:NAMED] if shift[j] > APART]
    where = [
        f"{names[j]} around {failing[j]:.3g} {units[names[j]]}".rstrip()
        + f" (chains: {typical[j]:.3g})"
        for j in apart
    ]
    place = "mostly at " + ", ".join(where) if where else "all over where the chains are"
    judged = ", too many to judge it" if fit.failed_share > FAILED_SHARE else ""
    message = f"{100 * fit.failed_share:.2g} % of solves inside the priors failed{judged}: {place}"
    remedy = (
        f"narrow the priors of {', '.join(names[j] for j in apart)} if such values are not "
        "conceivable, or use a law that saturates"
        if where
        else "look for a rate law that grows without bound or leaves its domain"
    )
    return ";".join(names[j] for j in apart), message, remedy
