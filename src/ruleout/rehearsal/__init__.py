"""Simulated data sets through the whole verdict pipeline: size and power of a design."""

from ruleout.rehearsal.chances import chances_seen
from ruleout.rehearsal.designs import AS_GIVEN, Design, Variation, designs, read_variation
from ruleout.rehearsal.judging import EFFORTS, Spending, judge_simulated
from ruleout.rehearsal.run import rehearse
from ruleout.rehearsal.saving import save_rehearsal
from ruleout.rehearsal.simulating import coordinates, simulate
from ruleout.rehearsal.truths import Fitted, fitted
from ruleout.rehearsal.types import COLUMNS, Rehearsal

__all__ = [
    "AS_GIVEN",
    "COLUMNS",
    "EFFORTS",
    "Design",
    "Fitted",
    "Rehearsal",
    "Spending",
    "Variation",
    "chances_seen",
    "coordinates",
    "designs",
    "fitted",
    "judge_simulated",
    "read_variation",
    "rehearse",
    "save_rehearsal",
    "simulate",
]
