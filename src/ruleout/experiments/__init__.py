"""experiments.toml and data.csv -> Experiments."""

from ruleout.experiments.read import read_experiments
from ruleout.experiments.readouts import readout_parameters

__all__ = ["read_experiments", "readout_parameters"]
