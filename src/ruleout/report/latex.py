"""``table.tex``: the falsification table for a paper."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any, Final

import pandas as pd

from ruleout.report.tables import option_words, present_parts, records
from ruleout.report.words import (
    VERDICTS,
    by_verdict,
    check_words,
    number_text,
    p_text,
)
from ruleout.verdicts.types import Judgement

LONG: Final = 40
"""Rows from which the table is one that may run over pages."""

_ESCAPES: Final = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "$": r"\$",
    "&": r"\&",
    "#": r"\#",
    "%": r"\%",
    "_": r"\_\allowbreak{}",
    "^": r"\textasciicircum{}",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    '"': "''",
    "–": "--",
}


def escape(text: str) -> str:
    """Return text with everything LaTeX would read as a command made harmless.

    Characters that a plain class cannot set become question marks; LaTeX sets Latin ones.
    """
    escaped = "".join(_ESCAPES.get(c, c) for c in text)
    return re.sub(r"[^\x20-\x7e\u00a0-\u017f]", "?", escaped)


def _cells(row: Mapping[str, Any], words: Mapping[str, Mapping[str, str]]) -> list[str]:
    present = ", ".join(map(escape, present_parts(row["choices"], words))) or "none"
    loo = "--"
    if pd.notna(row["loo_difference"]):
        loo = f"${number_text(row['loo_difference'], 2)} \\pm {number_text(row['loo_se'], 2)}$"
    why = escape(check_words(row["decisive_check"])) if row["decisive_check"] else "--"
    return [
        escape(row["variant"]),
        present,
        str(row["free_parameters"]),
        p_text(row["p_value"]).replace("–", "--"),
        loo,
        VERDICTS[row["verdict"]],
        why,
    ]


def latex_table(judgement: Judgement) -> str:
    r"""Return the table of variants for ``\input``, the kept first.

    It needs ``\usepackage{booktabs}``, and ``longtable`` from ``LONG`` rows on.
    """
    rows = by_verdict(judgement.variants)
    words = option_words(rows["choices"])
    lines = [" & ".join(_cells(row, words)) + r" \\" for row in records(rows)]
    head = r"Variant & Contested, present & Par. & $p$ & $\Delta$LOO & Verdict & Decided by \\"
    columns = (
        r"l>{\raggedright\arraybackslash}p{0.27\linewidth}rrrl"
        r">{\raggedright\arraybackslash}p{0.2\linewidth}"
    )
    caption = (
        f"{escape(str(judgement.meta['title']))}: wirings judged against the data at "
        f"$\\alpha = {judgement.meta['alpha']:g}$. Par.: free parameters; $p$: calibrated "
        r"posterior predictive check; $\Delta$LOO: difference in expected log predictive density "
        "(PSIS-LOO) from the best variant, with standard error. Kept means not ruled out."
    )
    long = len(rows) > LONG
    needs = "array, booktabs" + (", longtable" if long else "")
    start = f"% Needs \\usepackage{{{needs}}}.\n"
    if long:
        body = [
            rf"\begin{{longtable}}{{@{{}}{columns}@{{}}}}",
            rf"\caption{{{caption}}}\label{{tab:variants}}\\",
            r"\toprule",
            head,
            r"\midrule",
            r"\endfirsthead",
            r"\toprule",
            head,
            r"\midrule",
            r"\endhead",
            r"\bottomrule",
            r"\endlastfoot",
            *lines,
            r"\end{longtable}",
        ]
        return start + "{\\small\n" + "\n".join(body) + "\n}\n"
    body = [
        r"\begin{table}[htbp]",
        r"\small",
        rf"\caption{{{caption}}}\label{{tab:variants}}",
        rf"\begin{{tabular}}{{@{{}}{columns}@{{}}}}",
        r"\toprule",
        head,
        r"\midrule",
        *lines,
        r"\bottomrule",
        r"\end{tabular}",
        r"\end{table}",
    ]
    return start + "\n".join(body) + "\n"
