"""``mechanism.toml``, ``experiments.toml`` and ``data.csv`` -> :class:`Case`."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from ruleout.case.conditions import check_condition
from ruleout.case.context import DATA, EXPERIMENTS, MECHANISM, Context
from ruleout.case.priors import check_priors
from ruleout.case.readouts import check_readouts
from ruleout.case.units import check_time_unit
from ruleout.errors import InputError
from ruleout.experiments import read_experiments
from ruleout.experiments.types import Experiments
from ruleout.mechanism import parameter_names, read_mechanism
from ruleout.mechanism.types import Mechanism


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """A mechanism in dispute and the experiments that bear on it.

    Attributes
    ----------
    name : str
        Name of the folder.
    folder : Path
    mechanism : Mechanism
    experiments : Experiments
    hashes : mapping of file name to str
        SHA-256 of every file read, in hexadecimal.
    """

    name: str
    folder: Path
    mechanism: Mechanism
    experiments: Experiments
    hashes: Mapping[str, str]


def read_case(folder: Path | str, require_data: bool = True) -> Case:
    """Return the case in ``folder``.

    Parameters
    ----------
    folder : path
        With ``mechanism.toml``, ``experiments.toml`` and ``data.csv``.
    require_data : bool
        Whether a missing ``data.csv`` is an error; a planned experiment has none yet.

    Raises
    ------
    InputError
        At the first thing that cannot be used, with file, line and field.
    """
    folder = Path(folder)
    try:
        _check_folder(folder, require_data)
    except OSError as error:
        raise InputError(
            f"this folder cannot be read ({error.strerror}); give the folder of a case",
            where=str(folder),
        ) from error
    data = folder / DATA if (folder / DATA).exists() else None
    name = folder.resolve().name
    mechanism = read_mechanism(folder / MECHANISM)
    mechanism = replace(mechanism, title=mechanism.title or name)
    experiments = read_experiments(folder / EXPERIMENTS, data)
    _check_together(Context(folder, mechanism, experiments, parameter_names(mechanism)))
    files = [folder / MECHANISM, folder / EXPERIMENTS, *([data] if data else [])]
    hashes = {file.name: hashlib.sha256(file.read_bytes()).hexdigest() for file in files}
    return Case(name, folder, mechanism, experiments, hashes)


def _check_folder(folder: Path, require_data: bool) -> None:
    if not folder.exists():
        raise InputError("there is no such folder; give the folder of a case", where=str(folder))
    if not folder.is_dir():
        raise InputError("this is a file; give the folder it is in", where=str(folder))
    needed = dict.fromkeys((MECHANISM, EXPERIMENTS), "'ruleout new DIR' makes a case to start from")
    if require_data:
        needed[DATA] = "without data, 'ruleout rehearse' tells what the experiments could rule out"
    for name, advice in needed.items():
        if not (folder / name).exists():
            raise InputError(f"there is no {name} in this folder; {advice}", where=str(folder))


def _check_together(context: Context) -> None:
    check_readouts(context)
    for condition in context.experiments.conditions.values():
        check_condition(context, condition)
    check_priors(context)
    check_time_unit(context)
