"""Three steps: with sure placement, statsmodels' regressions; with unsure, no bias."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
from statsmodels.discrete.discrete_model import NegativeBinomial
from statsmodels.miscmodels.ordinal_model import OrderedModel

from bayeslca.exceptions import ModelError
from bayeslca.relate.climb import climb
from bayeslca.relate.outcomes.free import FreeNumbers
from bayeslca.relate.outcomes.model import outcome_model
from bayeslca.relate.outcomes.quantities import class_means, effects
from bayeslca.relate.outcomes.three_steps import CORRECTIONS, Correction, three_steps

RNG = np.random.default_rng(sum(map(ord, "three steps")))
N, K = 240, 3
NAMES = ("a", "b", "c")
Z = RNG.integers(K, size=N)
X = RNG.normal(size=(N, 2)) + 0.3 * Z[:, None]
CENTRED = X - X.mean(axis=0)
SURE = np.eye(K)[Z]
DESIGN = np.column_stack([SURE, CENTRED])
ETA = 0.7 * Z + 0.5 * X[:, 0]
NUMBERS = RNG.normal(2.0 * Z + X[:, 0], 1.0 + Z)
YES = (RNG.random(N) < 1 / (1 + np.exp(1.0 - ETA))).astype(float)
COUNTS = RNG.negative_binomial(2, 2 / (2 + np.exp(ETA))).astype(float)
PLACES = np.digitize(ETA + RNG.logistic(size=N), [0.0, 1.0, 2.5]).astype(float)


@pytest.mark.parametrize("correction", CORRECTIONS)
def test_sure_placement_without_covariates(correction: Correction) -> None:
    """Against OLS and GLM of statsmodels with standard errors HC0."""
    families = {"numeric": sm.families.Gaussian(), "binary": sm.families.Binomial()}
    for kind, y in (("numeric", NUMBERS), ("binary", YES), ("count", COUNTS)):
        model = outcome_model(kind, y, K)  # type: ignore[arg-type]
        found = three_steps(model, SURE, correction=correction, class_names=NAMES)
        estimate, error = found.quantities(class_means)
        family = families.get(kind, sm.families.Poisson())
        fit = sm.GLM(y, SURE, family=family).fit(cov_type="HC0")
        mean = np.array([fit.fittedvalues[Z == k][0] for k in range(K)])
        slope = {"numeric": np.ones(K), "binary": mean * (1 - mean), "count": mean}[kind]
        np.testing.assert_allclose(estimate, mean, rtol=1e-4)
        np.testing.assert_allclose(error, fit.bse * slope, rtol=1e-3)


@pytest.mark.parametrize("correction", CORRECTIONS)
def test_sure_placement_with_covariates(correction: Correction) -> None:
    """Against OLS and GLM of statsmodels: intercepts, slopes, standard errors HC0."""
    cases = (
        ("numeric", NUMBERS, sm.families.Gaussian()),
        ("binary", YES, sm.families.Binomial()),
        ("count", COUNTS, sm.families.Poisson()),
    )
    for kind, y, family in cases:
        model = outcome_model(
            kind,  # type: ignore[arg-type]
            y,
            K,
            covariate=X,
            count_model="poisson",
            equal_spread=True,
        )
        found = three_steps(model, SURE, correction=correction, class_names=NAMES)
        estimate, error = found.quantities(lambda _m, b, s: np.concatenate([b[..., 0], s]))
        fit = sm.GLM(y, DESIGN, family=family).fit(cov_type="HC0")
        np.testing.assert_allclose(estimate, fit.params, rtol=2e-3, atol=1e-4)
        np.testing.assert_allclose(error, fit.bse, rtol=2e-3)
        # Means as if all cases were in a class: averaged predictions
        as_if = [
            fit.predict(np.column_stack([np.tile(np.eye(K)[k], (N, 1)), CENTRED])).mean()
            for k in range(K)
        ]
        np.testing.assert_allclose(found.quantities(class_means)[0], as_if, rtol=1e-3)


def test_likelihood_with_sure_placement_of_counts_and_order() -> None:
    """Against NegativeBinomial and OrderedModel of statsmodels."""
    counts = outcome_model("count", COUNTS, K, covariate=X, equal_spread=True)
    found = three_steps(counts, SURE, correction="fixed_error_likelihood", class_names=NAMES)
    by_class, shared = found.parameters
    fit = NegativeBinomial(COUNTS, DESIGN).fit(disp=False)
    np.testing.assert_allclose([*by_class[:, 0], *shared], fit.params[:-1], rtol=2e-3, atol=1e-3)
    assert by_class[0, 1] == pytest.approx(1 / fit.params[-1], rel=5e-3)

    places = outcome_model("ordered", PLACES, K, covariate=X, n_levels=4)
    found = three_steps(places, SURE, correction="fixed_error_likelihood", class_names=NAMES)
    by_class, shared = found.parameters
    fit = OrderedModel(PLACES, DESIGN[:, 1:], distr="logit").fit(method="bfgs", disp=False)
    np.testing.assert_allclose([*by_class[1:, 0], *shared[:2]], fit.params[:4], atol=3e-3)


def unsure(n: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Classes (n,) and calibrated memberships (n, 2): P(class) given one noisy sign of it."""
    prior, error = np.array([0.7, 0.3]), 0.2
    z = (rng.random(n) < prior[1]).astype(int)
    sign = np.where(rng.random(n) < error, 1 - z, z)
    likelihood = np.where(np.arange(2) == sign[:, None], 1 - error, error)
    share = prior * likelihood
    return z, share / share.sum(axis=1, keepdims=True)


@pytest.mark.parametrize("correction", CORRECTIONS)
@pytest.mark.parametrize("by", ["modal", "proportional"])
def test_both_corrections_undo_attenuation(correction: Correction, by: str) -> None:
    """Bolck, Croon & Hagenaars 2004; Vermunt 2010: the placed class alone attenuates."""
    rng = np.random.default_rng(5)
    z, membership = unsure(4_000, rng)
    y = rng.normal(2.0 * z, 1.0)
    placed = membership.argmax(axis=1)
    naive = y[placed == 1].mean() - y[placed == 0].mean()
    assert naive < 1.3  # the truth is 2
    model = outcome_model("numeric", y, 2)
    found = three_steps(model, membership, correction=correction, class_names=("a", "b"), by=by)  # type: ignore[arg-type]
    gap, error = found.quantities(lambda m, b, s: np.diff(class_means(m, b, s)))
    assert error[0] < 0.15
    assert abs(gap[0] - 2.0) < 4 * error[0]


def test_standard_errors_grow_with_the_first_step() -> None:
    rng = np.random.default_rng(6)
    z, membership = unsure(200, rng)
    model = outcome_model("numeric", rng.normal(2.0 * z, 1.0), 2)
    logs = np.log(membership)
    draws = np.exp(logs + rng.normal(0, 0.5, (30, 1, 2)))
    draws /= draws.sum(axis=2, keepdims=True)
    for correction in CORRECTIONS:
        found = three_steps(
            model,
            membership,
            correction=correction,
            class_names=("a", "b"),
            membership_draws=draws,
        )
        assert np.all(np.diag(found.covariance)[:2] > np.diag(found.of_third_step)[:2] * 1.02)


def test_negative_weights_that_leave_no_estimate_are_named() -> None:
    membership = np.array([[0.6, 0.4]] * 10 + [[0.4, 0.6]] * 10)
    yes = np.array([1.0] * 8 + [0.0] * 2 + [0.0] * 10)
    model = outcome_model("binary", yes, 2)
    with pytest.raises(ModelError, match=r"negative weights.*share in class a.*no estimate"):
        three_steps(model, membership, correction="inverse_error_matrix", class_names=("a", "b"))
    with pytest.raises(ModelError, match="no correction 'inverse'"):
        three_steps(model, membership, correction="inverse", class_names=("a", "b"))  # type: ignore[arg-type]


def test_a_saddle_is_no_maximum() -> None:
    top = climb(lambda free: np.array([-(free[0] ** 2) + free[1] ** 2 - 1e-3 * free[1] ** 4]),
                np.array([0.4, 0.0]))  # fmt: skip
    assert not top.is_definite
    assert climb(lambda free: -((free - 1.0) ** 2), np.zeros(2)).is_definite


@pytest.mark.parametrize("kind", ["numeric", "binary", "count", "ordered"])
@pytest.mark.parametrize("adjusted", [False, True])
def test_free_numbers_and_back(kind: str, adjusted: bool) -> None:
    y = {"numeric": NUMBERS, "binary": YES, "count": COUNTS, "ordered": PLACES}[kind]
    model = outcome_model(
        kind,  # type: ignore[arg-type]
        y,
        K,
        n_levels=4 if kind == "ordered" else 0,
        covariate=X if adjusted else None,
    )
    by_class, shared = model.start(Z, np.random.default_rng(1))
    numbers = FreeNumbers(model)
    free = numbers.free(by_class, shared)
    assert free.size == numbers.size
    again = numbers.parameters(free)
    np.testing.assert_allclose(class_means(model, *again), class_means(model, by_class, shared))
    np.testing.assert_allclose(effects(model, *again, 0, 2), effects(model, by_class, shared, 0, 2))
