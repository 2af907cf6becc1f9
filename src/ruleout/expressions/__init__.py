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
from ruleout.expressions.parse import CALLABLE, parse
from ruleout.expressions.printing import latex_name, to_latex, to_text

__all__ = [
    "CALLABLE",
    "FUNCTIONS",
    "ONE",
    "ZERO",
    "Expr",
    "apply",
    "as_expr",
    "const",
    "differentiate",
    "evaluate",
    "latex_name",
    "ordered",
    "parse",
    "substitute",
    "sym",
    "symbols",
    "to_latex",
    "to_text",
]
