"""A judgement as text that is readable at 80 columns and without colour."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING, Any, Final

from rich.console import Console
from rich.text import Text

from ruleout.report.tables import option_words, present_parts, records
from ruleout.report.words import (
    CLAIM_VERDICTS,
    KEPT_MEANS,
    VERDICTS,
    by_verdict,
    headline,
    p_text,
    split_names,
)

if TYPE_CHECKING:
    import pandas as pd

    from ruleout.verdicts.types import Judgement

STYLES: Final = {
    "kept": "bold blue",
    "ruled_out": "bold red",
    "not_judged": "bold yellow",
    "needed": "bold",
    "excluded": "bold",
    "nothing_fits": "bold red",
}
REASONS_SHOWN: Final = 24
"""Ruled-out variants listed with their reasons; more would hide the rest of the table."""


def _width(console: Console) -> int:
    return max(40, min(console.width, 100))


def print_wrapped(console: Console, text: str, indent: str = "", first: str | None = None) -> None:
    """Print a paragraph, its first line beginning with ``first``."""
    lines = textwrap.wrap(
        text,
        _width(console),
        initial_indent=indent if first is None else first,
        subsequent_indent=indent,
        break_on_hyphens=False,
    )
    for line in lines:
        console.print(line, markup=False, highlight=False, soft_wrap=True)


def print_heading(console: Console, text: str) -> None:
    """Print a heading, underlined so that it stands out without colour."""
    console.print()
    console.print(Text(text, style="bold"))
    console.print("-" * len(text), markup=False, highlight=False)


def print_claims(console: Console, claims: pd.DataFrame) -> None:
    """Print each claim's verdict and sentence."""
    for row in records(claims):
        words = CLAIM_VERDICTS[row["verdict"]]
        line = Text()
        line.append(words.upper(), style=STYLES.get(row["verdict"], ""))
        line.append(f"  {row['claim']}")
        console.print(line, soft_wrap=True)
        text = row["text"].rstrip(".")
        print_wrapped(console, f"{text}. {row['statement']}" if text else row["statement"], "    ")


def print_variants(console: Console, variants: pd.DataFrame) -> None:
    """Print one line per variant with its verdict, and the reason under it."""
    name_width = max(7, *(len(v) for v in variants["variant"]))
    head = f"{'variant':<{name_width}}  {'verdict':<10}  {'p':>7}  {'free':>4}  contested, present"
    console.print(Text(head, style="bold"), soft_wrap=True)
    words = option_words(variants["choices"])
    left = REASONS_SHOWN
    for row in records(by_verdict(variants)):
        ruled_out = row["verdict"] == "ruled_out"
        if ruled_out and left == 0:
            break
        left -= ruled_out
        _print_variant(console, row, present_parts(row["choices"], words), name_width)
    hidden = int((variants["verdict"] == "ruled_out").sum()) - REASONS_SHOWN
    if hidden > 0:
        print_wrapped(console, f"... and {hidden} more ruled out; variants.csv has them all.")


def _print_variant(
    console: Console, row: Mapping[str, Any], present: list[str], name_width: int
) -> None:
    verdict = row["verdict"]
    before = f"{row['variant']:<{name_width}}  "
    after = f"  {p_text(row['p_value']):>7}  {row['free_parameters']:>4}  "
    used = len(before) + 10 + len(after)
    wrapped = textwrap.wrap(
        ", ".join(present) or "none", max(_width(console) - used, 20), break_on_hyphens=False
    )
    line = Text(before)
    line.append(f"{VERDICTS[verdict]:<10}", style=STYLES[verdict])
    line.append(after + wrapped[0])
    console.print(line, soft_wrap=True)
    for more in wrapped[1:]:
        console.print(" " * used + more, markup=False, highlight=False, soft_wrap=True)
    indent = " " * (name_width + 2)
    if row["reason"]:
        print_wrapped(console, row["reason"], indent=indent)
    flags = split_names(row["flags"])
    if flags:
        print_wrapped(console, f"note: {'; '.join(flags)}", indent=indent)


def print_findings(console: Console, findings: pd.DataFrame) -> None:
    """Print findings, those that concern every variant first, alike ones once."""
    for (message, remedy), rows in findings.groupby(["message", "remedy"], sort=False):
        names = [v for v in rows["variant"] if v]
        who = f"{', '.join(names)}: " if names else ""
        print_wrapped(console, f"{who}{message}", indent="  ", first="- ")
        if remedy:
            print_wrapped(console, str(remedy), indent="     ", first="  -> ")


def print_sentences(console: Console, sentences: Iterable[str]) -> None:
    """Print sentences as a list."""
    for sentence in sentences:
        print_wrapped(console, sentence, indent="  ", first="- ")


def print_judgement(console: Console, judgement: Judgement) -> None:
    """Print claims, variants and what the verdicts mean."""
    console.print()
    console.print(Text(str(judgement.meta["title"]), style="bold"))
    print_wrapped(console, headline(judgement.variants))
    if len(judgement.claims):
        print_heading(console, "Claims")
        print_claims(console, judgement.claims)
    print_heading(console, "Variants")
    print_variants(console, judgement.variants)
    general = judgement.findings[judgement.findings["variant"] == ""]
    if len(general):
        print_heading(console, "What to know about this case")
        print_findings(console, general)
    print_heading(console, "How to read this")
    print_wrapped(console, KEPT_MEANS)
    print_sentences(console, judgement.meta["conditions_of_guarantee"])
