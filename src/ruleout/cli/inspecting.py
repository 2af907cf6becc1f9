"""``ruleout inspect``."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Final

from ruleout.errors import InputError, did_you_mean

MOST_IN_FULL: Final = 16
"""Variants whose equations are printed when none is asked for by name."""


def run_inspect(folder: Path, seed: int, wanted: list[str]) -> None:
    """Print the variants, equations, loops and findings of the case in ``folder``.

    Parameters
    ----------
    folder : Path
    seed : int
        Root of the prior draws that the findings rest on.
    wanted : list of str
        Variants whose equations to print; by default all, or none where they are many.
    """
    from rich.console import Console

    from ruleout.case import read_case
    from ruleout.cli.terminal import print_findings, print_heading, print_sentences, print_wrapped
    from ruleout.inspection import inspect_case

    case = read_case(folder)
    inspection = inspect_case(case, seed)
    console = Console()
    variants = inspection.variants.variants
    _check_wanted(wanted, variants)
    print_wrapped(console, case.mechanism.title)
    if len(variants) > MOST_IN_FULL and not wanted:
        print_heading(console, f"{len(variants)} variants")
        for name, variant in variants.items():
            print_wrapped(console, f"{name}: {', '.join(variant.edges) or 'no contested edge'}")
        print_wrapped(console, "Give --variant NAME to see the equations of one.")
    for name in wanted or (variants if len(variants) <= MOST_IN_FULL else ()):
        present = ", ".join(variants[name].edges) or "no contested edge"
        print_heading(console, f"{name}: {present}")
        equations = inspection.equations[name]
        for line in equations["text"]:
            print_wrapped(console, line, indent="    ", first="  ")
        print_sentences(console, equations["loops"])
    assumptions = [s for e in inspection.equations.values() for s in e["assumptions"]]
    if assumptions:
        print_heading(console, "Assumptions the rate laws rest on")
        print_sentences(console, dict.fromkeys(assumptions))
    print_heading(console, "Findings before fitting")
    if len(inspection.findings):
        print_findings(console, inspection.findings)
    else:
        print_wrapped(console, "None.")


def _check_wanted(wanted: Iterable[str], variants: Iterable[str]) -> None:
    known = list(variants)
    for name in wanted:
        if name not in known:
            raise InputError(
                f"there is no variant '{name}'{did_you_mean(name, known)}; they are "
                f"{known[0]} to {known[-1]}",
                where="--variant",
            )
