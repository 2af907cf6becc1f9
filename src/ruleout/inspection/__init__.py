"""What to know before fitting: growth, rest, sensitivities, reach of data and priors."""

from ruleout.inspection.inspect import inspect_case
from ruleout.inspection.types import Finding, Inspection

__all__ = ["Finding", "Inspection", "inspect_case"]
