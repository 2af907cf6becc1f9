"""Shares and lists in words."""

from __future__ import annotations

from collections.abc import Sequence


def share_words(share: float) -> str:
    """Return a share of prior draws in words, coarse enough to be alike in like variants."""
    if share > 0.995:
        return "all"
    if share < 0.075:
        return "a few per cent of"
    return f"about {round(share, 1) * 100:.0f} % of"


def listed(names: Sequence[str], most: int = 6) -> str:
    """Return ``a, b and c``, cut short after ``most`` names."""
    if len(names) > most:
        return f"{', '.join(names[:most])} and {len(names) - most} more"
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} and {names[-1]}"


def verb(names: Sequence[str], plural: str) -> str:
    """Return a verb for these names: ``rise`` for several, ``rises`` for one."""
    return plural if len(names) > 1 else f"{plural}s"
