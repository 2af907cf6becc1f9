"""A rehearsal in words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from ruleout.rehearsal import AS_GIVEN, Rehearsal
from ruleout.report.words import CLAIM_VERDICTS


def rate_text(row: Mapping[str, Any]) -> str:
    """Return a rate of being ruled out, in brackets where that would be a mistake."""
    text = f"{row['rate']:.2f}"
    return f"[{text}]" if row["holds_truth"] else text


def headline(rehearsal: Rehearsal) -> list[str]:
    """Return sentences for the top of a rehearsal's output."""
    meta = rehearsal.meta
    size = rehearsal.size[rehearsal.size["design"] == AS_GIVEN]
    total, wrong = int(size["data_sets"].sum()), int(size["ruled_out"].sum())
    source = {
        "posterior": "draws from the posterior of the data",
        "plan and priors": "the values that the plan states, the others drawn from their priors",
        "priors": "draws from the priors",
    }[meta["truths_from"]]
    lines = [
        f"{meta['data_sets']} data sets simulated from each true variant; its parameters are "
        f"{source}.",
        f"The true variant was ruled out by mistake in {wrong} of {total}, at a nominal "
        f"{meta['alpha']:g}.",
    ]
    unjudged = int(size["not_judged"].sum())
    if unjudged:
        lines.append(
            f"It could not be judged in {unjudged} of {total}; these count as not ruled out."
        )
    return lines


def claim_chances(row: Mapping[str, Any]) -> str:
    """Return the verdicts reached on a claim, the most frequent first."""
    found = [(row[word], text) for word, text in CLAIM_VERDICTS.items() if row[word] > 0]
    found.sort(key=lambda pair: -pair[0])
    return ", ".join(f"{text} {share:.2f}" for share, text in found)
