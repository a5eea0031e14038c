"""Direct effects: found where they were put in, and not where there are none."""

from __future__ import annotations

import numpy as np

import bayeslca as lca
from tests.unit.relate.conftest import fitted, study


def test_an_item_that_answers_to_the_covariate_is_found_and_sized():
    frame, items = study(n_cases=500, sharp=0.85, n_items=6)
    rng = np.random.default_rng(4)
    first = frame["is_first"].to_numpy()
    x = (frame["age"] - frame["age"].mean()) / frame["age"].std(ddof=0)
    logit = np.where(first, 1.0, -1.0) + 1.0 * x
    frame["item_6"] = np.where(rng.random(500) < 1 / (1 + np.exp(-logit)), "yes", "no")
    posterior = fitted(frame, items, draws=300)
    found = lca.class_predictors(posterior, frame, "age", ways=("cut",), seed=1, draws=200)
    table = found.direct_effects().set_index("item")
    assert table["p_adjusted"].idxmin() == "item_6"
    assert table.loc["item_6", "p_adjusted"] < 0.001
    assert 0.4 < table.loc["item_6", "log_odds"] < 1.8  # put in: 1; found in one step
    (finding,) = found.direct_effects_by_item.findings
    assert finding.kind == "direct_effect"
    assert finding.about == ("item_6", "age")


def test_without_direct_effects_few_are_claimed(predictors):
    """Eighteen tests at 5 %: more than five false ones have a probability below 1 in 500."""
    table = predictors.direct_effects()
    assert (table["p_value"] < 0.05).sum() <= 5
    assert not (table["p_adjusted"] < 0.05).any()
    assert 0 < table["z"].isna().sum() < len(table)  # answers too rare to test are not tested
