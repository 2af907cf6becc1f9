"""Fitting one variant: priors, likelihood, search, sampling, convergence."""

from ruleout.fitting.descent import Descent, descend
from ruleout.fitting.observations import Observations, Points, Sample, observe
from ruleout.fitting.posterior import REPORTING_RTOL, Posterior
from ruleout.fitting.predict import Predictor
from ruleout.fitting.priors import Space, describe_prior
from ruleout.fitting.search import Search, SearchEffort, search

__all__ = [
    "REPORTING_RTOL",
    "Descent",
    "Observations",
    "Points",
    "Posterior",
    "Predictor",
    "Sample",
    "Search",
    "SearchEffort",
    "Space",
    "descend",
    "describe_prior",
    "observe",
    "search",
]
