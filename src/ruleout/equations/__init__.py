"""Equations of the variants, and how conditions bend them."""

from ruleout.equations.conditions import setups
from ruleout.equations.model import build
from ruleout.equations.types import Model, Parameter, Setup, Start, Structure

__all__ = ["Model", "Parameter", "Setup", "Start", "Structure", "build", "setups"]
