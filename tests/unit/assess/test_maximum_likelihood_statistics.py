"""G2, X2, the saturated model and the criteria, against SciPy and full enumeration."""

from __future__ import annotations

from itertools import product
from math import inf, isnan, log

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import power_divergence

import bayeslca.assess.likelihood.saturated as saturated_module
from bayeslca import Groups, Item, LatentClassModel, Responses
from bayeslca.assess.likelihood.fit_statistics import (
    criteria_table,
    information_criteria,
    pearson,
    relative_entropy,
)
from bayeslca.assess.likelihood.saturated import saturated
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.responses.units import MISSING, Units, collapse

SEED = 20261210
ITEMS = tuple(Item(name, ("no", "yes")) for name in ("fees", "accounts", "meets", "fenced"))


def drawn(n: int, missing: float, groups: Groups | None = None) -> Responses:
    model = LatentClassModel(ITEMS, 2, groups=groups)
    mask = np.random.default_rng(SEED).random((n, len(ITEMS))) >= missing
    return model.simulate(n, seed=SEED, answered=mask).responses


@pytest.mark.parametrize("groups", [None, Groups("herd", ("a", "b"))])
def test_statistics_are_scipys_on_the_whole_table(groups: Groups | None) -> None:
    responses = drawn(300, 0.0, groups)
    model = LatentClassModel(ITEMS, 2, groups=groups)
    fit = model.maximum_likelihood(responses, starting_points=20, seed=1)
    cells = np.array(list(product((0, 1), repeat=4)), dtype=np.int16)
    observed, expected = [], []
    for g in range(model.n_groups):
        group = np.full(len(cells), g, dtype=np.int32)
        ones = np.ones(len(cells), dtype=np.int64)
        units = compile_units(model.table, Units(cells, group, ones, np.arange(len(cells))))
        p = np.exp(
            log_unit_likelihood(
                model.table, units, fit.parameters.elements, fit.parameters.prevalence
            )
        )
        here = responses.codes[responses.group_codes == g]
        observed.append([(here == cell).all(axis=1).sum() for cell in cells])
        expected.append(p * len(here))
    f_obs, f_exp = np.concatenate(observed), np.concatenate(expected)
    assert fit.x2 == pytest.approx(power_divergence(f_obs, f_exp, lambda_="pearson")[0], abs=1e-6)
    g2 = power_divergence(f_obs, f_exp, lambda_="log-likelihood")[0]
    assert fit.g2 == pytest.approx(g2, abs=1e-6)
    assert fit.df == model.n_groups * 15 - fit.n_parameters


def by_enumeration(units: Units, n_items: int) -> float:
    """EM over all 2^J cells: what the package never does."""
    cells = np.array(list(product((0, 1), repeat=n_items)))
    held = (units.pattern[:, None] == cells) | (units.pattern[:, None] == MISSING)
    inside = held.all(axis=2).astype(float)  # (unit, cell)
    share = np.full(len(cells), 1.0 / len(cells))
    last = -inf
    for _ in range(200_000):
        p = inside @ share
        value = float(units.count @ np.log(p))
        if value - last < 1e-12:
            break
        last = value
        share = share * (units.count / p @ inside) / units.count.sum()
    return value


@pytest.mark.parametrize("missing", [0.05, 0.3, 0.6])
def test_saturated_model_with_missing_answers_is_that_of_enumeration(missing: float) -> None:
    units = drawn(80, missing).units
    found = saturated(units)
    assert found.log_likelihood == pytest.approx(by_enumeration(units, 4), abs=1e-4)
    assert found.gap < 1e-3


def test_saturated_model_groups_apart_and_many_items() -> None:
    groups = Groups("herd", ("a", "b"))
    responses = drawn(100, 0.2, groups)
    units = responses.units
    apart = 0.0
    for g in range(2):
        at = units.group == g
        part = Units(units.pattern[at], units.group[at], units.count[at], np.arange(at.sum()))
        apart += by_enumeration(part, 4)
    assert saturated(units).log_likelihood == pytest.approx(apart, abs=1e-4)
    # 40 items: 2^40 cells cannot be enumerated.
    rng = np.random.default_rng(SEED)
    codes = rng.integers(0, 2, size=(60, 40)).astype(np.int16)
    codes[rng.random(codes.shape) < 0.1] = MISSING
    wide = collapse(codes, np.zeros(60, np.int32), np.ones(60, np.int64), (2,) * 40)
    # No two cases agree: each has a cell of its own.
    assert saturated(wide).log_likelihood == pytest.approx(60 * log(1 / 60))


def test_too_many_cells_give_a_reason(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(saturated_module, "MOST_CELLS", 3)
    responses = drawn(80, 0.3)
    fit = LatentClassModel(ITEMS, 2).maximum_likelihood(responses, starting_points=5, seed=1)
    assert isnan(fit.g2)
    assert any("more than 3 " in finding.message for finding in fit.findings)
    assert "–" in repr(fit)


def test_missing_answers_are_told_and_x2_is_of_complete_cases() -> None:
    responses = drawn(300, 0.1)
    model = LatentClassModel(ITEMS, 2)
    fit = model.maximum_likelihood(responses, starting_points=20, seed=1)
    assert any(finding.kind == "missing_answers" for finding in fit.findings)
    assert not isnan(fit.g2_p_value)
    assert isnan(fit.x2_p_value)
    units = responses.units
    complete = (units.pattern != MISSING).all(axis=1)
    p = np.exp(
        log_unit_likelihood(
            model.table,
            compile_units(model.table, units),
            fit.parameters.elements,
            fit.parameters.prevalence,
        )
    )[complete]
    count = units.count[complete]
    n = count.sum()
    # The definition, cells without a case added as what is left of n.
    by_hand = np.sum((count - n * p) ** 2 / (n * p)) + n - n * p.sum()
    assert fit.x2 == pytest.approx(by_hand)


def test_g2_with_missing_answers_is_small_under_the_truth() -> None:
    # 40 tables from a true model, 10 % missing: the mean of G2 is about its df, 6.
    model = LatentClassModel(ITEMS, 2)
    p = np.array([[0.85, 0.8, 0.9, 0.75], [0.2, 0.3, 0.15, 0.25]])
    rng = np.random.default_rng(SEED)
    found = []
    for _ in range(40):
        classes = rng.integers(0, 2, size=400)
        codes = (rng.random((400, 4)) < p[classes]).astype(np.int16)
        codes[rng.random(codes.shape) < 0.1] = MISSING
        responses = Responses(ITEMS, codes, np.ones(400, dtype=np.int64))
        fit = model.maximum_likelihood(responses, starting_points=8, seed=1)
        found.append(fit.g2)
    # sd of a chi-square with 6 df is 3.5; 40 tables: 0.55; three times that.
    assert abs(np.mean(found) - 6.0) < 3 * 3.47 / np.sqrt(40)


def test_criteria_by_hand() -> None:
    # Written out from the papers' formulas, N = 100, p = 7, log likelihood -250.
    found = information_criteria(-250.0, 7, 100)
    assert found.aic == 514.0
    assert found.aicc == pytest.approx(514.0 + 2 * 7 * 8 / 92)
    assert found.bic == pytest.approx(500.0 + 7 * 4.605170186)
    assert found.bic_sclove == pytest.approx(500.0 + 7 * log(102 / 24))
    assert found.caic == pytest.approx(found.bic + 7)
    assert isnan(information_criteria(-250.0, 99, 100).aicc)


def test_relative_entropy_at_its_ends() -> None:
    counts = np.array([3, 2])
    assert relative_entropy(np.eye(2), counts) == 1.0
    assert relative_entropy(np.full((2, 2), 0.5), counts) == pytest.approx(0.0)
    assert isnan(relative_entropy(np.ones((2, 1)), counts))
    mixed = np.array([[0.5, 0.5], [1.0, 0.0]])
    assert relative_entropy(mixed, counts) == pytest.approx(1 - 3 / 5)


def test_pearson_by_stratum() -> None:
    counts, p = np.array([8, 2, 5, 5]), np.array([0.5, 0.5, 0.25, 0.75])
    expected = power_divergence([8, 2], [5, 5])[0] + power_divergence([5, 5], [2.5, 7.5])[0]
    assert pearson(counts, p, np.array([0, 0, 1, 1])) == pytest.approx(expected)


def test_above_best_is_by_criterion() -> None:
    class One:
        def __init__(self, value: float) -> None:
            self.criteria = information_criteria(value, 3, 50)

    table = criteria_table({"a": One(-100.0), "b": One(-99.0)})
    assert_allclose(table.query("model == 'a'")["above_best"], 2.0)
    assert_allclose(table.query("model == 'b'")["above_best"], 0.0)
