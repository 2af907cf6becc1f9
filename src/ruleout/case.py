"""The three files of a case, read and held against each other."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from ruleout.errors import InputError
from ruleout.experiments import read_experiments
from ruleout.experiments.types import Experiments
from ruleout.mechanism import read_mechanism
from ruleout.mechanism.types import Mechanism

MECHANISM, EXPERIMENTS, DATA = "mechanism.toml", "experiments.toml", "data.csv"


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
    _check_folder(folder, require_data)
    data = folder / DATA if (folder / DATA).exists() else None
    mechanism = read_mechanism(folder / MECHANISM)
    experiments = read_experiments(folder / EXPERIMENTS, data)
    files = [folder / MECHANISM, folder / EXPERIMENTS, *([data] if data else [])]
    hashes = {file.name: hashlib.sha256(file.read_bytes()).hexdigest() for file in files}
    return Case(folder.resolve().name, folder, mechanism, experiments, hashes)


def _check_folder(folder: Path, require_data: bool) -> None:
    if not folder.exists():
        raise InputError("there is no such folder; give the folder of a case", where=str(folder))
    if not folder.is_dir():
        raise InputError("this is a file; give the folder it is in", where=str(folder))
    needed = {
        MECHANISM: "'ruleout new DIR' makes a case to start from",
        EXPERIMENTS: "'ruleout new DIR' makes a case to start from",
    }
    if require_data:
        needed[DATA] = "without data, 'ruleout rehearse' tells what the experiments could rule out"
    for name, advice in needed.items():
        if not (folder / name).exists():
            raise InputError(f"there is no {name} in this folder; {advice}", where=str(folder))
