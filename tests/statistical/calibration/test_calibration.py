"""The Gibbs engine is calibrated: ranks of true values among its draws are uniform.

Short runs; tests/slow/calibration has many more replicates of the same experiments.
"""

from __future__ import annotations

import numpy as np
import pytest
from experiments import (
    Experiment,
    bounded,
    exploratory,
    many_categories_some_missing,
    named_nearly_alike,
    named_two_groups,
    p_values,
    rich,
    smallest,
    together_in_all_classes,
    together_in_one_class,
    two_groups,
)
from rank_uniformity import p_value

SEED = 20261204
REPLICATES = 40
LEVEL = 1e-3
"""Probability that a right engine fails one experiment."""


@pytest.mark.parametrize(
    "experiment",
    [
        pytest.param(exploratory(2), id="two classes"),
        pytest.param(exploratory(3, 40), id="three classes"),
        pytest.param(many_categories_some_missing(), id="many categories, some missing"),
        pytest.param(two_groups(), id="two groups"),
        pytest.param(named_two_groups(), id="named, two groups"),
        pytest.param(named_nearly_alike(), id="named, nearly alike"),
        pytest.param(rich(), id="shared blocks, a constant, a pair, verified cases"),
        pytest.param(bounded(), id="bounds, orders, an equality"),
        pytest.param(together_in_all_classes(), id="a pair together in all classes"),
        pytest.param(together_in_one_class(), id="three items together in one class"),
    ],
)
def test_ranks_are_uniform(experiment: Experiment) -> None:
    found = p_values(experiment, SEED, REPLICATES)
    assert "log likelihood" in found
    assert smallest(found) > LEVEL, found


@pytest.mark.parametrize("n", [20, 60])
def test_uniform_ranks_are_rejected_as_often_as_stated(n: int) -> None:
    """The p-value itself, against plain simulation: P(p <= level) is at most the level, nearly."""
    ranks = np.random.default_rng(SEED).integers(100, size=(2000, n))
    p = np.array([p_value(one, 100) for one in ranks])
    for level in (0.05, 0.2):
        share, error = np.mean(p <= level), np.sqrt(level * (1 - level) / p.size)
        assert level - 0.03 - 4 * error < share < level + 4 * error  # counts are whole numbers


@pytest.mark.parametrize(
    "shares",
    [
        pytest.param(np.linspace(0.2, 1.8, 100), id="sloped"),
        pytest.param(np.abs(np.linspace(-1, 1, 100)), id="too many far out"),
        pytest.param(1.01 - np.abs(np.linspace(-1, 1, 100)), id="too few far out"),
        pytest.param(np.r_[4.0, np.ones(99)], id="one value too often"),
    ],
)
def test_ranks_that_are_not_uniform_are_rejected(shares: np.ndarray) -> None:
    rng = np.random.default_rng(SEED)
    ranks = rng.choice(100, size=300, p=shares / shares.sum())
    assert p_value(ranks, 100) < LEVEL
