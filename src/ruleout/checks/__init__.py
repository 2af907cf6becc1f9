"""Calibrated posterior predictive checks."""

from ruleout.checks.combination import (
    Standard,
    Tally,
    maximum,
    standardise,
    standardised,
    tally,
)
from ruleout.checks.replicates import Checker, Evaluated
from ruleout.checks.statistics import Column

__all__ = [
    "Checker",
    "Column",
    "Evaluated",
    "Standard",
    "Tally",
    "maximum",
    "standardise",
    "standardised",
    "tally",
]
