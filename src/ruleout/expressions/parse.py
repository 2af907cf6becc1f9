"""Reader of rate, readout and start expressions: a whitelist grammar, never evaluated as code.

::

    sum     = product (("+" | "-") product)*
    product = signed (("*" | "/") signed)*
    signed  = ("+" | "-") signed | power
    power   = atom ["**" signed]
    atom    = number | name | name "(" sum ("," sum)* ")" | "(" sum ")"
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final, NoReturn

from ruleout.errors import InputError, did_you_mean
from ruleout.expressions.graph import ZERO, Expr, apply, const, ordered, sym

LONGEST: Final = 2_000
DEEPEST: Final = 50
TALLEST: Final = 200
CALLABLE: Final = ("exp", "log", "sqrt", "sin", "cos", "tanh", "min", "max")
_BINARY: Final = {"+": "add", "-": "sub", "*": "mul", "/": "div"}
_TOKEN: Final = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?(?![A-Za-z_0-9]))"
    r"|(?P<name>[A-Za-z_][A-Za-z0-9_]*(?:\.[A-Za-z_][A-Za-z0-9_]*)?)"
    r"|(?P<sign>\*\*|[-+*/(),]))",
    re.ASCII,
)


@dataclass(frozen=True, slots=True)
class _Token:
    kind: str
    text: str
    column: int


def parse(text: str, *, where: str | None = None) -> Expr:
    """Return the expression written in ``text``.

    Allowed are numbers, ``+ - * / **``, parentheses, ``exp log sqrt sin cos tanh min max`` and
    names, which become symbols as they stand (``kinase``, ``sensor.loss_rate``, ``time``): what a
    name may mean is for the caller to check.

    Parameters
    ----------
    text : str
        At most 2,000 characters and 50 levels of nesting.
    where : str, optional
        File, line and field, for messages.

    Raises
    ------
    InputError
        Where the text is no such expression, or a part made of constants alone has no finite
        value (``1 / 0``, ``log(-1)``).

    Examples
    --------
    >>> parse("k * store / (half + store)")
    div(mul(k, store), add(half, store))
    """
    if len(text) > LONGEST:
        raise InputError(
            f"the expression has {len(text)} characters; at most {LONGEST} are read", where=where
        )
    return _Parser(text, _tokens(text, where), where).whole()


def _tokens(text: str, where: str | None) -> list[_Token]:
    tokens: list[_Token] = []
    at = 0
    while text[at:].strip():
        found = _TOKEN.match(text, at)
        if found is None:
            start = at + len(text[at:]) - len(text[at:].lstrip())
            _refuse(text, start, _strange(text[start:]), where)
        kind = str(found.lastgroup)
        tokens.append(_Token(kind, found[kind], found.start(kind)))
        at = found.end()
    tokens.append(_Token("end", "", len(text)))
    return tokens


def _strange(rest: str) -> str:
    if rest[0] == "^":
        return "'^' is not allowed; write ** for powers"
    if number := re.match(r"\.?\d[\w.]*", rest):
        return f"{number[0][:20]!r} is neither a number nor a name; write * between factors"
    return f"{rest[0]!r} is not allowed; use numbers, names, + - * / **, parentheses and functions"


def _refuse(text: str, column: int, message: str, where: str | None) -> NoReturn:
    shown = text if len(text) <= 60 else f"{text[:column][-30:]}{text[column:][:30]}"
    raise InputError(f"{message} (at character {column + 1} of {shown!r})", where=where)


class _Parser:
    """Recursive descent over the tokens of one expression, with a bounded depth."""

    def __init__(self, text: str, tokens: list[_Token], where: str | None) -> None:
        self.text, self.tokens, self.where = text, tokens, where
        self.at = 0
        self.depth = 0

    @property
    def token(self) -> _Token:
        return self.tokens[self.at]

    def fail(self, message: str, token: _Token | None = None) -> NoReturn:
        _refuse(self.text, (token or self.token).column, message, self.where)

    def accept(self, *signs: str) -> _Token | None:
        token = self.token
        if token.kind == "sign" and token.text in signs:
            self.at += 1
            return token
        return None

    def expect(self, sign: str, after: str) -> None:
        if not self.accept(sign):
            found = f"'{self.token.text}'" if self.token.text else "the end"
            self.fail(f"{found} where '{sign}' is expected after {after}")

    def whole(self) -> Expr:
        if self.token.kind == "end":
            raise InputError("the expression is empty", where=self.where)
        result = self.sum()
        if self.token.kind != "end":
            hint = "; write * between factors" if self.token.text not in ")," else ""
            self.fail(f"'{self.token.text}' where an operator or the end is expected{hint}")
        if _height(result) > TALLEST:
            raise InputError(
                f"the expression chains more than {TALLEST} operations; split or shorten it",
                where=self.where,
            )
        return result

    def chain(self, part: Callable[[], Expr], *signs: str) -> Expr:
        result = part()
        while sign := self.accept(*signs):
            result = self.combine(_BINARY[sign.text], sign, result, part())
        return result

    def sum(self) -> Expr:
        return self.chain(self.product, "+", "-")

    def product(self) -> Expr:
        return self.chain(self.signed, "*", "/")

    def signed(self) -> Expr:
        self.depth += 1
        if self.depth > DEEPEST:
            self.fail(f"the expression is nested more than {DEEPEST} levels deep")
        if sign := self.accept("+", "-"):
            operand = self.signed()
            result = -operand if sign.text == "-" else operand
        else:
            result = self.power()
        self.depth -= 1
        return result

    def power(self) -> Expr:
        base = self.atom()
        if sign := self.accept("**"):
            return self.combine("pow", sign, base, self.signed())
        return base

    def atom(self) -> Expr:
        token = self.token
        if self.accept("("):
            inside = self.sum()
            self.expect(")", "a parenthesis")
            return inside
        if token.kind not in ("number", "name"):
            found = f"'{token.text}'" if token.text else "the end"
            self.fail(f"{found} where a number, a name or '(' is expected")
        self.at += 1
        if token.kind == "name":
            return self.call(token) if self.accept("(") else self.symbol(token)
        value = float(token.text)
        if not math.isfinite(value):
            self.fail(f"the number {token.text} is too large", token)
        return const(value)

    def symbol(self, token: _Token) -> Expr:
        if token.text in CALLABLE:
            self.fail(f"'{token.text}' is a function; write {token.text}(...)", token)
        return sym(token.text)

    def call(self, token: _Token) -> Expr:
        if token.text not in CALLABLE:
            near = did_you_mean(token.text, CALLABLE)
            self.fail(
                f"unknown function '{token.text}'{near}; allowed are {', '.join(CALLABLE)}", token
            )
        arguments = [self.sum()]
        while self.accept(","):
            arguments.append(self.sum())
        self.expect(")", f"the arguments of {token.text}")
        if token.text not in ("min", "max"):
            if len(arguments) != 1:
                self.fail(f"{token.text} takes one argument, {len(arguments)} were given", token)
            return self.combine(token.text, token, arguments[0])
        if len(arguments) < 2:
            self.fail(f"{token.text} takes two arguments or more, one was given", token)
        result = arguments[0]
        for other in arguments[1:]:
            result = self.combine(token.text, token, result, other)
        return result

    def combine(self, op: str, token: _Token, *args: Expr) -> Expr:
        if op == "div" and args[1] is ZERO:
            self.fail("division by zero", token)
        if all(a.op == "const" for a in args):
            result = apply(op, *args)
            if result.op != "const":
                shown = ", ".join(f"{a.value:g}" for a in args)
                self.fail(f"'{token.text}' has no finite value at {shown}", token)
            return result
        return apply(op, *args)


def _height(root: Expr) -> int:
    height: dict[Expr, int] = {}
    for node in ordered([root]):
        height[node] = 1 + max((height[a] for a in node.args), default=0)
    return height[root]
