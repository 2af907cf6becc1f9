"""What the reader of expressions takes, what it makes of it, and what it refuses."""

from __future__ import annotations

import math

import pytest

from ruleout.errors import InputError
from ruleout.expressions import evaluate, parse, sym, symbols

VALUES = {"a": 2.0, "b": 3.0, "c": 0.5, "time": 4.0, "node.rate": 5.0}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1", 1.0),
        (".5", 0.5),
        ("2.", 2.0),
        ("1.5e-3", 1.5e-3),
        ("2E2", 200.0),
        ("a + b * c", 3.5),
        ("(a + b) * c", 2.5),
        ("a - b - c", -1.5),
        ("a / b / c", 2 / 3 / 0.5),
        ("-a ** 2", -4.0),
        ("a ** -b", 0.125),
        ("a ** b ** c", 2 ** (3**0.5)),
        ("2 ** 3 ** 2", 512.0),
        ("--a", 2.0),
        ("+a", 2.0),
        ("a * -b", -6.0),
        ("min(a, b, c)", 0.5),
        ("max(a, b)", 3.0),
        ("exp(log(a))", 2.0),
        ("sqrt(a * a)", 2.0),
        ("sin(a) ** 2 + cos(a) ** 2", 1.0),
        ("tanh(c)", math.tanh(0.5)),
        ("node.rate * time", 20.0),
        ("\ta\n+ b ", 5.0),
    ],
)
def test_value_follows_the_usual_rules_of_arithmetic(text: str, expected: float) -> None:
    assert evaluate([parse(text)], VALUES)[0] == pytest.approx(expected, rel=1e-14)


def test_names_become_symbols_as_they_stand() -> None:
    assert symbols(parse("k * store + e.k + time")) == {"k", "store", "e.k", "time"}
    assert parse("kinase") is sym("kinase")


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "empty"),
        ("   ", "empty"),
        ("a ^ 2", "write ** for powers"),
        ("2a", "write * between factors"),
        ("a b", "write * between factors"),
        ("(a", "')' is expected"),
        ("a)", "')' where an operator or the end"),
        ("a +", "the end where a number"),
        ("exp", "write exp(...)"),
        ("expp(a)", "did you mean 'exp'"),
        ("eval(a)", "unknown function 'eval'"),
        ("sin(a, b)", "takes one argument, 2"),
        ("max(a)", "two arguments or more"),
        ("a / 0", "division by zero"),
        ("a / (1 - 1)", "division by zero"),
        ("a / (b - b)", "division by zero"),
        ("0 * (1 / 0)", "division by zero"),
        ("log(0)", "no finite value"),
        ("sqrt(-1)", "no finite value"),
        ("(-8) ** 0.5", "no finite value"),
        ("1e999", "too large"),
        ("exp(1000)", "no finite value"),
        ("a = b", "'=' is not allowed"),
        ("a[0]", "'[' is not allowed"),
        ("a; b", "';' is not allowed"),
        ("__import__('os')", "is not allowed"),
        ("lambda: 1", "':' is not allowed"),
        ("().__class__", "'.' is not allowed"),
        ("a if b else c", "where an operator"),
        ("1_000", "neither a number nor a name"),
        ("0x10", "neither a number nor a name"),
        ("µ", "is not allowed"),
        ("(" * 60 + "a" + ")" * 60, "nested more than 50"),
        ("-" * 60 + "a", "nested more than 50"),
        ("a ** " * 60 + "a", "nested more than 50"),
        ("sin(" * 60 + "a" + ")" * 60, "nested more than 50"),
        ("+".join("a" * 300), "more than 200 operations"),
        ("a" * 2001, "at most 2000"),
    ],
)
def test_refusal_says_what_was_given_and_what_to_do(text: str, said: str) -> None:
    with pytest.raises(InputError) as refused:
        parse(text, where="mechanism.toml:7: edge.x.rate")
    message = str(refused.value)
    assert message.startswith("mechanism.toml:7: edge.x.rate: ")
    assert said in message
    assert "\n" not in message
    assert len(message) < 300


def test_column_points_at_the_slip() -> None:
    with pytest.raises(InputError, match="at character 5 of"):
        parse("a + $")
