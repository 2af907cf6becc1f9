"""Rate laws, in a form that is safe to integrate and in one that is good to read."""

from __future__ import annotations

from dataclasses import dataclass

from ruleout.expressions import ZERO, Expr, apply, const

TINY = 1e-12
"""Amounts are raised to at least this before a Hill exponent is applied."""


@dataclass(frozen=True, slots=True)
class Laws:
    """Rate laws of a level ``s``.

    Solvers step a little below zero. With ``guarded`` the denominators stay positive there while
    saturating numerators stay linear, so that a negative level is drawn back, and Hill laws take
    the level as at least ``TINY``. Without, the textbook forms, for display.
    """

    guarded: bool = True

    def saturating(self, s: Expr, half: Expr) -> Expr:
        """Return ``s / (half + s)``."""
        return s / (half + (apply("max", s, ZERO) if self.guarded else s))

    def ratio(self, s: Expr, half: Expr, hill: Expr | None) -> Expr:
        """Return ``(s / half)^hill``, what an inhibitor divides by, less one."""
        if s is ZERO:
            return ZERO
        if hill is None:
            return (apply("max", s, ZERO) if self.guarded else s) / half
        return ((apply("max", s, const(TINY)) if self.guarded else s) / half) ** hill

    def hill(self, s: Expr, half: Expr, hill: Expr) -> Expr:
        """Return ``s^hill / (half^hill + s^hill)``."""
        if s is ZERO:
            return ZERO
        if self.guarded:
            ratio = self.ratio(s, half, hill)
            return ratio / (1.0 + ratio)
        return s**hill / (half**hill + s**hill)

    def power(self, s: Expr, order: float) -> Expr:
        """Return ``s ** order``, of the sign of ``s`` or zero below zero."""
        if s is ZERO or order == 1.0:
            return s
        if not self.guarded:
            return s**order
        if order == int(order):
            clipped = apply("max", s, ZERO)
            for _ in range(int(order) - 1):
                s = s * clipped
            return s
        return s * apply("max", s, const(TINY)) ** (order - 1.0)
