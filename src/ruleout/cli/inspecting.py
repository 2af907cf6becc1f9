"""``ruleout inspect``."""

from __future__ import annotations

from pathlib import Path


def run_inspect(folder: Path, seed: int) -> None:
    """Print the variants, equations, loops and findings of the case in ``folder``."""
    from rich.console import Console

    from ruleout.case import read_case
    from ruleout.cli.terminal import print_findings, print_heading, print_sentences, print_wrapped
    from ruleout.inspection import inspect_case

    case = read_case(folder)
    inspection = inspect_case(case, seed)
    console = Console()
    print_wrapped(console, case.mechanism.title)
    for name, variant in inspection.variants.variants.items():
        print_heading(console, f"{name}: {', '.join(variant.edges) or 'no contested edge'}")
        equations = inspection.equations[name]
        for line in equations["text"]:
            print_wrapped(console, line, indent="    ", first="  ")
        print_sentences(console, equations["loops"])
    assumptions = {s for e in inspection.equations.values() for s in e["assumptions"]}
    if assumptions:
        print_heading(console, "Assumptions the rate laws rest on")
        print_sentences(console, sorted(assumptions))
    print_heading(console, "Findings before fitting")
    if len(inspection.findings):
        print_findings(console, inspection.findings)
    else:
        print_wrapped(console, "None.")
