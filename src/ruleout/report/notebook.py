"""How a judgement shows itself in a notebook, without knowing of it."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Any

from ruleout.report.tables import option_words, present_parts, records
from ruleout.report.words import KEPT_MEANS, by_verdict, headline

if TYPE_CHECKING:
    from ruleout.verdicts.types import Judgement

MOST_ROWS = 60
"""Variants shown; a notebook is no place for hundreds."""


def judgement_html(judgement: Judgement) -> str:
    """Return claims and variants of a judgement as HTML for a notebook's output."""
    from ruleout.report.html import environment

    words = option_words(judgement.variants["choices"])
    rows = [
        {**row, "present": present_parts(row["choices"], words)}
        for row in records(by_verdict(judgement.variants))
    ]
    template = environment().get_template("notebook.html")
    return template.render(
        meta=judgement.meta,
        headline=headline(judgement.variants),
        claims=records(judgement.claims),
        rows=rows[:MOST_ROWS],
        hidden=max(0, len(rows) - MOST_ROWS),
        kept_means=KEPT_MEANS,
    )


def show_in_notebooks(shell: Any = None) -> bool:
    """Tell a running notebook how to show a judgement; do nothing outside of one.

    Results carry no drawing methods, so the notebook's formatter is told instead.

    Parameters
    ----------
    shell : object, optional
        An IPython shell; the running one by default.

    Returns
    -------
    bool
        Whether there was a notebook to tell.
    """
    if shell is None:
        ipython = sys.modules.get("IPython")
        shell = ipython.get_ipython() if ipython is not None else None
    if shell is None:
        return False
    formatter = shell.display_formatter.formatters["text/html"]
    formatter.for_type_by_name("ruleout.verdicts.types", "Judgement", judgement_html)
    return True
