"""``power.tex``: a rehearsal's rates for a paper or a proposal."""

from __future__ import annotations

from ruleout.rehearsal import AS_GIVEN, Rehearsal
from ruleout.report.latex import escape
from ruleout.report.rehearsal_words import rate_text
from ruleout.report.tables import records


def latex_power(rehearsal: Rehearsal, design: str = AS_GIVEN) -> str:
    r"""Return how often each variant was ruled out, by true variant, for ``\input``.

    It needs ``\usepackage{booktabs}``.
    """
    meta = rehearsal.meta
    table = rehearsal.power[rehearsal.power["design"] == design]
    rivals = list(dict.fromkeys(table["rival"]))
    lines = [
        " & ".join([escape(str(truth)), *(rate_text(row) for row in records(rows))]) + r" \\"
        for truth, rows in table.groupby("truth", sort=False)
    ]
    caption = (
        f"{escape(str(meta['title']))}: rate at which each wiring (columns) is ruled out at "
        f"$\\alpha = {meta['alpha']:g}$ when another (rows) is true, in {meta['data_sets']} "
        "simulated data sets per row. In brackets: wirings that are or contain the true one."
    )
    return "\n".join(
        [
            r"% Needs \usepackage{booktabs}.",
            r"\begin{table}[htbp]",
            r"\small",
            rf"\caption{{{caption}}}\label{{tab:power}}",
            rf"\begin{{tabular}}{{@{{}}l{'r' * len(rivals)}@{{}}}}",
            r"\toprule",
            " & ".join(["True", *map(escape, map(str, rivals))]) + r" \\",
            r"\midrule",
            *lines,
            r"\bottomrule",
            r"\end{tabular}",
            r"\end{table}",
            "",
        ]
    )
