"""mechanism.toml -> Mechanism."""

from ruleout.mechanism.parameters import Role, parameter_names
from ruleout.mechanism.read import read_mechanism

__all__ = ["Role", "parameter_names", "read_mechanism"]
