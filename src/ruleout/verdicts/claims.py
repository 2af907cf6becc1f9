"""What the verdicts say of structural hypotheses."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from ruleout.variants.types import ClaimSplit
from ruleout.verdicts.coherence import KEPT, RULED_OUT

NEEDED, NOT_NEEDED, EXCLUDED, UNDECIDED, NOTHING_FITS = (
    "needed",
    "not_needed",
    "excluded",
    "undecided",
    "nothing_fits",
)
CLAIM_VERDICTS = (NEEDED, NOT_NEEDED, EXCLUDED, UNDECIDED, NOTHING_FITS)


@dataclass(frozen=True, slots=True)
class ClaimVerdict:
    """A claim's verdict and the kept variants on both of its sides."""

    claim: ClaimSplit
    verdict: str
    with_kept: tuple[str, ...]
    without_kept: tuple[str, ...]
    with_all: tuple[str, ...]
    without_all: tuple[str, ...]
    statement: str


def judge_claim(
    claim: ClaimSplit,
    order: Iterable[str],
    verdicts: Mapping[str, str],
    contains: Mapping[str, frozenset[str]],
) -> ClaimVerdict:
    """Return the verdict of one claim.

    `needed`: every variant without it is ruled out and one with it is kept. `excluded`: the
    reverse. `not_needed`: a variant without it, contained in one with it, is kept. `nothing_fits`:
    every variant is ruled out. Otherwise `undecided`.
    """
    order = tuple(order)
    with_all = tuple(v for v in order if v in claim.holds_in)
    without_all = tuple(v for v in order if v not in claim.holds_in)
    with_kept = tuple(v for v in with_all if verdicts[v] == KEPT)
    without_kept = tuple(v for v in without_all if verdicts[v] == KEPT)
    if all(verdicts[v] == RULED_OUT for v in order):
        verdict = NOTHING_FITS
    elif with_kept and all(verdicts[v] == RULED_OUT for v in without_all):
        verdict = NEEDED
    elif without_kept and all(verdicts[v] == RULED_OUT for v in with_all):
        verdict = EXCLUDED
    elif any(small in contains[big] for small in without_kept for big in with_all):
        verdict = NOT_NEEDED
    else:
        verdict = UNDECIDED
    return ClaimVerdict(
        claim,
        verdict,
        with_kept,
        without_kept,
        with_all,
        without_all,
        _statement(claim, verdict, with_kept, without_kept, verdicts, order),
    )


def _statement(
    claim: ClaimSplit,
    verdict: str,
    with_kept: tuple[str, ...],
    without_kept: tuple[str, ...],
    verdicts: Mapping[str, str],
    order: tuple[str, ...],
) -> str:
    if claim.settled is not None:
        truth = "holds in every" if claim.settled else "holds in no"
        return f"Settled by the rules, not by the data: it {truth} variant that they allow."
    match verdict:
        case "needed":
            return "Needed: every variant without it is ruled out; kept with it: " + (
                f"{', '.join(with_kept)}."
            )
        case "excluded":
            return "Excluded: every variant with it is ruled out; kept without it: " + (
                f"{', '.join(without_kept)}."
            )
        case "not_needed":
            return (
                "These data do not show that it is needed: kept without it: "
                f"{', '.join(without_kept)}."
            )
        case "nothing_fits":
            return (
                "Nothing fits: every variant is ruled out, so the list of mechanisms falls short."
            )
    waiting = [v for v in order if verdicts[v] not in (KEPT, RULED_OUT)]
    if waiting:
        return f"Undecided: {', '.join(waiting)} could not be judged."
    return (
        f"Undecided: kept with it: {', '.join(with_kept)}; "
        f"kept without it: {', '.join(without_kept)}."
    )
