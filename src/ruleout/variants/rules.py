"""Rules on which choices may stand together, judged on partly settled choices."""

from __future__ import annotations

from collections.abc import Sequence

from ruleout.mechanism.types import Rule


def admits(rule: Rule, truths: Sequence[bool | None]) -> bool:
    """Return whether the rule can still be kept.

    Parameters
    ----------
    rule : Rule
    truths : sequence of bool or None
        Whether each member of the rule holds; None while it is not settled.
    """
    yes, no = truths.count(True), truths.count(False)
    match rule.kind:
        case "at_most_one":
            return yes <= 1
        case "exactly_one":
            return yes <= 1 and no < len(truths)
        case "together":
            return not (yes and no)
        case "implies":
            return not (truths[0] is True and False in truths[1:])
