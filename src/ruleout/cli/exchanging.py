"""``ruleout export`` and ``ruleout import``."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Final

import typer

from ruleout.cli.guard import guarded
from ruleout.errors import InputError, did_you_mean

if TYPE_CHECKING:
    from ruleout.case import Case

WHOLE: Final = "mechanism"
"""Name of the graph with everything in dispute."""


class Format(StrEnum):
    """Standards a variant can be written in."""

    sbml = "sbml"
    graphml = "graphml"


def register(app: typer.Typer) -> None:
    """Add both commands to ``app``."""
    app.command(name="export")(_export)
    app.command(name="import")(_import)


def _export(
    source: Annotated[
        Path,
        typer.Argument(
            metavar="CASE_OR_RUN", help="Folder of a case or of a finished run.", show_default=False
        ),
    ],
    out: Annotated[Path, typer.Option(metavar="DIR", help="Folder for the files.")],
    form: Annotated[Format, typer.Option("--format", help="Standard to write.")] = Format.sbml,
    variant: Annotated[
        list[str] | None,
        typer.Option(
            metavar="NAME", help="Only this variant; may be repeated.", show_default="all"
        ),
    ] = None,
) -> None:
    """Write the variants as SBML, one file per condition, or as GraphML."""
    with guarded():
        written = run_export(source, out, form, variant or [])
        typer.echo(f"{out}: {written} files written.")


def _import(
    file: Annotated[
        Path,
        typer.Argument(
            metavar="FILE",
            help="A reaction network in SBML (.xml, .sbml) or a graph in GraphML (.graphml).",
            show_default=False,
        ),
    ],
    out: Annotated[Path, typer.Option(metavar="DIR", help="Folder for mechanism.toml.")],
) -> None:
    """Make a mechanism.toml to start from out of SBML or GraphML."""
    with guarded():
        path = run_import(file, out)
        typer.echo(f"{path}: written. Mark what is in dispute with contested = true, then add")
        typer.echo("experiments.toml and data.csv; `ruleout new DIR` makes some to copy from.")


def run_export(source: Path, out: Path, form: Format, wanted: list[str]) -> int:
    """Write variants of a case, or of a run at their best fits; return the number of files.

    Raises
    ------
    InputError
        If ``source`` is neither, a variant is unknown or ``out`` cannot be written.
    """
    from ruleout.exchange import write_graphml, write_sbml
    from ruleout.variants import expand

    case, fitted = _open(source)
    known = expand(case.mechanism, case.experiments).variants
    for name in wanted:
        if name not in known:
            raise InputError(
                f"there is no variant '{name}'{did_you_mean(name, known)}; they are "
                f"{', '.join(known)}",
                where="--variant",
            )
    names = wanted or list(known)
    _make(out)
    if form is Format.graphml:
        for name in names:
            write_graphml(case, name, out / f"{name}.graphml")
        write_graphml(case, None, out / f"{WHOLE}.graphml")
        return len(names) + 1
    count = 0
    for name in names:
        for condition, file in _files(case, name):
            write_sbml(case, name, out / file, fitted.get(name), condition)
            count += 1
    return count


def run_import(file: Path, out: Path) -> Path:
    """Write the mechanism in ``file`` as ``mechanism.toml``; return its path.

    Raises
    ------
    InputError
        If the file cannot be understood, or ``out`` already holds a mechanism.
    """
    from ruleout.exchange import import_sbml, read_graphml

    readers = {".graphml": read_graphml, ".xml": import_sbml, ".sbml": import_sbml}
    reader = readers.get(file.suffix.lower())
    if reader is None:
        raise InputError(
            f"'{file.suffix}' is no known ending; give SBML (.xml, .sbml) or GraphML (.graphml)",
            where=str(file),
        )
    text = reader(file)
    _make(out)
    path = out / "mechanism.toml"
    try:
        with path.open("x", encoding="utf-8") as target:
            target.write(text)
    except FileExistsError as error:
        raise InputError(
            "this file is there already; give another folder with --out", where=str(path)
        ) from error
    except OSError as error:
        raise InputError(
            f"this file cannot be written ({error.strerror})", where=str(path)
        ) from error
    return path


def _open(source: Path) -> tuple[Case, Mapping[str, Mapping[str, float]]]:
    """Return a case and, from a run, the best fit of every variant that was fitted."""
    if (source / "verdict.json").exists():
        from ruleout.store import load_judgement

        judgement, case = load_judgement(source)
        free = judgement.parameters[judgement.parameters["prior_low"].notna()]
        return case, {
            str(variant): dict(zip(rows["parameter"], rows["best"], strict=True))
            for variant, rows in free.groupby("variant", sort=False)
        }
    from ruleout.case import read_case

    return read_case(source, require_data=False), {}


def _make(out: Path) -> None:
    try:
        out.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(
            f"this folder cannot be made ({error.strerror}); give another one with --out",
            where=str(out),
        ) from error


def _files(case: Case, variant: str) -> Iterator[tuple[str | None, str]]:
    """Yield the conditions, rest first, each with a file name of its own."""
    yield None, f"{variant}.xml"
    taken = {f"{variant}.xml"}
    for condition in case.experiments.conditions:
        # A condition may be called anything, '../x' included.
        plain = f"{variant}__{re.sub(r'[^A-Za-z0-9_-]', '_', condition)}"
        while f"{plain}.xml".lower() in taken:
            plain += "_"
        taken.add(f"{plain}.xml".lower())
        yield condition, f"{plain}.xml"
