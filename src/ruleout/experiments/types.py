"""What was measured and how: readouts, conditions and data, as read from disk."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import pandas as pd

from ruleout.expressions import Expr

Noise = Literal["given", "free", "free+proportional", "replicates"]
Family = Literal["normal", "lognormal", "student"]
ALWAYS = float("-inf")
"""Time of a change that holds at rest as well."""


@dataclass(frozen=True, slots=True)
class Reference:
    """The point a relative readout is a fold of; ``condition`` None means the same condition."""

    condition: str | None
    time: float


@dataclass(frozen=True, slots=True)
class Readout:
    """What the instrument reports of the nodes.

    ``value = scale * of(nodes) [/ of(nodes) at the reference point] + offset``, plus noise.

    Attributes
    ----------
    of : Expr
        Expression of node names.
    of_text : str
        As it was written, for display.
    scale, offset : float or "free"
    scale_by : {None, "condition", "replicate"}
        Whether every condition or replicate has a free scale of its own.
    detection_limit, detection_ceiling : float or None
        At or below (above) it a value is censored.
    replicates : {"independent", "trajectory", "batch"}
    """

    name: str
    of: Expr
    of_text: str
    scale: float | Literal["free"] = 1.0
    scale_by: Literal["condition", "replicate"] | None = None
    relative_to: Reference | None = None
    offset: float | Literal["free"] = 0.0
    noise: Noise = "free"
    family: Family = "normal"
    detection_limit: float | None = None
    detection_ceiling: float | None = None
    replicates: Literal["independent", "trajectory", "batch"] = "independent"


@dataclass(frozen=True, slots=True)
class InputCourse:
    """Level of an input over time.

    ``interpolated`` False: ``levels[i]`` holds from ``times[i]`` on. True: linear between the
    points and constant beyond them.
    """

    times: tuple[float, ...]
    levels: tuple[float, ...]
    interpolated: bool = False


@dataclass(frozen=True, slots=True)
class Condition:
    """One experiment.

    Attributes
    ----------
    inputs : mapping of node to InputCourse
        Inputs not named stay at their resting level.
    remove, cut : mapping of node or edge to float
        Time from which it is gone; ``ALWAYS`` means at rest as well.
    clamp : mapping of node to float
        Level held from time 0.
    change : mapping of parameter to tuple of (time, factor)
        Factors in force from each time on; ``ALWAYS`` means at rest as well.
    start : mapping of node to float or str
        Own start: a number, ``"rest"``, ``"free"`` or expression text.
    add : mapping of node to tuple of (time, amount)
        Doses.
    free : tuple of str
        Parameters with an own value here; the own one is named ``PARAMETER@CONDITION``.
    hold_out : bool
        Never fitted: predicted, then checked apart.
    """

    name: str
    inputs: Mapping[str, InputCourse] = field(default_factory=dict)
    remove: Mapping[str, float] = field(default_factory=dict)
    clamp: Mapping[str, float] = field(default_factory=dict)
    change: Mapping[str, tuple[tuple[float, float], ...]] = field(default_factory=dict)
    cut: Mapping[str, float] = field(default_factory=dict)
    start: Mapping[str, float | str] = field(default_factory=dict)
    add: Mapping[str, tuple[tuple[float, float], ...]] = field(default_factory=dict)
    free: tuple[str, ...] = ()
    hold_out: bool = False


@dataclass(frozen=True, slots=True)
class Plan:
    """A planned experiment: what would be measured, when and how well.

    ``readouts``, ``times``, ``replicates`` and ``sd`` may be set for all conditions or, under
    ``by_condition``, for one. ``truth`` states parameter values to simulate with; without it they
    come from the priors.
    """

    readouts: tuple[str, ...]
    times: tuple[float, ...]
    replicates: int = 1
    sd: Mapping[str, float] = field(default_factory=dict)
    by_condition: Mapping[str, Plan] = field(default_factory=dict)
    truth: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, eq=False)
class Experiments:
    """Readouts, conditions and, where measured, data.

    ``data`` has the columns ``condition, time, readout, value, sd, replicate`` (``sd`` NaN and
    ``replicate`` "" where not given), in file order; ``time`` may be ``inf``. ``None`` before
    anything was measured. ``lines`` maps dotted fields to line numbers of ``experiments.toml``.
    """

    readouts: Mapping[str, Readout]
    conditions: Mapping[str, Condition]
    data: pd.DataFrame | None = None
    plan: Plan | None = None
    lines: Mapping[str, int] = field(default_factory=dict)
