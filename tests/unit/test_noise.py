"""Likelihood, score and information, profiles and draws of the noise models."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from ruleout.equations import build
from ruleout.fitting import Posterior
from ruleout.variants import expand

MECHANISM = """
[node.x]
kind = "pool"
start = "free"
[edge.loss]
from = "x"
effect = "converts"
"""
ROWS = [(0.0, 2.1), (1.0, 1.3), (2.0, 0.9), (3.0, 0.5), (4.0, 0.12)]


@pytest.fixture
def posterior_of(case_of):
    def make(readout, rows=ROWS, sd=None, prior=""):
        header = "condition,time,readout,value" + (",sd" if sd else "")
        lines = [f"c,{t},y,{v}" + (f",{sd}" if sd else "") for t, v in rows]
        experiments = f'[readout.y]\nof = "x"\n{readout}\n[condition.c]\n'
        case = case_of(MECHANISM + prior, experiments, data="\n".join([header, *lines]))
        variants = expand(case.mechanism, case.experiments)
        model = build(variants.variants["v1"], case.mechanism, case.experiments)
        return Posterior(model, case.mechanism, case.experiments, {})

    return make


def at(posterior, **values):
    """Coordinates of natural values, the rest at the prior's middle."""
    q = posterior.space.quantile(np.full((1, posterior.space.dimension), 0.5))
    for name, value in values.items():
        j = posterior.space.names.index(name.replace("__", "."))
        q[0, j] = np.log(value) if posterior.space.log[j] else value
    return q


@pytest.mark.parametrize(
    ("readout", "sd", "density"),
    [
        ('noise = "given"', 0.2, lambda y, m: stats.norm.logpdf(y, m, 0.2)),
        ('noise = "free"', None, lambda y, m: stats.norm.logpdf(y, m, 0.3)),
        (
            'noise = "free"\nfamily = "lognormal"',
            None,
            lambda y, m: stats.norm.logpdf(np.log(y), np.log(m), 0.3),
        ),
        (
            'noise = "free+proportional"',
            None,
            lambda y, m: stats.norm.logpdf(y, m, np.hypot(0.3, 0.15 * m)),
        ),
        (
            'noise = "free"\nfamily = "student"',
            None,
            lambda y, m: stats.t.logpdf((y - m) / 0.3, 4.0) - np.log(0.3),
        ),
        (
            'noise = "free"\ndetection_limit = 0.2',
            None,
            lambda y, m: np.where(
                y <= 0.2, stats.norm.logcdf(0.2, m, 0.3), stats.norm.logpdf(y, m, 0.3)
            ),
        ),
        (
            'noise = "free"\ndetection_ceiling = 2.0',
            None,
            lambda y, m: np.where(
                y >= 2.0, stats.norm.logsf(2.0, m, 0.3), stats.norm.logpdf(y, m, 0.3)
            ),
        ),
    ],
)
def test_log_likelihood_is_that_of_scipy_and_score_its_derivative(
    posterior_of, readout, sd, density
):
    """Densities by scipy.stats; scores by central differences of the log likelihood (1e-5)."""
    posterior = posterior_of(readout, sd=sd)
    values = {"y__sd": 0.3, "y__sd_rel": 0.15, "y__nu": 4.0}
    known = {k: v for k, v in values.items() if k.replace("__", ".") in posterior.space.names}
    q = at(posterior, **known)
    m = np.array([[2.0, 1.4, 0.8, 0.55, 0.3]])
    y = np.array([v for _, v in ROWS])
    zeta = posterior.noise.working(m)
    found = posterior.noise.terms(q, zeta, posterior.observed)
    np.testing.assert_allclose(found.loglik, density(y, m), rtol=1e-10)
    h = 1e-5
    up = posterior.noise.loglik(q, zeta + h, posterior.observed)
    down = posterior.noise.loglik(q, zeta - h, posterior.observed)
    np.testing.assert_allclose(found.score, (up - down) / (2 * h), rtol=1e-5, atol=1e-6)
    assert (found.information > 0).all()


@pytest.mark.parametrize(
    "readout",
    [
        'noise = "free"',
        'noise = "free+proportional"',
        'noise = "free"\nfamily = "student"',
        'noise = "free"\ndetection_limit = 0.2',
    ],
)
def test_profile_finds_the_conditional_optimum(posterior_of, readout):
    """No small move of any noise coordinate raises log likelihood plus log prior."""
    posterior = posterior_of(readout)
    m = np.array([[2.0, 1.4, 0.8, 0.55, 0.3]])
    q = at(posterior)
    for _ in range(30):
        q = posterior.noise.profile(q, m, posterior.observed, posterior.fitted)
    best = posterior.objective(q, m, posterior.observed)[0]
    for j, _ in posterior.noise.free:
        for move in (-0.02, 0.02):
            other = q.copy()
            other[0, j] = np.clip(q[0, j] + move, posterior.space.low[j], posterior.space.high[j])
            assert posterior.objective(other, m, posterior.observed)[0] >= best - 1e-6


def test_replicates_of_free_noise_have_the_scale_of_rss_over_chi_square(posterior_of):
    """Mean of replicated residual squares: n RSS/(n - 2) per n points, as E[1/chi²_n] says."""
    rows = [(t, float(np.exp(-0.3 * t))) for t in np.linspace(0, 5, 30)]
    posterior = posterior_of('noise = "free"', rows=rows)
    zeta = np.array([[v + 0.1 * (-1) ** i for i, (_, v) in enumerate(rows)]])
    count = 2000
    generators = [np.random.default_rng(i) for i in range(count)]
    q = np.repeat(at(posterior), count, axis=0)
    wide = np.repeat(zeta, count, axis=0)
    sample = posterior.noise.draw(q, wide, posterior.observed, generators)
    n, rss = 30, 30 * 0.01
    squares = np.sum((sample.z - wide) ** 2, axis=1)
    expected = n * rss / (n - 2)
    error = squares.std() / np.sqrt(count)
    assert squares.mean() == pytest.approx(expected, abs=4 * error)


def test_residuals_are_standard_normal_where_the_model_is_true(posterior_of):
    """Kolmogorov-Smirnov on student and censored residuals of their own draws."""
    rows = [(t, 1.0) for t in np.linspace(0, 5, 40)]
    for readout in (
        'noise = "free"\nfamily = "student"',
        'noise = "free"\ndetection_limit = 0.8',
    ):
        posterior = posterior_of(readout, rows=rows)
        known = {"y__sd": 0.3}
        if "y.nu" in posterior.space.names:
            known["y__nu"] = 4.0
        q = np.repeat(at(posterior, **known), 50, axis=0)
        zeta = np.full((50, 40), 1.0)
        data = posterior.observed
        if "student" not in readout:
            # A censored point in the data keeps sigma at its drawn value.
            data.censored[0, 0] = -1
        sample = posterior.noise.draw(q, zeta, data, [np.random.default_rng(i) for i in range(50)])
        u = np.random.default_rng(9).uniform(size=zeta.shape)
        e = posterior.noise.residuals(q, zeta, sample, u)
        assert stats.kstest(e.ravel(), "norm").pvalue > 1e-4
