"""A second condition for ruling out where points are few and their noise is free.

A handful of residuals cannot show whether the errors are of the stated family, on which a small
p-value rests. With fewer than ten fitted points and a free noise level a variant is therefore
ruled out only if another one is better by the small-sample criterion too: AICc lower by 2 or more.

References
----------
.. [1] C. M. Hurvich, C.-L. Tsai, Biometrika 76 (1989) 297, doi:10.1093/biomet/76.2.297.
.. [2] K. P. Burnham, D. R. Anderson, Model Selection and Multimodel Inference, 2nd ed. (2002),
   section 2.6: differences below 2 separate nothing.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

FEW_POINTS = 10
SEPARATION = 2.0


def corrected_aic(log_likelihood: float, parameters: int, points: int) -> float:
    """Return AICc; infinite where there are no more points than parameters and one."""
    spare = points - parameters - 1
    if spare <= 0:
        return math.inf
    return 2 * parameters - 2 * log_likelihood + 2 * parameters * (parameters + 1) / spare


def separated(name: str, criteria: Mapping[str, float]) -> bool:
    """Return whether some other variant is better than ``name`` by at least ``SEPARATION``."""
    others = [value for other, value in criteria.items() if other != name]
    return min(others, default=math.inf) <= criteria[name] - SEPARATION
