"""Equations of the variants, and how conditions bend them."""

from ruleout.equations.conditions import setups
from ruleout.equations.describe import describe
from ruleout.equations.model import build
from ruleout.equations.types import Model, Parameter, Setup, Start, Structure
from ruleout.equations.units import unit_ties

__all__ = [
    "Model",
    "Parameter",
    "Setup",
    "Start",
    "Structure",
    "build",
    "describe",
    "setups",
    "unit_ties",
]
