"""Expressions as readable text and as LaTeX."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Final

from ruleout.expressions.graph import ONE, Expr, ordered

_SUM, _PRODUCT, _SIGN, _POWER, _ATOM = range(1, 6)
_GUARD: Final = 1e-9
"""Largest lower limit that is taken for a numerical guard rather than for science."""


def _is_amount(node: Expr) -> bool:
    return node.op == "sym" and "." not in node.name


def _unguarded(node: Expr) -> Expr:
    """Return x of ``max(x, 0)`` where x is an amount, or one less an amount, else ``node``.

    Amounts are never negative but for rounding, so the maximum says nothing about the mechanism.
    """
    if node.op == "max":
        for inner, limit in (node.args, node.args[::-1]):
            small = limit.op == "const" and 0.0 <= limit.value <= _GUARD
            room = inner.op == "sub" and inner.args[0] is ONE and _is_amount(inner.args[1])
            if small and (_is_amount(inner) or room):
                return inner
    return node


Piece = tuple[str, int]
"""Printed text and how strongly it binds."""


def _render(root: Expr, write: Callable[[Expr, list[Piece]], Piece]) -> str:
    done: dict[Expr, Piece] = {}
    for node in ordered([root]):
        plain = _unguarded(node)
        done[node] = done[plain] if plain is not node else write(node, [done[a] for a in node.args])
    return done[root][0]


def _number(value: float) -> str:
    return str(int(value)) if value == int(value) and abs(value) < 1e15 else repr(value)


def to_text(expression: Expr) -> str:
    """Return ``expression`` as text that :func:`parse` reads back (but for guards and cases).

    Examples
    --------
    >>> from ruleout.expressions import parse
    >>> to_text(parse("k*store/(half+store)"))
    'k * store / (half + store)'
    """
    return _render(expression, _write_text)


def _write_text(node: Expr, args: list[Piece]) -> Piece:
    def arg(i: int, level: int) -> str:
        text, binds = args[i]
        return text if binds >= level else f"({text})"

    match node.op:
        case "const":
            return _number(node.value), _SIGN if node.value < 0 else _ATOM
        case "sym":
            return node.name, _ATOM
        case "add" | "sub":
            sign = "+" if node.op == "add" else "-"
            return f"{arg(0, _SUM)} {sign} {arg(1, _PRODUCT)}", _SUM
        case "mul" if node.args[0] is node.args[1]:
            return f"{arg(0, _ATOM)} ** 2", _POWER
        case "mul" | "div":
            sign = "*" if node.op == "mul" else "/"
            return f"{arg(0, _PRODUCT)} {sign} {arg(1, _SIGN)}", _PRODUCT
        case "neg":
            return f"-{arg(0, _POWER)}", _SIGN
        case "pow":
            return f"{arg(0, _ATOM)} ** {arg(1, _SIGN)}", _POWER
        case "select":
            return f"{arg(1, _SUM)} if {arg(0, _SUM)} > 0 else {arg(2, _SUM)}", 0
    return f"{node.op}({', '.join(text for text, _ in args)})", _ATOM


def to_latex(expression: Expr, names: Mapping[str, str] | None = None) -> str:
    r"""Return ``expression`` as LaTeX for math mode.

    Parameters
    ----------
    expression : Expr
    names : mapping of str to str, optional
        LaTeX of symbols that shall not be written by :func:`latex_name`.

    Examples
    --------
    >>> from ruleout.expressions import parse
    >>> print(to_latex(parse("k / (1 + kinase)")))
    \frac{\mathrm{k}}{1 + \mathrm{kinase}}
    """
    known = names or {}

    def write(node: Expr, args: list[Piece]) -> Piece:
        return _write_latex(node, args, known)

    return _render(expression, write)


def latex_name(name: str) -> str:
    r"""Return a symbol in LaTeX: ``time`` as t, ``NODE.x`` as ``\mathrm{x}_{\mathrm{NODE}}``."""
    if name == "time":
        return "t"
    owner, dot, own = name.partition(".")
    if dot:
        return rf"{latex_name(own)}_{{{latex_name(owner)}}}"
    escaped = name.replace("_", r"\_")
    return rf"\mathrm{{{escaped}}}"


def _latex_number(value: float) -> str:
    mantissa, e, exponent = _number(value).partition("e")
    if not e:
        return mantissa
    power = f"10^{{{int(exponent)}}}"
    return power if mantissa == "1" else rf"{mantissa} \cdot {power}"


def _write_latex(node: Expr, args: list[Piece], names: Mapping[str, str]) -> Piece:
    def arg(i: int, level: int) -> str:
        text, binds = args[i]
        return text if binds >= level else rf"\left({text}\right)"

    match node.op:
        case "const":
            text = _latex_number(node.value)
            binds = _SIGN if node.value < 0 else _PRODUCT if "^" in text else _ATOM
            return text, binds
        case "sym":
            return names.get(node.name) or latex_name(node.name), _ATOM
        case "add" | "sub":
            sign = "+" if node.op == "add" else "-"
            return f"{arg(0, _SUM)} {sign} {arg(1, _PRODUCT)}", _SUM
        case "mul" if node.args[0] is node.args[1]:
            return rf"{{{arg(0, _ATOM)}}}^{{2}}", _POWER
        case "mul":
            return rf"{arg(0, _PRODUCT)} \, {arg(1, _POWER)}", _PRODUCT
        case "div":
            return rf"\frac{{{args[0][0]}}}{{{args[1][0]}}}", _POWER
        case "neg":
            return f"-{arg(0, _PRODUCT)}", _SUM
        case "pow":
            base = arg(0, _ATOM)
            return rf"{{{base}}}^{{{args[1][0]}}}", _POWER
        case "sqrt":
            return rf"\sqrt{{{args[0][0]}}}", _ATOM
        case "select":
            yes, no = args[1][0], args[2][0]
            when = rf"\text{{if }} {args[0][0]} > 0"
            return (
                rf"\begin{{cases}} {yes} & {when} \\ {no} & \text{{otherwise}} \end{{cases}}",
                _SUM,
            )
    return rf"\{node.op}\left({', '.join(text for text, _ in args)}\right)", _ATOM
