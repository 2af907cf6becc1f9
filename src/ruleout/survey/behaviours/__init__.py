"""The behaviours a survey can score, one module each."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from ruleout.survey.behaviours.adaptation import Adaptation
from ruleout.survey.behaviours.base import Behaviour, Score, Subject

BEHAVIOURS: Final[Mapping[str, Any]] = {kind.name: kind for kind in (Adaptation,)}
"""Behaviour classes by the name that family files use."""

__all__ = ["BEHAVIOURS", "Behaviour", "Score", "Subject"]
