"""Coherent verdicts on variants, verdicts on claims, and their tables."""

from ruleout.verdicts.claims import CLAIM_VERDICTS, ClaimVerdict, judge_claim
from ruleout.verdicts.coherence import KEPT, NOT_JUDGED, RULED_OUT, Own, Verdict, settle
from ruleout.verdicts.reasons import reason, where_it_shows
from ruleout.verdicts.small_samples import FEW_POINTS, corrected_aic, separated
from ruleout.verdicts.types import COLUMNS, Judgement

__all__ = [
    "CLAIM_VERDICTS",
    "COLUMNS",
    "FEW_POINTS",
    "KEPT",
    "NOT_JUDGED",
    "RULED_OUT",
    "ClaimVerdict",
    "Judgement",
    "Own",
    "Verdict",
    "corrected_aic",
    "judge_claim",
    "reason",
    "separated",
    "settle",
    "where_it_shows",
]
