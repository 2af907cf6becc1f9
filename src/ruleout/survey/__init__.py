"""Motif families: which small wirings can show a behaviour, and what they have in common."""

from ruleout.survey.reading import FamilyFile, read_family
from ruleout.survey.running import survey
from ruleout.survey.types import Family, Settings, Survey

__all__ = ["Family", "FamilyFile", "Settings", "Survey", "read_family", "survey"]
