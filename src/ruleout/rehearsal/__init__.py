"""Simulated data sets through the whole verdict pipeline: size and power of a design."""

from ruleout.rehearsal.judging import EFFORTS, Spending, judge_simulated
from ruleout.rehearsal.simulating import coordinates, simulate

__all__ = ["EFFORTS", "Spending", "coordinates", "judge_simulated", "simulate"]
