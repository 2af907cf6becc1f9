"""Measurement noise: likelihood, score and information, simulation, residuals.

Everything is on the working scale (the logarithm for a lognormal family), where the noise is
normal or Student with standard deviation sigma_i:

- given or from replicates: sigma_i is known;
- free: sigma_i = sd of the readout;
- free+proportional: sigma_i² = sd² + (sd_rel mu_i)²;
- student: sigma_i is the scale of a t distribution with nu degrees of freedom.

At a detection limit L the likelihood is the probability of lying beyond it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special, stats

from ruleout.fitting.observations import ABOVE, BELOW, UNCENSORED, Observations, Sample, working
from ruleout.fitting.parameters import NOISE_KINDS, Catalogue
from ruleout.fitting.priors import Space

Array = NDArray[np.float64]
HALF_LOG_2PI = 0.5 * np.log(2.0 * np.pi)


@dataclass(frozen=True, slots=True, eq=False)
class Terms:
    """Per-point pieces of the log likelihood at one parameter set per row; all (B, n).

    Attributes
    ----------
    loglik : log density (or probability beyond a limit)
    score : its derivative by the prediction on the working scale
    information : expected information about the prediction
    """

    loglik: Array
    score: Array
    information: Array


class Noise:
    """The noise model of one variant's fit.

    Parameters
    ----------
    observations : Observations
    catalogue : Catalogue
    """

    def __init__(self, observations: Observations, catalogue: Catalogue) -> None:
        self.observations = observations
        self._space: Space = catalogue.space
        columns = catalogue.columns
        readouts = observations.readouts
        which = observations.which
        zero = catalogue.space.dimension + len(catalogue.constants)
        per_readout = np.array(
            [[columns.get(f"{r.name}.{kind}", zero) for kind in NOISE_KINDS] for r in readouts]
        ).reshape(-1, len(NOISE_KINDS))
        self._columns = per_readout[which]
        self._free_sd = np.array([r.noise.startswith("free") for r in readouts], dtype=bool)[which]
        self._proportional = np.array(
            [r.noise == "free+proportional" for r in readouts], dtype=bool
        )[which]
        self._student = np.array([r.family == "student" for r in readouts], dtype=bool)[which]
        self._catalogue = catalogue
        self.any_student = bool(self._student.any())
        self.any_proportional = bool(self._proportional.any())
        self.free = self._free_parameters(observations)
        sd_is_free = per_readout[:, 0] < catalogue.space.dimension
        simple = [r.family != "student" and r.noise == "free" for r in readouts]
        self.closed_form = np.array(simple, dtype=bool) & sd_is_free
        self.known = ~sd_is_free & ~np.array(
            [r.noise == "free+proportional" for r in readouts], dtype=bool
        )

    def _free_parameters(self, observations: Observations) -> list[tuple[int, NDArray[np.bool_]]]:
        """Return (coordinate, points it governs) of every free noise parameter."""
        found: dict[int, NDArray[np.bool_]] = {}
        dimension = self._space.dimension
        for r in range(len(observations.readouts)):
            points = observations.which == r
            if not points.any():
                continue
            for column in self._columns[np.flatnonzero(points)[0]]:
                if column < dimension:
                    found[int(column)] = found.get(int(column), np.zeros_like(points)) | points
        return sorted(found.items())

    def working(self, mu: Array) -> Array:
        """Return predictions on the working scale."""
        return working(mu, self.observations.logarithmic)

    def sigma(self, q: Array, zeta: Array, sample: Sample) -> tuple[Array, Array]:
        """Return sigma and its derivative by the working-scale prediction ``zeta``; both (B, n)."""
        values = self._catalogue.values(q)
        values = np.concatenate([values, np.zeros((len(q), 1))], axis=1)
        sd = np.where(self._free_sd, values[:, self._columns[:, 0]], sample.sd)
        if not self.any_proportional:
            return sd, np.zeros(1)
        relative = np.where(self._proportional, values[:, self._columns[:, 1]], 0.0)
        sigma = np.sqrt(sd**2 + (relative * zeta) ** 2)
        return sigma, relative**2 * zeta / sigma

    def _nu(self, q: Array) -> Array:
        values = self._catalogue.values(q)
        values = np.concatenate([values, np.full((len(q), 1), 1.0)], axis=1)
        return values[:, self._columns[:, 2]]

    def loglik(self, q: Array, zeta: Array, sample: Sample) -> Array:
        """Return the log likelihood of every point, (B, n); -inf where a prediction is NaN."""
        sigma, _ = self.sigma(q, zeta, sample)
        with np.errstate(all="ignore"):
            e = (sample.z - zeta) / sigma
            out = -0.5 * e * e - np.log(sigma) - HALF_LOG_2PI
            if self.any_student:
                nu = self._nu(q)
                heavy = stats.t.logpdf(e, nu) - np.log(sigma)
                out = np.where(self._student, heavy, out)
            if sample.censored.any():
                side = sample.censored
                tail = special.log_ndtr(-side * e)
                if self.any_student:
                    tail = np.where(self._student, stats.t.logcdf(-side * e, self._nu(q)), tail)
                out = np.where(side == UNCENSORED, out, tail)
        return np.where(np.isfinite(out), out, -np.inf)

    def terms(self, q: Array, zeta: Array, sample: Sample) -> Terms:
        """Return log likelihood, score and expected information of every point."""
        loglik = self.loglik(q, zeta, sample)
        sigma, slope = self.sigma(q, zeta, sample)
        with np.errstate(all="ignore"):
            e = (sample.z - zeta) / sigma
            score = e / sigma + (e * e - 1.0) * slope / sigma
            information = (1.0 + 2.0 * slope**2) / sigma**2
            if self.any_student:
                nu = self._nu(q)
                score = np.where(self._student, (nu + 1) * e / (nu + e * e) / sigma, score)
                information = np.where(self._student, (nu + 1) / (nu + 3) / sigma**2, information)
            if sample.censored.any():
                side = np.where(sample.censored == BELOW, 1.0, -1.0)
                a = side * e
                ratio = np.exp(-0.5 * a * a - HALF_LOG_2PI - special.log_ndtr(a))
                score = np.where(sample.censored == UNCENSORED, score, -side * ratio / sigma)
                tail = ratio * (ratio + a) / sigma**2
                information = np.where(sample.censored == UNCENSORED, information, tail)
        return Terms(
            loglik,
            np.nan_to_num(score, posinf=0.0, neginf=0.0),
            np.maximum(np.nan_to_num(information, posinf=0.0, neginf=0.0), 0.0),
        )

    def profile(self, q: Array, zeta: Array, sample: Sample, use: NDArray[np.bool_]) -> Array:
        """Return coordinates with the free noise parameters moved to their conditional optimum.

        Coordinate-wise safeguarded Newton steps on log likelihood plus log prior, over the points
        in ``use``; a step that does not improve is not taken.
        """
        if not self.free:
            return q
        q = q.copy()
        for j, points in self.free:
            rows = points & use
            if not rows.any():
                continue
            plain = self.closed_form[self.observations.which[points]].all()
            if plain and not sample.censored[:, rows].any():
                q[:, j] = self._plain_sd(q[:, j], (sample.z - zeta)[:, rows], j)
                continue
            for _ in range(4):
                q = self._newton(q, zeta, sample, rows, j)
        return q

    def _plain_sd(self, before: Array, residual: Array, j: int) -> Array:
        """Return the optimal coordinate of a free sd of uncensored normal residuals (B, m).

        Maximises -m log sd - RSS / (2 sd²) + log prior by Newton's method in log sd.
        """
        space = self._space
        m = residual.shape[1]
        squares = np.sum(residual**2, axis=1)
        center, precision = space.center[j], space.precision[j]
        u = 0.5 * np.log(np.maximum(squares / m, 1e-300))
        for _ in range(12):
            ratio = squares * np.exp(-2.0 * u)
            slope = ratio - m - precision * (u - center)
            move = slope / (2.0 * ratio + precision + 1e-300)
            u = u + np.clip(move, -1.0, 1.0)
            if np.all(np.abs(move) < 1e-9):
                break
        u = np.clip(u, space.low[j], space.high[j])
        return np.where(np.isfinite(squares), u, before)

    def _target(
        self, q: Array, zeta: Array, sample: Sample, rows: NDArray[np.bool_], j: int
    ) -> Array:
        loglik = self.loglik(q, zeta, sample)[:, rows].sum(axis=1)
        z = (q[:, j] - self._space.center[j]) / self._space.sd[j]
        return np.asarray(loglik - 0.5 * z * z)

    def _newton(
        self, q: Array, zeta: Array, sample: Sample, rows: NDArray[np.bool_], j: int
    ) -> Array:
        h = 1e-3
        ahead, behind = q.copy(), q.copy()
        ahead[:, j] += h
        behind[:, j] -= h
        middle = self._target(q, zeta, sample, rows, j)
        up = self._target(ahead, zeta, sample, rows, j)
        down = self._target(behind, zeta, sample, rows, j)
        with np.errstate(all="ignore"):
            slope = (up - down) / (2 * h)
            curve = np.minimum((up - 2 * middle + down) / h**2, -1e-3)
            move = np.clip(-slope / curve, -1.0, 1.0)
        trial = q.copy()
        trial[:, j] = np.clip(q[:, j] + move, self._space.low[j], self._space.high[j])
        better = self._target(trial, zeta, sample, rows, j) > middle
        q[better] = trial[better]
        return q

    def residuals(
        self, q: Array, zeta: Array, sample: Sample, uniform: Array | None = None
    ) -> Array:
        """Return whitened residuals, standard normal if the model is true; (B, n).

        Student residuals are turned into normal scores; a censored one is the normal score of a
        point drawn (by ``uniform``, (B, n) in (0, 1)) from the part beyond the limit.
        """
        sigma, _ = self.sigma(q, zeta, sample)
        with np.errstate(all="ignore"):
            e = (sample.z - zeta) / sigma
            if self.any_student:
                score = special.ndtri(np.clip(special.stdtr(self._nu(q), e), 1e-300, 1 - 1e-16))
                e = np.where(self._student, score, e)
            if sample.censored.any():
                u = 0.5 if uniform is None else uniform
                below = special.ndtri(np.maximum(u * special.ndtr(e), 1e-300))
                above = -special.ndtri(np.maximum(u * special.ndtr(-e), 1e-300))
                e = np.where(sample.censored == BELOW, below, e)
                e = np.where(sample.censored == ABOVE, above, e)
        return e

    def draw(
        self,
        q: Array,
        zeta: Array,
        observed: Sample,
        generators: list[np.random.Generator],
    ) -> Sample:
        """Return one replicated data set per row, each from its own generator.

        The noise level follows the draw where it can be re-drawn exactly given the data: for free
        normal or lognormal sd without censoring, sigma² = RSS / chi²_n per readout; for pure error
        from replicates, sigma² = SS / chi²_df. Otherwise sigma and nu are those of the posterior
        draw. A replicate's own pure-error sd is estimated from itself.
        """
        observations = self.observations
        n = zeta.shape[1]
        sigma, _ = self.sigma(q, zeta, observed)
        sigma = np.broadcast_to(sigma, zeta.shape).copy()
        normal = np.empty(zeta.shape)
        fitted = observations.points.fitted
        squares, df = observations.pure_error(observed.z)
        for b, rng in enumerate(generators):
            for r, readout in enumerate(observations.readouts):
                rows = observations.which == r
                use = rows & fitted
                if readout.noise == "replicates":
                    sigma[b, rows] = np.sqrt(squares[0, r] / rng.chisquare(df[r]))
                elif self.closed_form[r] and use.any() and not observed.censored[0, rows].any():
                    rss = np.sum((observed.z[0, use] - zeta[b, use]) ** 2)
                    sigma[b, rows] = np.sqrt(rss / rng.chisquare(use.sum()))
            normal[b] = rng.standard_normal(n)
            if self.any_student:
                nu = self._nu(q)[b]
                heavy = normal[b] / np.sqrt(rng.chisquare(nu) / nu)
                normal[b] = np.where(self._student, heavy, normal[b])
        z, code = observations.censor(zeta + sigma * normal)
        sd = np.broadcast_to(observed.sd, z.shape)
        return observations.with_pure_error(Sample(z, code, sd))
