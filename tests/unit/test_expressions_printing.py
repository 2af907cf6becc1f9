"""Expressions as text and as LaTeX."""

from __future__ import annotations

import pytest

from ruleout.expressions import latex_name, parse, to_latex, to_text


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("k*store/(half+store)", "k * store / (half + store)"),
        ("a-(b-c)", "a - (b - c)"),
        ("a/(b*c)", "a / (b * c)"),
        ("-(a+b)*c", "-((a + b) * c)"),
        ("x**2", "x ** 2"),
        ("(x+1)**2", "(x + 1) ** 2"),
        ("(a**b)**c", "(a ** b) ** c"),
        ("(-3)**x", "(-3) ** x"),
        ("1e-7*x", "1e-07 * x"),
        ("2.0*x", "2 * x"),
        ("min(a, b)", "min(a, b)"),
    ],
)
def test_text_has_only_the_parentheses_it_needs(text: str, expected: str) -> None:
    assert to_text(parse(text)) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("max(x, 0)", "x"),
        ("max(0, x)", "x"),
        ("max(x, 1e-12) ** h", "x ** h"),
        ("max(1 - x, 0)", "1 - x"),
        ("a / (k + max(1 - x, 0))", "a / (k + (1 - x))"),
    ],
)
def test_numerical_guards_on_amounts_are_printed_plainly(text: str, expected: str) -> None:
    assert to_text(parse(text)) == expected


@pytest.mark.parametrize(
    "text", ["max(1 - volume / cap, 0)", "max(x - k, 0)", "max(e.k, 0)", "max(x, 0.5)"]
)
def test_a_limit_with_a_meaning_is_kept(text: str) -> None:
    assert to_text(parse(text)) == text


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("a / b", r"\frac{\mathrm{a}}{\mathrm{b}}"),
        ("a * (b + c)", r"\mathrm{a} \, \left(\mathrm{b} + \mathrm{c}\right)"),
        ("x ** h", r"{\mathrm{x}}^{\mathrm{h}}"),
        ("(a + b) ** 2", r"{\left(\mathrm{a} + \mathrm{b}\right)}^{2}"),
        ("sqrt(a)", r"\sqrt{\mathrm{a}}"),
        ("exp(-a)", r"\exp\left(-\mathrm{a}\right)"),
        ("2e-5 * time", r"2 \cdot 10^{-5} \, t"),
        ("a - (b - c)", r"\mathrm{a} - \left(\mathrm{b} - \mathrm{c}\right)"),
        ("sensor.loss_rate", r"\mathrm{loss\_rate}_{\mathrm{sensor}}"),
    ],
)
def test_latex(text: str, expected: str) -> None:
    assert to_latex(parse(text)) == expected


def test_latex_takes_names_of_the_callers() -> None:
    assert to_latex(parse("a + e.k"), {"e.k": "k_1"}) == r"\mathrm{a} + k_1"
    assert latex_name("time") == "t"
