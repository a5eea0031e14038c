"""The stopping rule."""

from __future__ import annotations

import math

import numpy as np
import pytest

from bayeslca.model.table import UnitTable
from bayeslca.sampling.stopping import StoppingRule, judge, some_units, watched_units

SEED = 20261208


def test_independent_draws_meet_the_rule_and_constants_are_skipped():
    values = np.random.default_rng(SEED).normal(size=(4, 1000))
    found = judge({"a": values, "constant": np.ones((4, 1000))})
    assert found.ess_of == "a"
    assert found.meets(StoppingRule(1000, 1.01))
    assert not found.meets(StoppingRule(10_000, 1.01))
    only_constants = judge({"constant": np.ones((4, 1000))})
    assert only_constants.meets(StoppingRule())
    assert math.isinf(only_constants.ess)


def test_the_worst_quantity_decides():
    rng = np.random.default_rng(SEED)
    good = rng.normal(size=(4, 1000))
    apart = good + np.array([0.0, 0.0, 0.0, 1.0])[:, None]
    slow = np.cumsum(rng.normal(size=(4, 1000)), axis=1)
    found = judge({"good": good, "apart": apart, "slow": slow})
    assert found.r_hat_of in ("apart", "slow")
    assert found.ess_of == "slow"
    assert not judge({"apart": apart}).meets(StoppingRule(10, 1.01))


def test_chains_that_never_move_apart_from_each_other_do_not_pass():
    stuck = np.repeat([[0.0], [1.0], [0.0], [1.0]], 100, axis=1)
    assert not judge({"stuck": stuck}).meets(StoppingRule(10, 1.01))


def test_the_tail_counts_too():
    """Independent signs around a scale that changes slowly: the middle mixes, the tails do not."""
    from arviz_stats.base import array_stats

    rng = np.random.default_rng(SEED)
    log_scale = np.zeros((4, 1000))
    for t in range(1, 1000):
        log_scale[:, t] = 0.98 * log_scale[:, t - 1] + 0.2 * rng.normal(size=4)
    values = rng.normal(size=(4, 1000)) * np.exp(log_scale)
    assert array_stats.ess(values, method="bulk") > 2000
    assert judge({"tails": values}).ess < 800


def units(counts) -> UnitTable:
    n = len(counts)
    return UnitTable(
        row_start=np.arange(0, 2 * n + 1, 2),
        row=np.arange(2 * n),
        count=np.array(counts),
        prevalence_row=np.arange(n) % 2,
        log_weight=np.zeros((0, 3)),
    )


def test_the_commonest_patterns_and_some_rarer_ones_are_watched():
    watched = watched_units(units([1, 9, 2, 8, 3, 7, 4, 6, 5, 1, 1, 1]), most=3)
    assert watched.count.tolist()[:3] == [9, 8, 7]
    assert watched.count.size == 6
    few = watched_units(units([2, 1]), most=5)
    assert few.count.tolist() == [2, 1]


def test_some_units_keep_their_rows():
    chosen = some_units(units([5, 6, 7]), np.array([2, 0]))
    assert chosen.row.tolist() == [4, 5, 0, 1]
    assert chosen.row_start.tolist() == [0, 2, 4]
    assert chosen.count.tolist() == [7, 5]
    assert chosen.prevalence_row.tolist() == [0, 0]
    assert chosen.log_weight.shape == (0, 3)
    with pytest.raises(IndexError):
        some_units(units([5]), np.array([3]))


def test_a_single_chain_is_judged_by_its_effective_size():
    draws = np.random.default_rng(5).normal(size=(1, 2000))
    convergence = judge({"x": draws})
    assert convergence.r_hat == 1.0
    assert convergence.meets(StoppingRule(ess=1000.0))
