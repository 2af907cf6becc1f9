"""A variant in words and formulas: equations, loops, assumptions."""

from __future__ import annotations

from ruleout.equations.assembly import Assembly
from ruleout.equations.conditions import without_basal
from ruleout.equations.laws import Laws
from ruleout.equations.types import Model
from ruleout.expressions import latex_name, to_latex, to_text
from ruleout.variants import Loop, Wiring
from ruleout.variants.loops import say_feedback

_SIGNS = {1: "Positive feedback", -1: "Negative feedback", 0: "Feedback of changing sign"}
_FEED_FORWARD = {1: "Coherent", -1: "Incoherent", 0: "Sign-changing"}


def _say_loop(loop: Loop, wiring: Wiring) -> str:
    edges = ", ".join(loop.edges)
    if loop.kind == "feedback":
        return f"{_SIGNS[loop.sign]}: {say_feedback(loop, wiring.edges)} (by {edges})."
    start, end = loop.nodes
    return f"{_FEED_FORWARD[loop.sign]} feed-forward from {start} to {end} (by {edges})."


def describe(model: Model) -> dict[str, list[str]]:
    """Return what a report prints about a model.

    Returns
    -------
    dict
        ``text`` and ``latex``: one equation per state, in textbook form (without the guards that
        keep integration safe below zero); ``loops`` and ``assumptions``: sentences.
    """
    wiring = model.variant.wiring
    plain = Assembly(wiring, without_basal(model), laws=Laws(guarded=False)).equations()
    return {
        "text": [f"d[{name}]/dt = {to_text(rhs)}" for name, rhs in plain.items()],
        "latex": [
            rf"\frac{{\mathrm{{d}}[{latex_name(name)}]}}{{\mathrm{{d}}t}} = {to_latex(rhs)}"
            for name, rhs in plain.items()
        ],
        "loops": [_say_loop(loop, wiring) for loop in model.variant.loops],
        "assumptions": list(model.assumptions),
    }
