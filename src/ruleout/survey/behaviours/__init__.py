"""The behaviours a survey can score, one module each."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from ruleout.survey.behaviours.adaptation import Adaptation
from ruleout.survey.behaviours.base import Behaviour, Score, Subject
from ruleout.survey.behaviours.hysteresis import Hysteresis
from ruleout.survey.behaviours.multistability import Multistability
from ruleout.survey.behaviours.oscillation import Oscillation
from ruleout.survey.behaviours.pulse import Pulse
from ruleout.survey.behaviours.resemblance import Resemblance
from ruleout.survey.behaviours.switching import Switch
from ruleout.survey.behaviours.timing import Acceleration, Delay

_KINDS = (
    Adaptation,
    Oscillation,
    Multistability,
    Hysteresis,
    Switch,
    Pulse,
    Acceleration,
    Delay,
    Resemblance,
)
BEHAVIOURS: Final[Mapping[str, Any]] = {kind.name: kind for kind in _KINDS}
"""Behaviour classes by the name that family files use."""

__all__ = ["BEHAVIOURS", "Behaviour", "Score", "Subject"]
