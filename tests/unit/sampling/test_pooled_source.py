"""The step of pooled units, given classes, against integration on a grid."""

from __future__ import annotations

import numpy as np
from arviz_stats.base import array_stats
from scipy.special import betaln
from scipy.stats import beta

from bayeslca.model.pooled_prevalence import PooledPrevalence, spread_of
from bayeslca.sampling.pooled_source import PooledStep
from bayeslca.sampling.steps import SourceStep

SEED = 20261218
COUNTS = np.array([[3, 1], [0, 4], [9, 2], [1, 0], [0, 0], [5, 5]])
SOURCE = PooledPrevalence(6, np.array([2.0, 1.5]), (1.5, 2.0))


def test_given_classes_the_step_draws_mean_spread_and_prevalences():
    step: SourceStep = PooledStep(SOURCE, np.random.default_rng(SEED))
    rng, n = np.random.default_rng(SEED), 6000
    alpha, shares = np.empty((n, 2)), np.empty((n, 6, 2))
    for i in range(n):
        step.draw(COUNTS, shares[i], rng)
        alpha[i] = step.parameters["concentration"]
    s, m = np.meshgrid(np.linspace(1e-3, 0.999, 600), np.linspace(1e-3, 0.999, 600), indexing="ij")
    a, b = (s**-2 - 1) * m, (s**-2 - 1) * (1 - m)
    log_p = beta.logpdf(s, 1.5, 2.0) + beta.logpdf(m, 2.0, 1.5)
    log_p += sum(betaln(a + one, b + two) - betaln(a, b) for one, two in COUNTS)
    weight = np.exp(log_p - log_p.max())
    weight /= weight.sum()
    checks = {
        "spread": (spread_of(alpha), np.sum(weight * s)),
        "spread squared": (spread_of(alpha) ** 2, np.sum(weight * s**2)),
        "mean": (alpha[:, 0] / alpha.sum(axis=1), np.sum(weight * m)),
        "a unit": (shares[:, 1, 0], np.sum(weight * a / (a + b + 4))),
        "a unit without cases": (shares[:, 4, 0], np.sum(weight * m)),
    }
    for name, (draws, exact) in checks.items():
        error = array_stats.mcse(draws[200:][None], method="mean")
        assert abs(draws[200:].mean() - exact) < 4 * error, name


def test_classes_change_names_in_all_that_the_step_holds():
    step = PooledStep(SOURCE, np.random.default_rng(SEED))
    before, after = np.empty((6, 2)), np.empty((6, 2))
    step.prevalence(before)
    alpha, density = step.parameters["concentration"].copy(), step.log_prior()
    step.permute(np.array([1, 0]))
    step.prevalence(after)
    np.testing.assert_array_equal(after, before[:, ::-1])
    np.testing.assert_array_equal(step.parameters["concentration"], alpha[::-1])
    assert np.isfinite(density)
    assert step.log_prior() != density  # the mean's prior tells the classes apart
