"""The batched ODE kernel: systems in, states out."""

from ruleout.kernel.types import Protocol, Solution, Status, SteadyStates, System

__all__ = ["Protocol", "Solution", "Status", "SteadyStates", "System"]
