"""Rate laws, in a form that is safe to integrate and in one that is good to read."""

from __future__ import annotations

from dataclasses import dataclass

from ruleout.expressions import ONE, ZERO, Expr, apply, const

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
        """Return ``s ** order``; small whole orders as products, others of a level not negative."""
        if order == int(order) and 0 < order <= 4:
            result = ONE
            for _ in range(int(order)):
                result = result * s
            return result
        if s is ZERO:
            return ZERO
        return (apply("max", s, ZERO) if self.guarded else s) ** order
