"""Posterior predictive checks by simulation, and on a published table."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.fit.predictive_checks import PredictiveChecks, predictive_checks
from bayeslca.assess.fit.predictive_words import furthest_pairs
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.item import Item
from bayeslca.responses.responses import Responses

SEED = 20261205
REFERENCES = Path(__file__).parents[2] / "references"
QUICK: dict[str, Any] = {
    "chains": 2, "draws": 250, "ess": 200, "r_hat": 1.05, "progress": False,
}  # fmt: skip
STUDIES = 64
CONTINUOUS = ("g2", "x2", "power_divergence", "item_margins", "item_pairs", "sum_scores")


def items(n: int) -> tuple[Item, ...]:
    return tuple(Item(f"item_{j + 1}", ("no", "yes"), yes="yes") for j in range(n))


@cache
def under_a_true_model() -> pd.DataFrame:
    """P-values of studies whose parameters come from the prior, a row a study."""
    model = LatentClassModel(items(5), 2)
    rng = np.random.default_rng(SEED)
    rows = []
    for _ in range(STUDIES):
        answered = rng.random((100, 5)) < 0.95
        responses = model.simulate(100, rng, answered=answered).responses
        posterior = model.sample(responses, seed=int(rng.integers(1 << 31)), **QUICK)
        found = predictive_checks(posterior, replicates=500, seed=int(rng.integers(1 << 31)))
        rows.append(found.overall.set_index("check")["p"])
    return pd.DataFrame(rows)


@pytest.mark.parametrize("check", CONTINUOUS)
def test_p_under_a_true_model_is_about_a_half_and_seldom_extreme(check: str) -> None:
    """Meng (1994), Annals of Statistics 22, 1142-1160.

    Over the prior predictive the posterior predictive p has mean 1/2, varies less than a uniform
    number, and P(p <= a) <= 2 a. Band: 4 standard errors of the simulation, and 0.02 for ties.
    """
    p = under_a_true_model()[check].to_numpy()
    assert abs(p.mean() - 0.5) < 4 * p.std() / np.sqrt(STUDIES) + 0.02
    assert p.std() < np.sqrt(1 / 12)
    allowed = 2 * 0.05
    assert (p <= 0.05).mean() <= allowed + 3 * np.sqrt(allowed * (1 - allowed) / STUDIES)


def test_the_number_of_patterns_is_seldom_extreme_under_a_true_model() -> None:
    p = under_a_true_model()["distinct_patterns"].to_numpy()
    assert (p <= 0.05).mean() <= 0.1 + 3 * np.sqrt(0.09 / STUDIES)


def with_a_dependent_pair(rng: np.random.Generator, n: int = 500) -> Responses:
    """Two classes, six items; half of the first class answers item 2 as item 1."""
    first = rng.random(n) < 0.5
    p = np.where(first[:, None], [0.5, 0.5, 0.9, 0.9, 0.8, 0.8], [0.2, 0.2, 0.2, 0.1, 0.2, 0.1])
    codes = (rng.random((n, 6)) < p).astype(np.int16)
    same = first & (rng.random(n) < 0.6)
    codes[same, 1] = codes[same, 0]
    return Responses(items(6), codes, np.ones(n, dtype=np.int64))


@cache
def of_a_dependent_pair(classes: int) -> tuple[PredictiveChecks, ...]:
    rng = np.random.default_rng(SEED)
    out = []
    for study in range(8):
        responses = with_a_dependent_pair(rng)
        posterior = LatentClassModel(responses.items, classes).sample(
            responses, seed=study, **QUICK
        )
        out.append(predictive_checks(posterior, replicates=500))
    return tuple(out)


def p_of_pairs(checks: PredictiveChecks) -> float:
    return float(checks.overall.set_index("check").loc["item_pairs", "p"])


def test_one_dependent_pair_is_found_and_named() -> None:
    found = of_a_dependent_pair(2)
    caught = [checks for checks in found if p_of_pairs(checks) < 0.05]
    assert len(caught) >= 7  # of 8
    for checks in caught:
        worst = furthest_pairs(checks.pairs)[0]
        assert (worst["item_1"], worst["item_2"]) == ("item_1", "item_2")
        assert worst["pair_residual"] > 2
        assert "item_1 and item_2 go together more than the classes explain" in checks.verdict


def test_enough_classes_take_the_dependent_pair_in() -> None:
    found = of_a_dependent_pair(4)
    assert sum(p_of_pairs(checks) > 0.05 for checks in found) >= 7  # of 8
    pairs = [checks.pairs["pair_residual"].iloc[0] for checks in found]
    before = [checks.pairs["pair_residual"].iloc[0] for checks in of_a_dependent_pair(2)]
    assert np.median(pairs) < 0.5 * np.median(before)


@cache
def carcinoma(classes: int) -> PredictiveChecks:
    frame = pd.read_csv(REFERENCES / "carcinoma_raters_1977.csv")
    raters = [name for name in frame.columns if name != "count"]
    responses = Responses.from_frame(frame, items=raters, counts="count")
    posterior = LatentClassModel(responses.items, classes).sample(
        responses, seed=SEED, progress=False
    )
    return predictive_checks(posterior, seed=1)


def test_carcinoma_ratings_need_three_classes() -> None:
    """Agresti (2002), Categorical Data Analysis, section 13.1 (from memory).

    G2 of one, two, three classes is 476.8, 62.4, 15.3; the table (118 slides, 128 cells) is too
    sparse for a chi-square; two classes miss that raters agree by more, three are adequate.
    """
    p = {k: carcinoma(k).overall.set_index("check")["p"] for k in (1, 2, 3)}
    assert p[1]["g2"] == p[1]["item_pairs"] == 0.0
    assert p[2]["g2"] < 0.02
    assert p[2]["sum_scores"] < 0.05
    assert not carcinoma(2).reproduces
    assert p[3]["g2"] > 0.3
    assert p[3]["item_pairs"] > 0.1
    assert carcinoma(3).reproduces


def test_expected_g2_of_carcinoma_is_far_from_its_degrees_of_freedom() -> None:
    """So sparse a table has no chi-square: replicates say what to expect instead of 104."""
    row = carcinoma(3).overall.set_index("check").loc["g2"]
    assert row["upper"] < 104
