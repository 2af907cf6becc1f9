"""Designs to rehearse: the case's own measurements, the planned ones, and variations of them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.case import Case
from ruleout.errors import InputError, did_you_mean
from ruleout.experiments.types import Experiments, Plan, Readout
from ruleout.fitting import observe

Array = NDArray[np.float64]
AS_GIVEN: Final = "as given"
VARIED: Final = ("replicates", "noise", "times")
MOST_REPLICATES, MOST_TIMES = 1_000, 10_000


@dataclass(frozen=True, slots=True, eq=False)
class Design:
    """What would be measured, and how well.

    Attributes
    ----------
    name : str
        ``as given`` or, say, ``replicates=3``.
    case : Case
        Its data hold the points; the values are only placeholders.
    sd : (n,) array
        True standard deviations on the working scale; NaN where the noise model gives them.
    noise : float
        Factor on every standard deviation.
    """

    name: str
    case: Case
    sd: Array
    noise: float = 1.0


@dataclass(frozen=True, slots=True)
class Variation:
    """One feature of the design and the values it is to take.

    Attributes
    ----------
    what : {"replicates", "noise", "times"}
        Measurements of every point; factor on every standard deviation; number of times of every
        series, spread as its own times are.
    values : tuple of float
    """

    what: str
    values: tuple[float, ...]

    def name(self, value: float) -> str:
        """Return the name of the design with this value."""
        return f"{self.what}={value:g}"


def read_variation(text: str) -> Variation:
    """Read ``replicates=1,2,3,5``, ``noise=0.5,1,2`` or ``times=6,12,24``.

    Raises
    ------
    InputError
        If it is none of these.
    """
    what, _, listed = (part.strip() for part in text.partition("="))
    where = f"--vary {text}"
    if what not in VARIED:
        raise InputError(
            f"'{what}' cannot be varied{did_you_mean(what, VARIED)}; write replicates=1,2,3,5, "
            "noise=0.5,1,2 or times=6,12,24",
            where=where,
        )
    try:
        values = tuple(float(part) for part in listed.split(","))
    except ValueError:
        raise InputError(
            f"'{listed}' is no list of numbers; write them with commas between", where=where
        ) from None
    whole = what != "noise"
    most = {"replicates": MOST_REPLICATES, "times": MOST_TIMES, "noise": 1e6}[what]
    for value in values:
        if not 0 < value <= most or (whole and value != int(value)):
            kind = f"a whole number from 1 to {most}" if whole else "a factor above 0"
            raise InputError(f"{value:g} was given; {what} takes {kind}", where=where)
    return Variation(what, values)


def designs(case: Case, variation: Variation | None = None) -> list[Design]:
    """Return the designs to rehearse, the case's own or planned one first.

    Raises
    ------
    InputError
        If there are neither data nor a plan, or the variation makes no sense for these readouts.
    """
    experiments = case.experiments
    if experiments.data is not None:
        points, sd = experiments.data, _pure_error(experiments)
    elif experiments.plan is not None:
        points, sd = _planned(case, experiments.plan)
    else:
        raise InputError(
            "there is neither data.csv nor a [plan] in experiments.toml; write what would be "
            "measured, such as [plan] with times = [0, 5, 10] and sd = 0.05",
            where=str(case.folder),
        )
    own = Design(AS_GIVEN, _with_points(case, points), sd)
    if variation is None:
        return [own]
    if variation.what == "noise":
        varied = [
            replace(own, name=variation.name(value), noise=value) for value in variation.values
        ]
    else:
        varied = []
        for value in variation.values:
            table = points.assign(true_sd=sd)
            if variation.what == "replicates":
                table = _with_replicates(experiments, table, int(value))
            else:
                table = _with_times(table, int(value))
            changed = _with_points(case, table.drop(columns="true_sd"))
            varied.append(
                Design(variation.name(value), changed, table["true_sd"].to_numpy(dtype=float))
            )
    return [own, *varied]


def _with_points(case: Case, points: pd.DataFrame) -> Case:
    return replace(case, experiments=replace(case.experiments, data=points))


def _pure_error(experiments: Experiments) -> Array:
    """Return sd estimated from replicates where the noise model says so, else NaN."""
    observations = observe(experiments)
    by_replicates = [r.noise == "replicates" for r in observations.readouts]
    return np.where(
        np.array(by_replicates, dtype=bool)[observations.which], observations.observed.sd[0], np.nan
    )


def _planned(case: Case, plan: Plan) -> tuple[pd.DataFrame, Array]:
    """Return the planned points, all of value 1, and their planned sd."""
    rows = []
    for condition in case.experiments.conditions:
        own = plan.by_condition.get(condition, plan)
        for name in own.readouts:
            readout = case.experiments.readouts[name]
            sd = own.sd.get(name, np.nan)
            _check_planned(case, readout, own, sd)
            labelled = own.replicates > 1 or not _independent(readout)
            rows += [
                (condition, time, name, 1.0, sd, str(k + 1) if labelled else "")
                for time in own.times
                for k in range(own.replicates)
            ]
    table = pd.DataFrame(rows, columns=["condition", "time", "readout", "value", "sd", "replicate"])
    return table, table["sd"].to_numpy(dtype=float)


def _check_planned(case: Case, readout: Readout, plan: Plan, sd: float) -> None:
    if readout.noise == "replicates" and (plan.replicates < 2 or np.isnan(sd)):
        raise InputError(
            f"readout '{readout.name}' takes its noise from replicates; plan at least two "
            "replicates and their sd",
            where=f"{case.folder / 'experiments.toml'}: plan",
        )


def _independent(readout: Readout) -> bool:
    return readout.replicates == "independent" and readout.scale_by != "replicate"


def _with_replicates(experiments: Experiments, points: pd.DataFrame, count: int) -> pd.DataFrame:
    """Return every point measured ``count`` times."""
    for name in dict.fromkeys(points["readout"]):
        readout = experiments.readouts[name]
        if not _independent(readout):
            raise InputError(
                f"replicates of readout '{name}' are series or batches of their own, which "
                "cannot be multiplied; vary noise or times",
                where="--vary replicates",
            )
        if readout.noise == "replicates" and count < 2:
            raise InputError(
                f"readout '{name}' takes its noise from replicates; give 2 or more",
                where="--vary replicates",
            )
    once = points.groupby(["condition", "readout", "time"], sort=False, as_index=False).agg(
        {"value": "mean", "sd": "mean", "true_sd": "mean"}
    )
    copies = [once.assign(replicate=str(k + 1) if count > 1 else "") for k in range(count)]
    return pd.concat(copies, ignore_index=True)[list(points.columns)]


def _with_times(points: pd.DataFrame, count: int) -> pd.DataFrame:
    """Return every series measured at ``count`` times, spread as its own are."""
    parts: list[pd.DataFrame] = []
    for _, series in points.groupby(["condition", "readout", "replicate"], sort=False):
        finite = series[np.isfinite(series["time"])].sort_values("time", kind="stable")
        parts.append(series[~np.isfinite(series["time"])])
        if finite.empty:
            continue
        old = finite["time"].to_numpy(dtype=float)
        # A single new time is the last one: before it, least has happened.
        rank = np.linspace(0.0, 1.0, count) if count > 1 else np.ones(1)
        new = np.interp(rank, np.linspace(0.0, 1.0, len(old)), old)
        columns = {
            name: np.interp(new, old, finite[name].to_numpy(dtype=float))
            for name in ("value", "sd", "true_sd")
        }
        fixed = {name: finite[name].iloc[0] for name in ("condition", "readout", "replicate")}
        parts.append(pd.DataFrame({**fixed, "time": new, **columns})[list(points.columns)])
    return pd.concat([part for part in parts if len(part)], ignore_index=True)
