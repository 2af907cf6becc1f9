"""What the checks between the files share: both sides, and how to say where a slip is."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import NoReturn

from ruleout.errors import InputError, did_you_mean
from ruleout.experiments.types import Experiments
from ruleout.files import place
from ruleout.mechanism import Role
from ruleout.mechanism.types import Mechanism

MECHANISM, EXPERIMENTS, DATA = "mechanism.toml", "experiments.toml", "data.csv"


@dataclass(frozen=True, slots=True, eq=False)
class Context:
    """A mechanism and experiments that are to be held against each other.

    ``roles`` are the mechanism's parameters by name.
    """

    folder: Path
    mechanism: Mechanism
    experiments: Experiments
    roles: Mapping[str, Role]

    def where(self, field: str, file: str = EXPERIMENTS) -> str:
        """Return ``file:line: field``."""
        lines = self.mechanism.lines if file == MECHANISM else self.experiments.lines
        return place(self.folder / file, lines, field)

    def refuse(self, field: str, message: str, file: str = EXPERIMENTS) -> NoReturn:
        """Raise InputError about a field."""
        raise InputError(message, where=self.where(field, file))

    def known(self, given: str, allowed: Collection[str], field: str, what: str) -> None:
        """Raise InputError unless ``given`` is one of ``allowed``."""
        if given not in allowed:
            near = did_you_mean(given, allowed)
            self.refuse(field, f"'{given}' is no {what} of {MECHANISM}{near}")
