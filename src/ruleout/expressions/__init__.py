"""Expressions: read through a whitelist, differentiated, evaluated on arrays, printed."""

from ruleout.expressions.graph import (
    FUNCTIONS,
    ONE,
    ZERO,
    Expr,
    apply,
    as_expr,
    const,
    differentiate,
    evaluate,
    ordered,
    substitute,
    sym,
    symbols,
)

__all__ = [
    "FUNCTIONS",
    "ONE",
    "ZERO",
    "Expr",
    "apply",
    "as_expr",
    "const",
    "differentiate",
    "evaluate",
    "ordered",
    "substitute",
    "sym",
    "symbols",
]
