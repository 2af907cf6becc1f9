"""One table of a TOML file and the checked ways to take its fields."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn, TypeVar

from ruleout.errors import InputError, did_you_mean
from ruleout.files.toml import place, read_toml

Word = TypeVar("Word", bound=str)
LARGEST_NUMBER = 1e100


def describe(value: object) -> str:
    """Return what was given, in words short enough for a message."""
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, bool):
        return "true" if value else "false"
    try:
        shown = repr(value)
    except (ValueError, RecursionError):
        return "a value too long to show"
    return shown if len(shown) <= 40 else f"{shown[:37]}..."


def _finite(value: object) -> bool:
    # Compared exactly, so that integers beyond the range of floats are refused, not raised on.
    return (
        isinstance(value, int | float)
        and not isinstance(value, bool)
        and not (isinstance(value, float) and math.isnan(value))
        and -LARGEST_NUMBER <= value <= LARGEST_NUMBER
    )


@dataclass(frozen=True, slots=True)
class Section:
    """One table of a TOML file.

    Attributes
    ----------
    path : Path
        The file.
    name : str
        Dotted name of the table; empty for the whole file.
    values : mapping of str to Any
    lines : mapping of str to int
        Line of each dotted field of the file.
    """

    path: Path
    name: str
    values: Mapping[str, Any]
    lines: Mapping[str, int]

    @classmethod
    def open(cls, path: Path) -> Section:
        """Return the whole file at ``path``."""
        values, lines = read_toml(path)
        return cls(path, "", values, lines)

    def __contains__(self, key: str) -> bool:
        return key in self.values

    def where(self, key: str = "") -> str:
        """Return ``file:line: field`` of a field, or of the table itself."""
        field = ".".join(part for part in (self.name, key) if part)
        return place(self.path, self.lines, field) if field else str(self.path)

    def fail(self, key: str, message: str) -> NoReturn:
        """Raise InputError about the field ``key``."""
        raise InputError(message, where=self.where(key))

    def only(self, allowed: Collection[str], hints: Mapping[str, str] | None = None) -> None:
        """Raise InputError at the first key that is not allowed.

        Parameters
        ----------
        hints : mapping of str to str, optional
            For keys that are likely slips: what to do instead.
        """
        for key in self.values:
            if key in allowed:
                continue
            if hints and key in hints:
                self.fail(key, hints[key])
            near = did_you_mean(key, allowed)
            self.fail(key, f"unknown key {key!r}{near}; allowed here: {', '.join(allowed)}")

    def section(self, key: str) -> Section:
        """Return the table ``key``, empty where it is missing."""
        value = self.values.get(key, {})
        if not isinstance(value, Mapping):
            self.fail(key, f"{describe(value)} was given; a table is expected")
        return Section(self.path, ".".join(p for p in (self.name, key) if p), value, self.lines)

    def sections(self, key: str) -> dict[str, Section]:
        """Return the tables inside the table ``key``, by name."""
        outer = self.section(key)
        return {name: outer.section(name) for name in outer.values}

    def text(self, key: str, default: str = "", longest: int = 500) -> str:
        """Return a string field, without control characters."""
        value = self.values.get(key, default)
        if not isinstance(value, str):
            self.fail(key, f"{describe(value)} was given; text in quotes is expected")
        if len(value) > longest:
            self.fail(key, f"the text has {len(value)} characters; at most {longest} are read")
        if not value.replace("\n", " ").replace("\t", " ").isprintable():
            self.fail(key, "the text holds control characters; remove them")
        return value

    def word(self, key: str, allowed: Sequence[Word], default: Word | None = None) -> Word:
        """Return a field that is one of ``allowed``."""
        if key not in self.values:
            if default is None:
                self.fail(key, f"'{key}' is missing; give one of {', '.join(allowed)}")
            return default
        return self.one_of(key, self.values[key], allowed)

    def one_of(self, key: str, value: object, allowed: Sequence[Word]) -> Word:
        """Return ``value`` if it is one of ``allowed``, else raise InputError."""
        matching = [word for word in allowed if word == value]
        if not matching:
            near = did_you_mean(value, allowed) if isinstance(value, str) else ""
            self.fail(key, f"{describe(value)} is not one of {', '.join(allowed)}{near}")
        return matching[0]

    def flag(self, key: str, default: bool = False) -> bool:
        """Return a field that is true or false."""
        value = self.values.get(key, default)
        if not isinstance(value, bool):
            self.fail(key, f"{describe(value)} was given; true or false is expected")
        return value

    def number(
        self,
        key: str,
        default: float | None = None,
        *,
        low: float = -LARGEST_NUMBER,
        above: float | None = None,
    ) -> float:
        """Return a finite number of at least ``low`` and, if given, more than ``above``."""
        if key not in self.values:
            if default is None:
                self.fail(key, f"'{key}' is missing; give a number")
            return default
        return self.as_number(key, self.values[key], low=low, above=above)

    def as_number(
        self, key: str, value: object, *, low: float = -LARGEST_NUMBER, above: float | None = None
    ) -> float:
        """Return ``value`` as a finite float, or raise InputError about ``key``."""
        if not _finite(value):
            self.fail(key, f"{describe(value)} was given; a finite number is expected")
        number = float(value)  # type: ignore[arg-type]
        if above is not None and number <= above:
            self.fail(key, f"{number:g} was given; a number above {above:g} is expected")
        if number < low:
            self.fail(key, f"{number:g} was given; a number of at least {low:g} is expected")
        return number

    def integer(self, key: str, default: int, *, low: int, high: int) -> int:
        """Return a whole number between ``low`` and ``high``."""
        value = self.values.get(key, default)
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            self.fail(
                key, f"{describe(value)} was given; a whole number from {low} to {high} is expected"
            )
        return value

    def time(self, key: str) -> float:
        """Return a time of at least 0; ``inf`` is the steady state."""
        if key not in self.values:
            self.fail(key, f"'{key}' is missing; give a time of at least 0, or inf")
        return self.as_time(key, self.values[key])

    def as_time(self, key: str, value: object) -> float:
        """Return ``value`` as a time of at least 0 or ``inf``."""
        return math.inf if value == math.inf else self.as_number(key, value, low=0.0)

    def names(self, key: str, *, single: bool = False, twice: str = "") -> tuple[str, ...]:
        """Return a list of distinct names (with ``single``, one name alone is a list of one).

        ``twice`` is what to do, with ``{name}``, where a name is repeated.
        """
        value = self.values.get(key, [])
        if single and isinstance(value, str):
            value = [value]
        if not isinstance(value, list) or not all(isinstance(name, str) for name in value):
            self.fail(key, f"{describe(value)} was given; a list of names is expected")
        for i, name in enumerate(value):
            if name in value[:i]:
                self.fail(key, f"'{name}' is named twice{twice.format(name=name)}")
        return tuple(value)

    def course(self, key: str, value: object, what: str) -> tuple[tuple[float, float], ...]:
        """Return ``[[time, what], ...]`` with times from 0 on that increase."""
        if not isinstance(value, list) or not value:
            self.fail(key, f"{describe(value)} was given; [[time, {what}], ...] is expected")
        points: list[tuple[float, float]] = []
        for pair in value:
            if not isinstance(pair, list) or len(pair) != 2:
                self.fail(key, f"{describe(pair)} was given; a pair [time, {what}] is expected")
            point = (self.as_number(key, pair[0], low=0.0), self.as_number(key, pair[1]))
            if points and point[0] <= points[-1][0]:
                self.fail(key, f"time {point[0]:g} follows {points[-1][0]:g}; times must increase")
            points.append(point)
        return tuple(points)

    def parameters(self, key: str) -> dict[str, Any]:
        """Return a table by parameter name, whether ``a.b`` stands in quotes or not."""
        found: dict[str, Any] = {}
        for outer, value in self.section(key).values.items():
            if "." in outer or not isinstance(value, Mapping):
                found[outer] = value
            else:
                found |= {f"{outer}.{inner}": v for inner, v in value.items()}
        return found
