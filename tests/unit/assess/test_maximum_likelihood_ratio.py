"""Likelihood ratio tests: the bootstrap's tables and counting, and the adjusted test's parts."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import chi2, gamma

import bayeslca.assess.likelihood.likelihood_ratio as likelihood_ratio_module
from bayeslca import Groups, Item, LatentClassModel, Responses
from bayeslca.assess.likelihood.likelihood_ratio import (
    _Drawer,
    class_count_test,
    likelihood_ratio_test,
)
from bayeslca.assess.likelihood.lo_mendell_rubin import (
    adjusted_test,
    chi_square_weights,
    weighted_chi_square_tail,
)
from bayeslca.exceptions import ModelError
from bayeslca.responses.units import MISSING

SEED = 20261211
ITEMS = tuple(Item(name, ("no", "yes")) for name in ("fees", "accounts", "meets", "fenced"))
YES = np.array([[0.9, 0.85, 0.9, 0.8], [0.15, 0.2, 0.1, 0.25]])


def two_classes(n: int = 150, missing: float = 0.0, groups: Groups | None = None) -> Responses:
    rng = np.random.default_rng(SEED)
    classes = rng.integers(0, 2, size=n)
    codes = (rng.random((n, 4)) < YES[classes]).astype(np.int16)
    codes[rng.random(codes.shape) < missing] = MISSING
    group = (np.arange(n) % 3 == 0).astype(np.int32) if groups else None
    return Responses(ITEMS, codes, np.ones(n, np.int64), groups=groups, group_codes=group)


@pytest.mark.parametrize("df", [1, 2, 5, 12])
@pytest.mark.parametrize("value", [0.3, 4.0, 25.0])
def test_tail_is_scipys_where_weights_are_equal(df: int, value: float) -> None:
    assert weighted_chi_square_tail(value, np.ones(df)) == pytest.approx(
        chi2(df).sf(value), abs=2e-8
    )
    scaled = weighted_chi_square_tail(value, np.full(df, 0.3))
    assert scaled == pytest.approx(gamma(df / 2, scale=0.6).sf(value), abs=2e-8)


def test_tail_with_weights_of_both_signs() -> None:
    assert weighted_chi_square_tail(0.0, np.array([1.0, -1.0])) == pytest.approx(0.5, abs=1e-6)
    rng = np.random.default_rng(SEED)
    weights = np.array([1.4, 0.8, 0.5, -0.3])
    draws = rng.chisquare(1, size=(400_000, 4)) @ weights
    expected = (draws > 3.0).mean()
    error = np.sqrt(expected * (1 - expected) / 400_000)
    assert abs(weighted_chi_square_tail(3.0, weights) - expected) < 4 * error


def test_weights_of_regular_nested_models_are_ones() -> None:
    # Vuong (1989): with nested models and the truth in the smaller, as many ones as there are
    # extra parameters; the others 0. The test is then the chi-square test, but for the factor.
    rng = np.random.default_rng(SEED)
    n = 20_000
    codes = (rng.random((n, 4)) < [0.4, 0.4, 0.4, 0.7]).astype(np.int16)
    responses = Responses(ITEMS, codes, np.ones(n, np.int64))
    same = [f"P(fees=yes | .) = P({other}=yes | .)" for other in ("accounts", "meets")]
    smaller = LatentClassModel(ITEMS, 1, same).maximum_likelihood(responses, seed=1)
    larger = LatentClassModel(ITEMS, 1).maximum_likelihood(responses, seed=1)
    assert larger.n_parameters - smaller.n_parameters == 2
    weights = chi_square_weights(smaller, larger)
    assert weights is not None
    ordered = np.sort(np.abs(weights))[::-1]
    assert_allclose(ordered[:2], 1.0, atol=0.05)
    assert np.all(ordered[2:] < 0.05)
    statistic, p = adjusted_test(smaller, larger)
    plain = 2 * (larger.log_likelihood - smaller.log_likelihood)
    assert statistic == pytest.approx(plain / (1 + 1 / (2 * np.log(n))))
    assert p == pytest.approx(chi2(2).sf(statistic), abs=0.02)


def test_two_classes_are_found_and_a_third_is_not() -> None:
    responses = two_classes()
    options = {"samples": 39, "seed": 1, "starting_points": 20, "progress": False}
    found = class_count_test(responses, 2, **options)
    assert found.statistic > 50
    assert found.p_value == pytest.approx(1 / 40)
    assert found.adjusted_p_value < 0.001
    third = class_count_test(responses, 3, **options)
    assert third.p_value > 0.1
    assert third.simulated.min() > -1e-3
    at_least = np.sum(third.simulated >= third.statistic)
    assert third.p_value == pytest.approx((1 + at_least) / 40)
    assert third.p_value_mcse == pytest.approx(np.sqrt(third.p_value * (1 - third.p_value) / 39))
    text = repr(third)
    assert "2 v 3 classes" in text
    assert "Jeffries" in text
    assert max(map(len, text.splitlines())) <= 80


def test_tables_keep_groups_and_missing_answers() -> None:
    groups = Groups("herd", ("a", "b"))
    responses = two_classes(200, 0.2, groups)
    model = LatentClassModel(ITEMS, 2, groups=groups)
    fit = model.maximum_likelihood(responses, starting_points=5, seed=1)
    drawn = _Drawer(fit).units(np.random.default_rng(SEED))

    def masks(units):  # type: ignore[no-untyped-def]
        key = np.column_stack([units.group, units.pattern != MISSING])
        distinct, at = np.unique(key, axis=0, return_inverse=True)
        return distinct, np.bincount(at.reshape(-1), weights=units.count)

    for mine, theirs in zip(masks(drawn), masks(responses.units), strict=True):
        assert np.array_equal(mine, theirs)
    assert not np.array_equal(drawn.pattern, responses.units.pattern)
    # Margins of many tables are those of the solution.
    rng = np.random.default_rng(SEED)
    share = []
    for _ in range(200):
        units = _Drawer(fit).units(rng)
        answered = units.pattern[:, 0] != MISSING
        count = units.count[answered]
        share.append((count @ units.pattern[answered, 0]) / count.sum())
    table = fit.response_probability.query("item == 'fees' and category == 'yes'")
    sizes = np.bincount(responses.group_codes[responses.codes[:, 0] != MISSING])
    overall = sizes @ fit.parameters.prevalence / sizes.sum()
    expected = overall @ table["estimate"].to_numpy()
    assert abs(np.mean(share) - expected) < 4 * np.std(share) / np.sqrt(200)


def test_same_seed_same_tables_whatever_the_threads() -> None:
    responses = two_classes()
    one = LatentClassModel(ITEMS, 1).maximum_likelihood(responses, seed=1)
    two = LatentClassModel(ITEMS, 2).maximum_likelihood(responses, seed=1)
    runs = [
        likelihood_ratio_test(one, two, samples=12, seed=3, threads=t, progress=False)
        for t in (1, 2)
    ]
    assert np.array_equal(runs[0].simulated, runs[1].simulated)
    other = likelihood_ratio_test(one, two, samples=12, seed=4, progress=False)
    assert not np.array_equal(runs[0].simulated, other.simulated)


def test_ctrl_c_keeps_what_was_done(monkeypatch: pytest.MonkeyPatch) -> None:
    responses = two_classes()
    one = LatentClassModel(ITEMS, 1).maximum_likelihood(responses, seed=1)
    two = LatentClassModel(ITEMS, 2).maximum_likelihood(responses, seed=1)
    told = []

    def stop_after_some(done: int, planned: int, seconds: float) -> None:
        told.append((done, planned, seconds))
        if 0 < done < planned:
            raise KeyboardInterrupt

    found = likelihood_ratio_test(one, two, samples=20_000, seed=1, progress=stop_after_some)
    assert found.stopped
    assert 0 < found.simulated.size < 20_000
    assert f"{found.planned:,} were planned" in " ".join(repr(found).split())
    assert told[0][1] == 20_000

    def stop_at_once(*_args: object, **_options: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(likelihood_ratio_module, "on_threads", stop_at_once)
    with pytest.raises(KeyboardInterrupt):
        likelihood_ratio_test(one, two, samples=5, seed=1, progress=False)


def test_what_cannot_be_tested_is_refused() -> None:
    responses = two_classes()
    one = LatentClassModel(ITEMS, 1).maximum_likelihood(responses, seed=1)
    two = LatentClassModel(ITEMS, 2).maximum_likelihood(responses, seed=1)
    with pytest.raises(ModelError, match="give the smaller model first"):
        likelihood_ratio_test(two, one)
    with pytest.raises(ModelError, match="1 or more"):
        likelihood_ratio_test(one, two, samples=0)
    with pytest.raises(ModelError, match="give 2 or more"):
        class_count_test(responses, 1)
    other = LatentClassModel(ITEMS, 2).maximum_likelihood(two_classes(90), seed=1)
    with pytest.raises(ModelError, match="different responses"):
        likelihood_ratio_test(one, other)
