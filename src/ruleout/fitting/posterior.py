"""One variant's fit as a function: log posterior, objective and its local quadratic model."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.equations.types import Model
from ruleout.experiments.types import Experiments
from ruleout.fitting.noise import Noise
from ruleout.fitting.observations import Observations, Sample, observe
from ruleout.fitting.parameters import Catalogue, catalogue
from ruleout.fitting.predict import Predictor
from ruleout.kernel import Status
from ruleout.mechanism.types import Mechanism

Array = NDArray[np.float64]
SAMPLING_RTOL = 1e-4
"""Loosest solver tolerance in MCMC."""
REPORTING_RTOL = 1e-6
"""Loosest solver tolerance of searches, refits, verdicts and reported curves."""
SOLVER_SHARE = 0.03
"""Largest solver error in MCMC, in standard deviations of the noise."""


@dataclass(frozen=True, slots=True, eq=False)
class Quadratic:
    """Local model of the objective at B points.

    Attributes
    ----------
    objective : (B,) array
        -2 log posterior density up to a constant; inf where the integration failed.
    gradient : (B, D) array
        Half the negative gradient: score of the log posterior.
    curvature : (B, D, D) array
        Expected information plus prior precision.
    """

    objective: Array
    gradient: Array
    curvature: Array


class Posterior:
    """The posterior of one variant given one sample (or many, row by row).

    Parameters
    ----------
    model : Model
    mechanism : Mechanism
    experiments : Experiments
    ties : mapping of parameter to parameter
        Fixing units that nothing else fixes.
    """

    def __init__(
        self,
        model: Model,
        mechanism: Mechanism,
        experiments: Experiments,
        ties: Mapping[str, str],
    ) -> None:
        self.model = model
        self.observations: Observations = observe(experiments)
        self.catalogue: Catalogue = catalogue(model, mechanism, experiments, ties)
        self.space = self.catalogue.space
        self.noise = Noise(self.observations, self.catalogue)
        self.predict = Predictor(model, experiments, self.catalogue, self.observations.points)
        self.fitted = self.observations.points.fitted
        self.observed = self.observations.observed
        self.sampling_rtol = min(SAMPLING_RTOL, SOLVER_SHARE * self._relative_noise())
        self.rtol = min(REPORTING_RTOL, 0.1 * self.sampling_rtol)
        self._noise_coordinates = np.array([j for j, _ in self.noise.free], dtype=np.intp)

    def _relative_noise(self) -> float:
        """Return the least noise to be expected, relative to the size of its readout.

        Stated and pure-error sd count as they are, free ones at a tenth of their prior median.
        """
        middle = self.space.quantile(np.full((1, self.space.dimension), 0.5))
        z = self.observed.z
        sigma, _ = self.noise.sigma(middle, z, self.observed)
        free = ~self.noise.known[self.observations.which]
        sigma = np.where(free, 0.1 * sigma, sigma)
        size = np.where(self.observations.logarithmic, 1.0, 1e-300)
        for r in range(len(self.observations.readouts)):
            rows = self.observations.which == r
            size[rows] = np.maximum(size[rows], np.max(np.abs(z[0, rows]), initial=0.0))
        size = np.where(self.observations.logarithmic, 1.0, size)
        return float(np.clip(np.nanmin(sigma / size), 1e-8, 1.0))

    def objective(self, q: Array, zeta: Array, sample: Sample) -> Array:
        """Return -2 log posterior (B,) from working-scale predictions; inf where they failed."""
        loglik = self.noise.loglik(q, zeta, sample)[:, self.fitted].sum(axis=1)
        return np.asarray(self.space.penalty(q) - 2.0 * loglik)

    def zeta(self, q: Array, rtol: float | None = None) -> tuple[Array, NDArray[np.int8]]:
        """Return working-scale predictions (B, n) and kernel statuses (B,)."""
        mu, status = self.predict(q, rtol or self.rtol)
        return self.noise.working(mu), status

    def log_density(self, q: Array) -> tuple[Array, NDArray[np.bool_]]:
        """Return log posterior density (B,) of the observed data and which solves failed.

        Points outside the priors are -inf without a solve; a failed solve is -inf too and counted
        by the caller.
        """
        out = np.full(len(q), -np.inf)
        failed = np.zeros(len(q), dtype=bool)
        inside = np.flatnonzero(self.space.inside(q) & np.isfinite(q).all(axis=1))
        if len(inside):
            zeta, status = self.zeta(q[inside], self.sampling_rtol)
            out[inside] = -0.5 * self.objective(q[inside], zeta, self.observed)
            failed[inside] = status != Status.OK
        return out, failed

    def quadratic(self, q: Array, sample: Sample) -> Quadratic:
        """Return objective, score and curvature (noise parameters held)."""
        mu, jacobian, _ = self.predict.derivatives(q, self.rtol)
        logarithmic = self.observations.logarithmic
        if logarithmic.any():
            with np.errstate(all="ignore"):
                jacobian = np.where(logarithmic[:, None], jacobian / mu[:, :, None], jacobian)
        jacobian = np.nan_to_num(jacobian[:, self.fitted], posinf=0.0, neginf=0.0)
        zeta = self.noise.working(mu)
        terms = self.noise.terms(q, zeta, sample)
        prior = self.space.precision
        pull = np.where(prior > 0, (q - self.space.center) * prior, 0.0)
        weighted = jacobian * terms.information[:, self.fitted, None]
        curvature = np.swapaxes(jacobian, 1, 2) @ weighted
        diagonal = np.arange(self.space.dimension)
        curvature[:, diagonal, diagonal] += prior
        gradient = np.einsum("bnd,bn->bd", jacobian, terms.score[:, self.fitted]) - pull
        gradient[:, self._noise_coordinates] = 0.0
        for j, points in self.noise.free:
            # Information about a log sd is 2 per point; the exact gradient is not needed here,
            # because noise parameters are profiled, but the curvature shapes the start of chains.
            curvature[:, j, j] += 2.0 * np.sum(points & self.fitted)
        loglik = terms.loglik[:, self.fitted].sum(axis=1)
        return Quadratic(self.space.penalty(q) - 2.0 * loglik, gradient, curvature)
