"""Densities and draws of outcomes against SciPy, closed forms and integration."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from scipy.special import expit, gammaln

from bayeslca.relate.outcomes.model import OutcomeModel, outcome_model
from bayeslca.relate.outcomes.quantities import category_probabilities, class_means, effects
from bayeslca.sampling.outcome_density import fill_log_density
from bayeslca.sampling.outcome_draws import inner_chain

RNG = np.random.default_rng(sum(map(ord, "outcome kernels")))
N = 40
X = RNG.normal(size=(N, 2))
NUMBERS = RNG.normal(3.0, 2.0, N)
COUNTS = RNG.negative_binomial(1.5, 0.3, N).astype(float)
YES = (RNG.random(N) < 0.3).astype(float)
PLACES = RNG.integers(0, 3, N).astype(float)

ALL = {
    "numeric": outcome_model("numeric", NUMBERS, 2),
    "binary": outcome_model("binary", YES, 2),
    "poisson": outcome_model("count", COUNTS, 2, count_model="poisson"),
    "count": outcome_model("count", COUNTS, 2),
    "ordered": outcome_model("ordered", PLACES, 2, n_levels=3),
    "numeric, adjusted": outcome_model("numeric", NUMBERS, 2, covariate=X),
    "binary, adjusted": outcome_model("binary", YES, 2, covariate=X),
    "poisson, adjusted": outcome_model("count", COUNTS, 2, covariate=X, count_model="poisson"),
    "count, adjusted": outcome_model("count", COUNTS, 2, covariate=X),
    "ordered, adjusted": outcome_model("ordered", PLACES, 2, n_levels=3, covariate=X),
}


def scipy_density(name: str, model: OutcomeModel, by_class: np.ndarray, shared: np.ndarray):
    """Log densities (N, K) by SciPy."""
    line = (model.covariate @ shared[: model.n_slopes])[:, None]
    first, y = by_class[:, 0], model.value[:, None]
    kind = name.split(",")[0]
    if kind == "numeric":
        return stats.norm.logpdf(y, first + line, np.sqrt(by_class[:, 1]))
    if kind == "binary":
        return stats.bernoulli.logpmf(y, expit(first + line) if line.any() else first)
    if kind == "ordered" and line.any():
        eta = first + line
        below = expit(shared[2:] - eta[..., None])
        whole = np.concatenate([0 * eta[..., None], below, 0 * eta[..., None] + 1], axis=-1)
        return np.log(
            np.take_along_axis(np.diff(whole, axis=-1), y[..., None].astype(int), axis=-1)[..., 0]
        )
    if kind == "ordered":
        return np.log(by_class[:, model.value.astype(int)].T)
    rate = np.exp(first + line) if line.any() else first + 0 * y
    if kind == "poisson":
        return stats.poisson.logpmf(y, rate)
    return stats.nbinom.logpmf(y, by_class[:, 1], by_class[:, 1] / (by_class[:, 1] + rate))


@pytest.mark.parametrize("name", ALL)
def test_log_density_is_scipys(name: str) -> None:
    model = ALL[name]
    for seed in range(3):
        by_class, shared = model.draw_prior(np.random.default_rng(seed))
        shared[: model.n_slopes] *= 0.1  # rates within what floats hold
        out = np.empty((N, 2))
        fill_log_density(model.data(), by_class, shared, out)
        expected = scipy_density(name, model, by_class, shared)
        np.testing.assert_allclose(out, expected, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("name", ["numeric", "binary", "poisson", "count", "ordered"])
def test_log_prior_is_scipys(name: str) -> None:
    model = ALL[name]
    by_class, shared = model.draw_prior(np.random.default_rng(1))
    prior, first = model.prior, by_class[:, 0]
    a, b = prior.pseudo
    if name == "numeric":
        df, scale = prior.spread
        expected = stats.norm.logpdf(first, *prior.location).sum()
        expected += stats.invgamma.logpdf(by_class[:, 1], df / 2, scale=df * scale / 2).sum()
    elif name == "binary":
        expected = stats.beta.logpdf(first, a, b).sum()
    elif name == "ordered":
        expected = sum(stats.dirichlet.logpdf(p, np.full(3, a)) for p in by_class)
    else:
        expected = stats.gamma.logpdf(first, a, scale=1 / b).sum()
        if name == "count":
            expected += stats.lognorm.logpdf(by_class[:, 1], prior.spread[1]).sum()
    assert model.log_prior(by_class, shared) == pytest.approx(expected)


def weighing(model: OutcomeModel, **prior: tuple[float, float]) -> OutcomeModel:
    return replace(model, prior=replace(model.prior, **prior))


def chain(model: OutcomeModel, sweeps: int = 4000) -> tuple[np.ndarray, np.ndarray]:
    """Draws of the parameters of a model with one class."""
    rng = np.random.default_rng(7)
    data = model.data()
    by_class, shared = model.start(np.zeros(N, dtype=int), rng)
    weight, share, none = np.zeros((N, 1)), np.empty((N, 1)), np.zeros(0)
    kept = []
    for _ in range(sweeps):
        inner_chain(data, weight, 3, by_class, shared, share, none, rng)
        kept.append((by_class[0].copy(), shared.copy()))
    return np.array([one[0] for one in kept]), np.array([one[1] for one in kept])


def assert_drawn_from(draws: np.ndarray, cdf: Callable[[np.ndarray], np.ndarray]) -> None:
    """Mean and square of the ranks are those of uniform numbers: 4 standard errors, ESS n / 4."""
    u = cdf(draws)
    n = draws.size / 4
    assert abs(u.mean() - 1 / 2) < 4 * np.sqrt(1 / 12 / n)
    assert abs((u**2).mean() - 1 / 3) < 4 * np.sqrt(4 / 45 / n)


def test_one_class_has_closed_forms() -> None:
    # Priors that weigh, so that a wrong one shows
    model = weighing(outcome_model("binary", YES, 1), pseudo=(9.0, 3.0))
    a, b = model.prior.pseudo
    draws, _ = chain(model)
    assert_drawn_from(draws[:, 0], stats.beta(a + YES.sum(), b + N - YES.sum()).cdf)
    model = outcome_model("count", COUNTS, 1, count_model="poisson")
    model = weighing(model, pseudo=(30.0, 15.0))
    a, b = model.prior.pseudo
    draws, _ = chain(model)
    assert_drawn_from(draws[:, 0], stats.gamma(a + COUNTS.sum(), scale=1 / (b + N)).cdf)
    model = weighing(outcome_model("ordered", PLACES, 1, n_levels=3), pseudo=(6.0, 1.0))
    counts = np.bincount(PLACES.astype(int)) + model.prior.pseudo[0]
    draws, _ = chain(model)
    assert_drawn_from(draws[:, 1], stats.beta(counts[1], counts.sum() - counts[1]).cdf)


def grid_cdf(log_density: np.ndarray, grid: np.ndarray, axis: int):
    p = np.exp(log_density - log_density.max()).sum(axis=1 - axis)
    cumulated = np.cumsum(p) / p.sum()
    return lambda x: np.interp(x, grid, cumulated - 0.5 * p / p.sum())


def test_one_class_by_integration() -> None:
    """Normal and negative binomial against two-dimensional sums over a grid."""
    model = weighing(outcome_model("numeric", NUMBERS, 1), location=(2.0, 0.4), spread=(12.0, 2.0))
    df, scale = model.prior.spread
    draws, _ = chain(model)
    mean = np.linspace(0.0, 6.0, 400)
    log_var = np.linspace(-1.0, 4.0, 400)
    m, v = mean[:, None], np.exp(log_var)
    total = stats.norm.logpdf(m, *model.prior.location) + log_var
    total = total + stats.invgamma.logpdf(v, df / 2, scale=df * scale / 2)
    total = total - 0.5 * N * log_var - 0.5 * ((NUMBERS[:, None, None] - m) ** 2).sum(axis=0) / v
    assert_drawn_from(draws[:, 0], grid_cdf(total, mean, 0))
    assert_drawn_from(np.log(draws[:, 1]), grid_cdf(total, log_var, 1))

    model = weighing(outcome_model("count", COUNTS, 1), pseudo=(30.0, 15.0), spread=(1.0, 0.3))
    a, b = model.prior.pseudo
    draws, _ = chain(model)
    log_rate, log_size = np.linspace(-1, 3.5, 400), np.linspace(-4, 6, 400)
    rate, size = np.exp(log_rate)[:, None], np.exp(log_size)
    total = stats.gamma.logpdf(rate, a, scale=1 / b) + log_rate[:, None]
    total = total + stats.norm.logpdf(log_size, *model.prior.spread)
    total = total + gammaln(COUNTS[:, None] + size).sum(axis=0) - N * gammaln(size)
    total = total + N * size * np.log(size) + COUNTS.sum() * np.log(rate)
    total = total - (N * size + COUNTS.sum()) * np.log(rate + size)
    assert_drawn_from(np.log(draws[:, 0]), grid_cdf(total, log_rate, 0))
    assert_drawn_from(np.log(draws[:, 1]), grid_cdf(total, log_size, 1))


@pytest.mark.parametrize("kind", ["binary", "poisson", "ordered", "count", "numeric"])
def test_slopes_by_integration(kind: str) -> None:
    """One class, one covariate: importance weights on prior-free draws of a wide normal."""
    y = {"numeric": NUMBERS, "binary": YES, "ordered": PLACES}.get(kind, COUNTS)
    model = outcome_model(
        "count" if kind == "poisson" else kind,  # type: ignore[arg-type]
        y,
        1,
        n_levels=3 if kind == "ordered" else 0,
        covariate=X[:, :1],
        count_model="poisson" if kind == "poisson" else "negative_binomial",
    )
    by_class, shared = chain(model, 3000)
    draws = np.column_stack([by_class, shared])
    if model.has_spread:
        draws[:, 1] = np.log(draws[:, 1])
    centre, spread = draws.mean(axis=0), 1.3 * np.cov(draws, rowvar=False)
    proposal = stats.multivariate_t(centre, spread, df=7, seed=3)
    points = proposal.rvs(4000)
    data, out, log_weight = model.data(), np.empty((N, 1)), np.full(len(points), -np.inf)
    for i, point in enumerate(points):
        b, s = point[None, : model.columns].copy(), point[model.columns :].copy()
        jacobian = 0.0
        if model.has_spread:
            jacobian, b[0, 1] = b[0, 1], np.exp(b[0, 1])
        if np.all(np.diff(s[1:]) > 0):
            fill_log_density(data, b, s, out)
            log_weight[i] = out.sum() + model.log_prior(b, s) + jacobian
    log_weight -= proposal.logpdf(points)
    weight = np.exp(log_weight - log_weight.max())
    weight /= weight.sum()
    mean = weight @ points
    sd = np.sqrt(weight @ (points - mean) ** 2)
    error = np.sqrt((weight**2 @ (points - mean) ** 2) + sd**2 / (3000 / 6))
    assert np.all(np.abs(centre - mean) < 4 * error)
    # the error of a standard deviation is about that of the mean over the square root of 2
    assert np.all(np.abs(draws.std(axis=0) - sd) < 4 * error)


def test_quantities_of_a_known_case() -> None:
    model = ALL["ordered"]
    by_class = np.array([[0.2, 0.3, 0.5], [0.6, 0.4, 0.0]])
    np.testing.assert_allclose(class_means(model, by_class, np.zeros(0)), [2.3, 1.4])
    # by hand: P(a > b) + P(a = b) / 2 = 0.5 + 0.3 * (0.6 + 0.2) + 0.2 * 0.3
    assert effects(model, by_class, np.zeros(0), 0, 1) == pytest.approx(0.80)
    numeric = ALL["numeric"]
    by_class = np.array([[5.0, 4.0], [2.0, 14.0]])
    assert effects(numeric, by_class, np.zeros(0), 0, 1) == pytest.approx(1.0)
    binary = np.array([[0.5], [0.25]])
    assert effects(ALL["binary"], binary, np.zeros(0), 0, 1) == pytest.approx(3.0)
    adjusted = ALL["ordered, adjusted"]
    p = category_probabilities(adjusted, np.array([[0.3], [-0.2]]), np.array([0.1, 0.2, -1, 1.0]))
    np.testing.assert_allclose(p.sum(axis=-1), 1.0)
    assert p[0, 2] > p[1, 2]
