"""How a case is judged: error rate, seed, and how much work to spend."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Final

from ruleout.errors import InputError, did_you_mean
from ruleout.fitting import SearchEffort


@dataclass(frozen=True, slots=True)
class Effort:
    """How much work goes into one variant.

    Attributes
    ----------
    search : SearchEffort
    stored, thin : int
        Iterations kept per block of a chain, and iterations per kept one.
    most_blocks : int
        Blocks per ensemble before the fit is called not converged.
    rhat, ess : float
        Targets of convergence.
    least_replicates, most_replicates : int
        Replicates before a small p-value is final, and at most.
    pilot : int
        Replicates that only set the scale of the statistics.
    check_all : bool
        Also check variants that coherence keeps anyway.
    """

    search: SearchEffort = field(default_factory=SearchEffort)
    stored: int = 150
    thin: int = 4
    most_blocks: int = 16
    rhat: float = 1.01
    ess: float = 400.0
    least_replicates: int = 199
    most_replicates: int = 2999
    pilot: int = 40
    check_all: bool = False


EFFORTS: Final[Mapping[str, Effort]] = MappingProxyType(
    {
        "quick": Effort(
            search=SearchEffort(screened=256),
            stored=60,
            most_blocks=16,
            rhat=1.03,
            ess=200.0,
            most_replicates=999,
        ),
        "standard": Effort(),
        "thorough": Effort(
            search=SearchEffort(screened=2048, starts=40),
            stored=300,
            most_blocks=30,
            ess=1000.0,
            most_replicates=9999,
            check_all=True,
        ),
    }
)
ENSEMBLES: Final = 4
BATCH: Final = 40
"""Replicates computed at once."""


@dataclass(frozen=True, slots=True)
class Settings:
    """Settings of one run.

    Attributes
    ----------
    seed : int
        Everything random follows from it.
    effort : {"quick", "standard", "thorough"}
    alpha : float
        Nominal error rate of the whole table.
    workers : int
        Local processes; has no influence on any number.
    """

    seed: int = 1
    effort: str = "standard"
    alpha: float = 0.05
    workers: int = 1

    def __post_init__(self) -> None:
        if self.effort not in EFFORTS:
            raise InputError(
                f"effort '{self.effort}' is unknown{did_you_mean(self.effort, EFFORTS)}; "
                f"choose one of {', '.join(EFFORTS)}"
            )
        if not 0.0 < self.alpha < 0.5:
            raise InputError(f"alpha = {self.alpha:g} must lie between 0 and 0.5")
        if self.seed < 0:
            raise InputError(f"seed = {self.seed} must not be negative")
        if self.workers < 1:
            raise InputError(f"workers = {self.workers} must be at least 1")

    @property
    def spent(self) -> Effort:
        """The effort's numbers."""
        return EFFORTS[self.effort]
