"""From p-values to verdicts: what contains a kept variant cannot be ruled out.

References
----------
.. [1] H. Finner, K. Strassburger, Ann. Stat. 30 (2002) 1194, doi:10.1214/aos/1031689023.
.. [2] R. L. Berger, Technometrics 24 (1982) 295, doi:10.1080/00401706.1982.10487790.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

RULED_OUT, KEPT, NOT_JUDGED = "ruled_out", "kept", "not_judged"


@dataclass(frozen=True, slots=True)
class Own:
    """What a variant's own fit and checks say, before coherence.

    Attributes
    ----------
    judged : bool
        The search, the sampler and the integrator did their work.
    p_value : float
        NaN where no check was made (not needed, or nothing to check).
    rejected : bool
        The sequential test decided p <= alpha.
    """

    judged: bool
    p_value: float = math.nan
    rejected: bool = False


@dataclass(frozen=True, slots=True)
class Verdict:
    """A variant's verdict.

    Attributes
    ----------
    verdict : {"ruled_out", "kept", "not_judged"}
    p_value : float
        Raw.
    p_coherent : float
        The largest over itself, what it contains and what cannot be told apart from it.
    by_coherence : str
        The kept variant that keeps it, if its own check did not.
    alike : tuple of str
        Variants whose fitted curves match its own.
    """

    verdict: str
    p_value: float
    p_coherent: float
    by_coherence: str = ""
    alike: tuple[str, ...] = ()


def _largest(values: Iterable[float]) -> float:
    return max((v for v in values if not math.isnan(v)), default=math.nan)


def settle(
    order: Iterable[str],
    contains: Mapping[str, frozenset[str]],
    own: Mapping[str, Own],
    alike: Iterable[tuple[str, str]] = (),
) -> dict[str, Verdict]:
    """Return every variant's verdict.

    Parameters
    ----------
    order : iterable of str
        Variants, each after all that it contains.
    contains : mapping
        Smaller variants that each contains, no-effect confirmed to be within reach.
    own : mapping
        Each variant's own outcome.
    alike : iterable of pairs
        Variants whose fitted curves match within 0.1 sd: they share the largest of their p-values,
        so none is ruled out unless all are.
    """
    partners: dict[str, set[str]] = {}
    for a, b in alike:
        partners.setdefault(a, set()).add(b)
        partners.setdefault(b, set()).add(a)
    verdicts: dict[str, Verdict] = {}
    for name in order:
        mine = own[name]
        group = (name, *sorted(partners.get(name, ())))
        smaller = contains[name]
        inherited = _largest(verdicts[s].p_coherent for s in smaller)
        p_coherent = _largest([*(own[g].p_value for g in group), inherited])
        keepers = sorted(s for s in smaller if verdicts[s].verdict == KEPT)
        by_coherence = ""
        if keepers:
            verdict = KEPT
            passes = mine.judged and not mine.rejected and not math.isnan(mine.p_value)
            by_coherence = "" if passes else keepers[0]
        elif not mine.judged or any(verdicts[s].verdict == NOT_JUDGED for s in smaller):
            verdict = NOT_JUDGED
        elif all(own[g].rejected for g in group if own[g].judged):
            verdict = RULED_OUT
        else:
            verdict = KEPT
        verdicts[name] = Verdict(verdict, mine.p_value, p_coherent, by_coherence, group[1:])
    return verdicts
