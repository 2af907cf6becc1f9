"""Sentences of a survey's report."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from ruleout.survey.types import Survey

NOT_PROVEN: Final = (
    "A statement without counterexample is not ruled out by the topologies and parameter sets that "
    "were surveyed. It is not proven: a counterexample may hide in parameter space that no set "
    "came near, in wirings outside this family, or under other rate laws."
)

KINDS: Final[Mapping[str, str]] = {
    "requires": "What every working topology has",
    "excludes": "What no working topology looks like",
    "suffices": "What is enough",
}


def percent(share: float) -> str:
    """Return a share in per cent with two digits."""
    return f"{100 * share:.2g} %"


def headline(survey: Survey, behaviour: str) -> str:
    """Return what was found of one behaviour, in a sentence or two."""
    meta = survey.meta
    found: Mapping[str, Any] = meta["results"][behaviour]
    scale = f"{meta['surveyed']:,} topologies, {meta['sets']:,} parameter sets each"
    threshold = "one set" if meta["working"] == 1 else f"{meta['working']} sets"
    text = (
        f"{found['working']:,} of {scale}, show {behaviour} in {threshold} or more; "
        f"{found['minimal']:,} of them are minimal."
    )
    if found["missed_at_most"] is not None:
        text += (
            f" This is a random sample of {meta['family_size']:,}: a kind of topology that was not "
            f"met could still make up {percent(found['missed_at_most'])} of the family (upper "
            f"{100 * meta['level']:g} % bound)."
        )
    if found["not_judged_sets"]:
        share = found["not_judged_sets"] / (meta["surveyed"] * meta["sets"])
        text += (
            f" In {percent(share)} of the sets the flow did not settle or a solve failed; they "
            "count neither way."
        )
    return text
