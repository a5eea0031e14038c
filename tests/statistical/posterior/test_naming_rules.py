"""A naming rule beside a prior about one class: both hold of the class of that name.

The exact answer is the posterior without the rule, kept where the rule holds: rejection.
"""

from __future__ import annotations

import numpy as np
import pytest
from arviz_stats.base import array_stats

import bayeslca as lca

SEED = 4
ITEMS = tuple(lca.Item(name, ("no", "yes"), yes="yes") for name in ("fees", "accounts", "meets"))
PRIOR = "P(meets=yes | lapsed) ~ Beta(2, 5)"
RULE = "managed is where P(fees=yes) is highest"


@pytest.fixture(scope="module")
def responses() -> lca.Responses:
    return lca.LatentClassModel(ITEMS, 2).simulate(40, seed=SEED).responses


def named(*statements: str) -> lca.LatentClassModel:
    return lca.LatentClassModel(ITEMS, ("managed", "lapsed"), statements)


def mean_and_error(values: np.ndarray) -> tuple[float, float]:
    """Return the mean of (chain, draw) values and its Monte Carlo standard error."""
    return float(values.mean()), float(array_stats.mcse(values, method="mean"))


def test_prior_and_rule_hold_of_the_same_class(responses: lca.Responses) -> None:
    options = {"seed": SEED, "progress": False, "draws": 5000, "ess": 4000}
    without = named(PRIOR).sample(responses, **options)
    with_rule = named(PRIOR, RULE).sample(responses, **options)

    fees, meets = 1, 5  # columns of "yes"
    free = without.response_probability_draws[:, :, 0]
    holds = free[:, :, 0, fees] > free[:, :, 1, fees]
    share, share_error = mean_and_error(holds.astype(float))
    assert 0.1 < share < 0.95  # the rule says something that the prior does not

    ruled = with_rule.response_probability_draws[:, :, 0]
    assert np.all(ruled[:, :, 0, fees] > ruled[:, :, 1, fees])
    for k, column in ((0, meets), (1, meets), (0, fees), (1, fees)):
        # Ratio estimate of the mean where the rule holds; its error by the delta method.
        kept = free[:, :, k, column]
        exact = float((kept * holds).mean() / share)
        error = mean_and_error((kept - exact) * holds)[1] / share
        mean, own_error = mean_and_error(ruled[:, :, k, column])
        assert abs(mean - exact) < 4 * np.hypot(error, own_error)
    assert share_error < 0.05


def test_rules_alone_leave_the_evidence_to_the_labels(responses: lca.Responses) -> None:
    # Without statements about single classes the rule only names: nothing is bounded.
    assert not named(RULE).table.is_bounded
    assert named(PRIOR, RULE).table.is_bounded
    assert named(PRIOR, RULE).log_bounds_probability.value == pytest.approx(np.log(0.5))
    assert not named(RULE, "P(meets=yes | .) ~ Beta(2, 2)").table.is_bounded
