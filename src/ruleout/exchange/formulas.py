"""Expressions as MathML of SBML Level 3 Version 2, and back."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from ruleout.exchange.library import libsbml
from ruleout.expressions import Expr, apply, const, sym


class NotUnderstoodError(Exception):
    """A construct that has no counterpart in our expressions; the message names it."""


def to_mathml(expression: Expr, names: Mapping[str, str]) -> Any:
    """Return ``expression`` as an ``ASTNode``.

    Parameters
    ----------
    expression : Expr
    names : mapping of symbol to SBML identifier
        For every symbol but ``time``.
    """
    lib = libsbml()
    kinds = {
        "neg": lib.AST_MINUS,
        "exp": lib.AST_FUNCTION_EXP,
        "log": lib.AST_FUNCTION_LN,
        "sin": lib.AST_FUNCTION_SIN,
        "cos": lib.AST_FUNCTION_COS,
        "tanh": lib.AST_FUNCTION_TANH,
        "add": lib.AST_PLUS,
        "sub": lib.AST_MINUS,
        "mul": lib.AST_TIMES,
        "div": lib.AST_DIVIDE,
        "pow": lib.AST_FUNCTION_POWER,
        "min": lib.AST_FUNCTION_MIN,
        "max": lib.AST_FUNCTION_MAX,
    }

    def number(value: float) -> Any:
        node = lib.ASTNode(lib.AST_REAL)
        node.setValue(value)
        return node

    def join(kind: int, *children: Any) -> Any:
        node = lib.ASTNode(kind)
        for child in children:
            node.addChild(child)
        return node

    def convert(node: Expr) -> Any:
        if node.op == "const":
            return number(node.value)
        if node.op == "sym":
            if node.name == "time":
                leaf = lib.ASTNode(lib.AST_NAME_TIME)
                leaf.setName("time")
            else:
                leaf = lib.ASTNode(lib.AST_NAME)
                leaf.setName(names[node.name])
            return leaf
        children = [convert(arg) for arg in node.args]
        if node.op == "sqrt":
            return join(lib.AST_FUNCTION_ROOT, number(2.0), *children)
        if node.op == "select":
            condition, yes, no = children
            positive = join(lib.AST_RELATIONAL_GT, condition, number(0.0))
            return join(lib.AST_FUNCTION_PIECEWISE, yes, positive, no)
        return join(kinds[node.op], *children)

    return convert(expression)


def steps(values: list[tuple[float, Any]]) -> Any:
    """Return a piecewise ``ASTNode``: each value holds from its time on, the first one before too.

    Parameters
    ----------
    values : list of (time, ASTNode)
        In order of time.
    """
    lib = libsbml()
    if len(values) == 1:
        return values[0][1]
    node = lib.ASTNode(lib.AST_FUNCTION_PIECEWISE)
    for time, value in reversed(values[1:]):
        node.addChild(value)
        node.addChild(from_time(time))
    node.addChild(values[0][1])
    return node


def from_time(time: float) -> Any:
    """Return the condition ``time >= t`` as an ``ASTNode``."""
    lib = libsbml()
    clock, limit = lib.ASTNode(lib.AST_NAME_TIME), lib.ASTNode(lib.AST_REAL)
    clock.setName("time")
    limit.setValue(time)
    node = lib.ASTNode(lib.AST_RELATIONAL_GEQ)
    node.addChild(clock)
    node.addChild(limit)
    return node


def from_mathml(node: Any, meaning: Callable[[str], Expr]) -> Expr:
    """Return an ``ASTNode`` as an expression.

    Parameters
    ----------
    node : ASTNode
    meaning : callable
        What an identifier stands for; may raise :class:`NotUnderstoodError`.

    Raises
    ------
    NotUnderstoodError
        Where the formula uses what our expressions do not have.
    """
    lib = libsbml()
    kind = node.getType()
    if kind in (lib.AST_INTEGER, lib.AST_REAL, lib.AST_REAL_E, lib.AST_RATIONAL):
        return const(float(node.getValue()))
    if kind == lib.AST_NAME:
        return meaning(node.getName())
    if kind == lib.AST_NAME_TIME:
        return sym("time")
    constants = {lib.AST_CONSTANT_E: 2.718281828459045, lib.AST_CONSTANT_PI: 3.141592653589793}
    if kind in constants:
        return const(constants[kind])
    args = [from_mathml(node.getChild(i), meaning) for i in range(node.getNumChildren())]
    return _operation(node, kind, args)


def _operation(node: Any, kind: int, args: list[Expr]) -> Expr:
    lib = libsbml()
    chains = {
        lib.AST_PLUS: ("add", 0.0),
        lib.AST_TIMES: ("mul", 1.0),
        lib.AST_FUNCTION_MIN: ("min", None),
        lib.AST_FUNCTION_MAX: ("max", None),
    }
    if kind in chains:
        op, empty = chains[kind]
        if not args and empty is not None:
            return const(empty)
        if args:
            result = args[0]
            for arg in args[1:]:
                result = apply(op, result, arg)
            return result
    if kind == lib.AST_MINUS and len(args) == 1:
        return -args[0]
    two = {
        lib.AST_MINUS: "sub",
        lib.AST_DIVIDE: "div",
        lib.AST_POWER: "pow",
        lib.AST_FUNCTION_POWER: "pow",
    }
    if kind in two and len(args) == 2:
        return apply(two[kind], *args)
    one = {
        lib.AST_FUNCTION_EXP: "exp",
        lib.AST_FUNCTION_LN: "log",
        lib.AST_FUNCTION_SIN: "sin",
        lib.AST_FUNCTION_COS: "cos",
        lib.AST_FUNCTION_TANH: "tanh",
    }
    if kind in one and len(args) == 1:
        return apply(one[kind], *args)
    if kind == lib.AST_FUNCTION_LOG and args:
        base = apply("log", args[0]) if len(args) == 2 else apply("log", const(10.0))
        return apply("log", args[-1]) / base
    if kind == lib.AST_FUNCTION_ROOT and args:
        degree = args[0] if len(args) == 2 else const(2.0)
        if degree is const(2.0):
            return apply("sqrt", args[-1])
        return args[-1] ** (1.0 / degree)
    name = node.getName() or libsbml().formulaToL3String(node)
    raise NotUnderstoodError(f"'{name}' in a formula")
