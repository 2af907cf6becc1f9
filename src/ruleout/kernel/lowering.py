"""From a system to the autonomous form that both implementations run."""

from __future__ import annotations

from dataclasses import dataclass

from ruleout.expressions import ONE, ZERO, Expr, differentiate, symbols
from ruleout.kernel.types import System

TIME = "time"


@dataclass(frozen=True, slots=True)
class Lowered:
    """An autonomous system with its Jacobian.

    Attributes
    ----------
    states : tuple of str, length N
        Those of the system; if time occurs on the right-hand side, ``time`` is the last of them.
    parameters : tuple of str, length P
    rhs : tuple of Expr, length N
    jacobian : tuple of N tuples of N Expr
        ``jacobian[i][j]`` is d rhs[i] / d states[j]; the constant ``ZERO`` where there is none.
    forced : bool
        Whether time is among the states.
    """

    states: tuple[str, ...]
    parameters: tuple[str, ...]
    rhs: tuple[Expr, ...]
    jacobian: tuple[tuple[Expr, ...], ...]
    forced: bool


def lower(system: System) -> Lowered:
    """Return ``system`` in autonomous form; ValueError if a symbol is not accounted for."""
    used = symbols(*system.rhs)
    forced = TIME in used
    unknown = used - {*system.states, *system.parameters, TIME}
    if unknown:
        raise ValueError(f"right-hand side uses undeclared symbols: {', '.join(sorted(unknown))}")
    if len(system.rhs) != len(system.states):
        raise ValueError(f"{len(system.states)} states but {len(system.rhs)} right-hand sides")
    states = (*system.states, TIME) if forced else system.states
    rhs = (*system.rhs, ONE) if forced else system.rhs
    columns = [differentiate(rhs, name) if name in used else (ZERO,) * len(rhs) for name in states]
    jacobian = tuple(tuple(column[i] for column in columns) for i in range(len(rhs)))
    return Lowered(states, system.parameters, rhs, jacobian, forced)
