"""What the survey asks of any family: its wirings in a list, each ready to be scored."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.behaviours import Subject
from ruleout.survey.enumeration import class_sizes, codes, in_words, label, symmetries
from ruleout.survey.features import Features, find_features
from ruleout.survey.systems import Member
from ruleout.survey.types import Family, Range, Signs

Array = NDArray[np.float64]
Choices = NDArray[np.int8]
Rows = NDArray[np.intp]


class Scorable(Protocol):
    """One wiring with names for its parameters."""

    @property
    def parameters(self) -> tuple[str, ...]:
        """Names of the parameters."""
        ...

    def subject(self, values: Array) -> Subject:
        """Return the wiring with parameter sets ``values`` (M, len(parameters))."""
        ...


class Roster(Protocol):
    """T wirings of a family."""

    def __len__(self) -> int: ...

    def range_of(self, name: str) -> Range:
        """Return the range of a parameter."""
        ...

    def labels(self) -> list[str]:
        """Return a short text that identifies each wiring."""
        ...

    def words(self) -> list[str]:
        """Return each wiring's edges in words."""
        ...

    def choices(self) -> Choices:
        """Return what each wiring chooses, (T, K); 0 is the absence of something."""
        ...

    def class_sizes(self) -> NDArray[np.int64]:
        """Return how many wirings each one stands for."""
        ...

    def order(self) -> Rows:
        """Return an order in which wirings that share code stand together."""
        ...

    def features(self) -> Features:
        """Return the structural features."""
        ...

    def member(self, t: int) -> Scorable:
        """Return one wiring."""
        ...

    def pick(self, rows: Sequence[int] | Rows) -> Roster:
        """Return some of the wirings."""
        ...


@dataclass(frozen=True, slots=True, eq=False)
class MotifRoster:
    """Wirings of a motif family as sign matrices (T, n, n)."""

    family: Family
    signs: Signs

    def __len__(self) -> int:
        return len(self.signs)

    def range_of(self, name: str) -> Range:
        """Return the range of a parameter."""
        return self.family.range_of(name)

    def labels(self) -> list[str]:
        """Return the signs row by row: ``+0-|00+|-00``."""
        return [label(s) for s in self.signs]

    def words(self) -> list[str]:
        """Return the edges: ``A -> B; B -| C``."""
        return [in_words(self.family, s) for s in self.signs]

    def choices(self) -> Choices:
        """Return the sign of every possible edge."""
        return self.signs.reshape(len(self.signs), self.signs.shape[1] ** 2)

    def class_sizes(self) -> NDArray[np.int64]:
        """Return how many labelled wirings each one stands for."""
        if self.family.relabelled:
            return class_sizes(self.signs, symmetries(self.family))
        return np.ones(len(self.signs), dtype=np.int64)

    def order(self) -> Rows:
        """Return wirings with edges at the same places together."""
        pattern = codes((self.signs != 0).astype(np.int8))
        return np.lexsort((codes(self.signs), pattern))

    def features(self) -> Features:
        """Return edges, loops and feed-forward pairs."""
        return find_features(self.family, self.signs)

    def member(self, t: int) -> Member:
        """Return one wiring."""
        return Member(self.family, self.signs[t])

    def pick(self, rows: Sequence[int] | Rows) -> MotifRoster:
        """Return some of the wirings."""
        return MotifRoster(self.family, self.signs[np.asarray(rows, dtype=np.intp)])
