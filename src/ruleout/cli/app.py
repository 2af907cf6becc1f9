"""Commands and their options; everything slow is imported when its command runs."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from ruleout import __version__
from ruleout.cli.exchanging import register as register_exchange
from ruleout.cli.guard import guarded

app = typer.Typer(
    name="ruleout",
    help="Which wirings of a biological mechanism do the data rule out?",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)


class Effort(StrEnum):
    """How much computing a judgement may cost."""

    quick = "quick"
    standard = "standard"
    thorough = "thorough"


class Log(StrEnum):
    """How progress is written."""

    text = "text"
    json = "json"


CaseFolder = Annotated[
    Path,
    typer.Argument(
        metavar="CASE",
        help="Folder with mechanism.toml, experiments.toml and data.csv.",
        show_default=False,
    ),
]
Seed = Annotated[int, typer.Option(min=0, help="Root of every random number of the run.")]
LogOption = Annotated[Log, typer.Option("--log", help="Progress as text or as JSON lines.")]


def _show_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"ruleout {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    _version: Annotated[
        bool,
        typer.Option("--version", callback=_show_version, is_eager=True, help="Show the version."),
    ] = False,
) -> None:
    pass


@app.command()
def judge(
    case: CaseFolder,
    out: Annotated[
        Path | None,
        typer.Option(
            metavar="DIR",
            help="Folder for the results.",
            show_default="reports/CASE",
        ),
    ] = None,
    seed: Seed = 1,
    workers: Annotated[
        int | None,
        typer.Option(min=1, help="Processes to use.", show_default="all cores"),
    ] = None,
    scheduler: Annotated[
        str | None,
        typer.Option(
            metavar="ADDRESS",
            help="Compute on the Dask cluster with this scheduler, such as tcp://host:8786.",
            show_default=False,
        ),
    ] = None,
    effort: Annotated[Effort, typer.Option(help="How much computing to spend.")] = Effort.standard,
    alpha: Annotated[
        float, typer.Option(help="Chance of ruling out a true variant that is accepted.")
    ] = 0.05,
    log: LogOption = Log.text,
) -> None:
    """Fit every variant of a case, check each and say which ones the data rule out."""
    from ruleout.cli.judging import run_judge

    out = out or Path("reports") / case.resolve().name
    kept = f"Finished stages are kept in {out}; give the same command again to go on from there."
    with guarded(kept):
        status = run_judge(
            case,
            out=out,
            seed=seed,
            workers=workers,
            effort=effort.value,
            alpha=alpha,
            as_json=log is Log.json,
            scheduler=scheduler,
        )
        raise typer.Exit(status)


@app.command()
def rehearse(
    case: CaseFolder,
    truth: Annotated[
        list[str] | None,
        typer.Option(
            metavar="VARIANT",
            help="Simulate from this one; may be given repeatedly.",
            show_default="all",
        ),
    ] = None,
    datasets: Annotated[
        int, typer.Option(min=1, help="Data sets to simulate from each true variant.")
    ] = 50,
    out: Annotated[
        Path | None,
        typer.Option(
            metavar="DIR", help="Folder for the results.", show_default="reports/CASE_rehearsal"
        ),
    ] = None,
    run: Annotated[
        Path | None,
        typer.Option(
            metavar="RUN",
            help="Folder of a finished run that tells the parameters, where there are data.",
            show_default="reports/CASE, else judged first",
        ),
    ] = None,
    seed: Seed = 1,
    workers: Annotated[
        int | None,
        typer.Option(min=1, help="Processes to use.", show_default="all cores"),
    ] = None,
    effort: Annotated[Effort, typer.Option(help="How much computing to spend.")] = Effort.quick,
    alpha: Annotated[
        float, typer.Option(help="Chance of ruling out a true variant that is accepted.")
    ] = 0.05,
    vary: Annotated[
        str | None,
        typer.Option(
            metavar="WHAT=VALUES",
            help="Also rehearse replicates=1,2,3,5, noise=0.5,1,2 or times=6,12,24.",
            show_default=False,
        ),
    ] = None,
    log: LogOption = Log.text,
) -> None:
    """Tell what a case's experiments could rule out, and how often the truth would be."""
    from ruleout.cli.rehearsing import run_rehearse

    out = out or Path("reports") / f"{case.resolve().name}_rehearsal"
    kept = f"Judged data sets are kept in {out}; give the same command again to go on from there."
    with guarded(kept):
        status = run_rehearse(
            case,
            out=out,
            run=run,
            truths=truth or [],
            data_sets=datasets,
            seed=seed,
            workers=workers,
            effort=effort.value,
            alpha=alpha,
            vary=vary,
            as_json=log is Log.json,
        )
        raise typer.Exit(status)


@app.command()
def inspect(
    case: CaseFolder,
    seed: Seed = 1,
    variant: Annotated[
        list[str] | None,
        typer.Option(metavar="NAME", help="Show this one's equations; may be given repeatedly."),
    ] = None,
) -> None:
    """Show a case's variants, equations, loops and what to mend before fitting."""
    from ruleout.cli.inspecting import run_inspect

    with guarded():
        run_inspect(case, seed, variant or [])


@app.command()
def survey(
    family: Annotated[
        Path, typer.Argument(metavar="FAMILY", help="A family file (TOML).", show_default=False)
    ],
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="Folder for the results.", show_default="reports/FAMILY"),
    ] = None,
    seed: Seed = 1,
    sets: Annotated[
        int | None,
        typer.Option(min=1, help="Parameter sets per topology.", show_default="as in FAMILY"),
    ] = None,
    sample: Annotated[
        int | None,
        typer.Option(min=1, help="Survey this many topologies at random.", show_default="all"),
    ] = None,
    workers: Annotated[
        int | None, typer.Option(min=1, help="Processes to use.", show_default="all cores")
    ] = None,
    log: LogOption = Log.text,
) -> None:
    """Ask which wirings of a family show a behaviour, and what they have in common."""
    from ruleout.cli.judging import cores
    from ruleout.cli.surveying import run_survey

    out = out or Path("reports") / family.stem
    kept = f"Finished topologies are kept in {out}; give the same command again to go on."
    with guarded(kept):
        run_survey(
            family,
            out=out,
            seed=seed,
            sets=sets,
            sample=sample,
            workers=workers or cores(),
            as_json=log is Log.json,
        )


@app.command()
def new(
    folder: Annotated[
        Path, typer.Argument(metavar="DIR", help="Folder to make.", show_default=False)
    ],
) -> None:
    """Write a small commented case to start from."""
    from ruleout.cli.starting import write_new_case

    with guarded():
        write_new_case(folder)


@app.command()
def report(
    run: Annotated[
        Path, typer.Argument(metavar="RUN", help="Folder of a finished run.", show_default=False)
    ],
    style: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Matplotlib style file laid over the figures' own."),
    ] = None,
) -> None:
    """Write a finished run's report and figures again."""
    from ruleout.cli.reporting import run_report

    with guarded():
        run_report(run, style)


@app.command()
def doctor() -> None:
    """Check that this machine has what judging needs."""
    from ruleout.cli.doctor import run_doctor

    with guarded():
        raise typer.Exit(run_doctor())


register_exchange(app)
