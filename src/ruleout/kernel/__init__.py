"""The batched ODE kernel: systems in, states out."""

from ruleout.kernel.compiled import set_threads
from ruleout.kernel.program import Program, compile_system
from ruleout.kernel.types import Protocol, Solution, Status, SteadyStates, System

__all__ = [
    "Program",
    "Protocol",
    "Solution",
    "Status",
    "SteadyStates",
    "System",
    "compile_system",
    "set_threads",
]
