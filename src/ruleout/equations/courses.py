"""Levels and factors over time."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Sequence
from math import inf

from ruleout.experiments.types import InputCourse


def piece_at(course: InputCourse, time: float) -> tuple[float, float]:
    """Return level and slope of a course from ``time`` on; constant beyond an interpolated end."""
    i = bisect_right(course.times, time) - 1
    if i < 0:
        return course.levels[0], 0.0
    if not course.interpolated or i + 1 == len(course.times):
        return course.levels[i], 0.0
    t0, t1 = course.times[i : i + 2]
    slope = (course.levels[i + 1] - course.levels[i]) / (t1 - t0)
    return course.levels[i] + slope * (time - t0), slope


def level_at(course: InputCourse | None, time: float, resting: float) -> float:
    """Return the level of an input; ``resting`` before the first step of a stepped course."""
    if course is None or (not course.interpolated and time < course.times[0]):
        return resting
    return piece_at(course, time)[0]


def factor_at(changes: Sequence[tuple[float, float]], time: float) -> float:
    """Return the factor in force from ``time`` on: that of the latest change so far."""
    latest, factor = -inf, 1.0
    for when, value in changes:
        if latest <= when <= time:
            latest, factor = when, value
    return factor
