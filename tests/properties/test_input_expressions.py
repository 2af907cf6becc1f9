"""Expressions: whatever is written, it is read, refused plainly, or means what Python means."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ruleout.errors import InputError
from ruleout.expressions import evaluate, parse, to_latex, to_text

NAMES = ("a", "b", "store", "time")
numbers = st.floats(0.01, 100.0).map(lambda x: float(f"{x:.3g}"))
leaves = st.one_of(numbers.map(repr), st.sampled_from(NAMES))


def _larger(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    return st.one_of(
        st.tuples(inner, st.sampled_from(["+", "-", "*", "/"]), inner).map(" ".join),
        st.tuples(inner, st.sampled_from(["2", "3", "0.5"])).map("**".join),
        inner.map("({})".format),
        inner.map("-{}".format),
        st.tuples(st.sampled_from(["exp", "sin", "cos", "tanh"]), inner).map(
            "{0[0]}({0[1]})".format
        ),
        st.tuples(st.sampled_from(["min", "max"]), inner, inner).map(
            "{0[0]}({0[1]},{0[2]})".format
        ),
    )


expressions = st.recursive(leaves, _larger, max_leaves=12)
values = st.fixed_dictionaries({name: st.floats(0.1, 3.0) for name in NAMES})


def _python(text: str, point: dict[str, float]) -> float | None:
    functions = {"exp": math.exp, "sin": math.sin, "cos": math.cos, "tanh": math.tanh}
    scope = {"__builtins__": {}, "min": min, "max": max, **functions, **point}
    try:
        result = eval(text, scope)  # the generated text holds nothing but arithmetic
    except (OverflowError, ZeroDivisionError):
        return None
    return result if isinstance(result, float) and math.isfinite(result) else None


@settings(deadline=None)
@given(expressions, values)
def test_an_expression_means_what_it_means_in_arithmetic(
    text: str, point: dict[str, float]
) -> None:
    expected = _python(text, point)
    try:
        found = float(evaluate([parse(text)], point)[0])
    except InputError:
        return
    if expected is not None and math.isfinite(found):
        # Differences of nearly equal terms may be folded in another order.
        scale = max(abs(expected), 1e-6)
        assert found == pytest.approx(expected, rel=1e-6, abs=1e-6 * scale)


@settings(deadline=None)
@given(expressions, values)
def test_printed_text_is_read_back_as_the_same_function(text: str, point: dict[str, float]) -> None:
    try:
        expression = parse(text)
        again = parse(to_text(expression))
    except InputError:
        return
    here, there = evaluate([expression, again], point)
    np.testing.assert_allclose(there, here, rtol=1e-9, equal_nan=True)


@settings(deadline=None)
@given(expressions)
def test_latex_has_balanced_braces(text: str) -> None:
    try:
        latex = to_latex(parse(text))
    except InputError:
        return
    assert latex.count("{") == latex.count("}")
    assert latex.count(r"\left(") == latex.count(r"\right)")


def _refusal(text: str) -> str:
    """Return why ``text`` is refused, or an empty string; anything else raised fails the test."""
    try:
        parse(text)
    except InputError as refused:
        return str(refused)
    return ""


@settings(deadline=None)
@given(st.text(max_size=200))
def test_any_text_is_read_or_refused_in_one_line(text: str) -> None:
    assert "\n" not in _refusal(text)


@settings(deadline=None)
@given(st.text(alphabet="ab(),+-*/.1 2emaxinp", max_size=400))
def test_text_that_looks_like_an_expression_is_read_or_refused(text: str) -> None:
    assert "\n" not in _refusal(text)
