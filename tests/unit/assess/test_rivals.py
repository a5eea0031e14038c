"""Rival hypotheses: shares from Bayes factors, with what is left to "none of these"."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy.stats import beta

from bayeslca.assess.hypothesis.rivals import NONE_OF_THESE, compare_rivals
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

LOW, HIGH = "P(fees=yes | all) < 0.4", "P(fees=yes | all) > 0.6"


@pytest.fixture(scope="module")
def posterior() -> Posterior:
    frame = pd.DataFrame({"fees": ["yes"] * 8 + ["no"] * 8})
    responses = Responses.from_frame(frame, items=[ItemSpec("fees", categories=("no", "yes"))])
    model = LatentClassModel(responses.items, ["all"])
    return model.sample(responses, seed=1, draws=2000, progress=False)


def factors() -> np.ndarray:
    """Bayes factors of low, high and neither against the model, in closed form."""
    after = beta(9, 9)
    low, high = after.cdf(0.4), after.sf(0.6)
    return np.array([low / 0.4, high / 0.4, (1 - low - high) / 0.2])


def test_shares_follow_from_bayes_factors(posterior: Posterior) -> None:
    table = compare_rivals(posterior, {"low": LOW, "high": [HIGH]}).table
    assert table.index.tolist() == ["low", "high", NONE_OF_THESE]
    exact = factors() / factors().sum()
    assert table["posterior_weight"].to_numpy() == pytest.approx(exact, abs=0.02)
    assert table["posterior_weight"].sum() == pytest.approx(1.0)
    assert table["prior_weight"].to_numpy() == pytest.approx(np.full(3, 1 / 3))
    none = table.loc[NONE_OF_THESE]
    error = none["log_bayes_factor_mcse"]
    assert none["log_bayes_factor"] == pytest.approx(math.log(factors()[2]), abs=4 * error)
    assert 0 < error < 0.05


def test_rivals_that_cover_everything_leave_no_weight_to_none_of_these(
    posterior: Posterior,
) -> None:
    both = {"low": "P(fees=yes | all) < 0.4", "rest": "P(fees=yes | all) >= 0.4"}
    table = compare_rivals(posterior, both).table
    assert table.index.tolist() == ["low", "rest"]
    assert table["prior_weight"].tolist() == [0.5, 0.5]
    asked = compare_rivals(posterior, both, weights={NONE_OF_THESE: 1.0}).table
    assert asked.index.tolist() == ["low", "rest", NONE_OF_THESE]


def test_weights_multiply(posterior: Posterior) -> None:
    found = compare_rivals(
        posterior,
        {"low": LOW, "high": HIGH},
        weights={"low": 3.0, "high": 1.0},
        none_of_these=False,
    )
    shares = np.array([3.0, 1.0]) * factors()[:2]
    assert found.table["posterior_weight"].to_numpy() == pytest.approx(shares / shares.sum())
    assert found.best == "low"
    assert "low: 0.75" in repr(found)


def test_overlapping_and_nested_ones_are_named(posterior: Posterior) -> None:
    found = compare_rivals(
        posterior,
        {
            "half": "P(fees=yes | all) > 0.5",
            "high": HIGH,
            "middle": "0.3 < P(fees=yes | all) < 0.7",
        },
    )
    kinds = {finding.about: finding.kind for finding in found.findings}
    assert kinds == {
        ("half", "high"): "hypotheses_nested",
        ("half", "middle"): "hypotheses_overlap",
        ("high", "middle"): "hypotheses_overlap",
    }
    assert "“high” lies within “half”" in repr(found)
    assert not compare_rivals(posterior, {"low": LOW, "high": HIGH}).findings


@pytest.mark.parametrize(
    ("hypotheses", "weights", "message"),
    [
        ({}, {}, "no rivals"),
        ({"low": LOW, "high": HIGH}, {"lo": 1.0}, "none of low, high"),
        ({"low": LOW, "high": HIGH}, {"low": 0.0}, "positive"),
        ({"low": LOW, "high": HIGH}, {"low": math.nan}, "positive"),
    ],
)
def test_what_cannot_be_weighed(
    posterior: Posterior, hypotheses: dict, weights: dict, message: str
) -> None:
    with pytest.raises(ModelError, match=message):
        compare_rivals(posterior, hypotheses, weights=weights)
