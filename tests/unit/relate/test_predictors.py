"""Predictors of class: tables, options, findings, refusals."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.exceptions import ModelError, ResponsesError
from bayeslca.model.probabilities import response_probability
from bayeslca.relate.predictors.findings import _groups
from bayeslca.relate.predictors.separation import find_separation
from tests.unit.relate.conftest import fitted, study


def test_odds_ratios_of_all_ways_in_one_table(predictors):
    table = predictors.odds_ratios(against="second")
    assert table["way"].unique().tolist() == ["joint", "cut", "three_steps"]
    age = table[table["covariate"] == "age"]
    assert (age["odds_ratio_lower"] > 1.0).all()
    assert np.allclose(np.log(table["odds_ratio"]), table["median"])
    drawn = table[table["way"] != "three_steps"]
    assert (drawn["r_hat"] < 1.02).all()
    assert table.attrs["interval"] == 0.95


def test_no_class_is_the_reference(predictors):
    """Odds ratios against one class are the inverse of those against the other."""
    one, two = (predictors.odds_ratios(against=name) for name in ("first", "second"))
    assert np.allclose(one["odds_ratio"] * two["odds_ratio"], 1.0)
    assert np.allclose(one["odds_ratio_lower"] * two["odds_ratio_upper"], 1.0)


def test_a_seed_gives_the_same_draws(sharp_frame, sharp_posterior, predictors):
    again = lca.class_predictors(
        sharp_posterior, sharp_frame, "age + district", ways=("cut",), seed=3, draws=300
    )
    assert np.array_equal(again.coefficients["cut"], predictors.coefficients["cut"])
    assert again.ways == ("cut",)
    assert again.main_way == "cut"


def test_marginal_effects_sum_to_nought_over_the_classes(predictors):
    table = predictors.marginal_effects(way="joint")
    assert set(table["change"]) == {
        f"a rise by {predictors.design.spread_of('age'):.3g}",
        *(f"{one} against hill" for one in ("lake", "plain")),
    }
    sums = table.groupby("change")["mean"].sum()
    assert np.allclose(sums, 0.0, atol=1e-12)


def test_probabilities_along_a_covariate(predictors, sharp_frame):
    table = predictors.class_probabilities(along="age", points=5)
    assert np.allclose(table.groupby("value")["mean"].sum(), 1.0)
    assert table["value"].min() == sharp_frame["age"].min()
    first = table[table["latent_class"] == "first"]["median"].to_numpy()
    assert np.all(np.diff(first) > 0)
    by_district = predictors.class_probabilities(along="district")
    assert by_district["value"].unique().tolist() == ["hill", "lake", "plain"]
    with pytest.raises(ModelError, match=r"no covariate 'agee' \(near names: 'age'\)"):
        predictors.class_probabilities(along="agee")


def test_prediction_for_new_cases(predictors):
    new = pd.DataFrame({"age": [2.0, 20.0], "district": ["lake", "hill"]})
    table = predictors.predict(new)
    first = table[table["latent_class"] == "first"]
    assert first["median"].iloc[0] < 0.2 < 0.8 < first["median"].iloc[1]
    with pytest.raises(ModelError, match="'valley' was not among the cases"):
        predictors.predict(new.assign(district="valley"))


def test_words_say_what_is_clear(predictors):
    text = str(predictors)
    assert "first is more probable by" in text
    assert "for age" in text


def test_direct_effects_have_a_row_for_each_item_and_column(predictors):
    table = predictors.direct_effects()
    assert len(table) == 6 * 3
    tested = table.dropna()
    assert (tested["p_adjusted"] >= tested["p_value"]).all()


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"formula": "agee"}, r"no column 'agee' \(near names: 'age'"),
        ({"ways": ("both",)}, "name one or more of joint, cut, three_steps"),
        ({"prior_scale": 0.0}, "both are above 0"),
        ({"correction": "bch"}, "known are fixed_error_likelihood and inverse_error_matrix"),
    ],
)
def test_wrong_options_are_named(sharp_frame, sharp_posterior, options, message):
    given = {"formula": "age", "ways": ("three_steps",)} | options
    with pytest.raises((ModelError, ResponsesError), match=message):
        lca.class_predictors(sharp_posterior, sharp_frame, **given)


def test_separation_is_found_and_what_separates_is_named():
    """Albert & Anderson (1984): complete, partial, and none."""
    x = np.array([-2.0, -1.0, -0.5, 0.5, 1.0, 2.0])
    design = np.column_stack([np.ones(6), x, [1, -1, 1, -1, 1, -1]])
    names = ["intercept", "age", "noise"]
    complete = find_separation(design, (x > 0).astype(int), names, 2)
    assert complete.complete
    assert "age" in complete.columns
    tied = np.array([0, 0, 0, 1, 1, 1])
    ties = np.column_stack([np.ones(6), [-1, -1, 0, 0, 1, 1]])
    partial = find_separation(ties, tied, names[:2], 2)
    assert not partial.complete
    assert partial.columns == ("age",)
    mixed = find_separation(design[:, :2], np.array([0, 1, 0, 1, 0, 1]), names[:2], 2)
    assert mixed is None


def test_separation_is_a_finding(sharp_frame, sharp_posterior):
    frame = sharp_frame.assign(size=sharp_frame["is_first"] * 5.0 + sharp_frame["age"] / 100)
    found = lca.class_predictors(
        sharp_posterior, frame, "size", ways=("cut", "three_steps"), seed=1
    )
    kinds = {finding.kind for finding in found.findings}
    assert {"covariates_separate_classes", "three_steps_failed"} <= kinds
    assert found.three_steps is None


def test_drawn_classes_know_the_covariates():
    """Cases with the same answers are drawn by their covariate: shares are those of Bayes' rule."""
    number = 400
    frame, items = study(sharp=0.75, slope=2.0, n_items=4)
    posterior = fitted(frame, items, draws=200)
    predictors = lca.class_predictors(posterior, frame, "age", ways=("cut",), seed=3, draws=200)
    table = lca.plausible_values(posterior, number=number, seed=5, given=predictors)
    assert table["made"].unique().tolist() == ["made with the predictors age"]
    first = (table.filter(like="draw_") == "first").to_numpy().mean(axis=1)
    exact = _memberships(predictors)
    error = np.sqrt(exact * (1 - exact) / number)
    assert np.all(np.abs(first - exact) < 5 * error + 2e-3)  # the largest of 120 cases
    alone = posterior.membership()["probability_first"].to_numpy()
    assert np.abs(exact - alone).max() > 0.2


def _memberships(predictors):
    """P(first | answers, covariates), averaged over all draws of the cut, by Bayes' theorem."""
    found, posterior = predictors.draws["cut"], predictors.posterior
    response = response_probability(posterior.table, np.concatenate(found.draws.elements))[:, 0]
    odds = predictors.design.matrix @ np.concatenate(found.coefficients).transpose(0, 2, 1)
    joint = np.exp(odds - odds.max(axis=-1, keepdims=True))  # (draw, case, K)
    codes, start = posterior.responses.codes, posterior.table.item_start
    for j in range(codes.shape[1]):
        said = codes[:, j] >= 0
        joint[:, said] *= response[:, :, start[j] + codes[said, j]].transpose(0, 2, 1)
    return (joint / joint.sum(axis=-1, keepdims=True)).mean(axis=0)[:, 0]


def test_drawn_classes_need_a_posterior(sharp_frame, sharp_posterior):
    found = lca.class_predictors(sharp_posterior, sharp_frame, "age", ways=("three_steps",), seed=1)
    with pytest.raises(ModelError, match="Add the way 'cut' or 'joint'"):
        lca.plausible_values(sharp_posterior, number=2, given=found)


@pytest.mark.parametrize(
    ("pooled", "covariates", "levels"),
    [(True, ("age",), ["warning"]), (False, ("age",), ["note"]), (True, ("age", "herd"), [])],
)
def test_groups_that_the_regression_does_not_know_are_named(pooled, covariates, levels):
    model = SimpleNamespace(groups=SimpleNamespace(name="herd"), pooled=pooled)
    found = list(_groups(SimpleNamespace(model=model), SimpleNamespace(covariates=covariates)))
    assert [one.level for one in found] == levels
    assert all("groups of herd" in one.message for one in found)
