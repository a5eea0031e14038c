"""The calibration experiments of tests/statistical with many more replicates.

Measured: some three and a half minutes of processor time in all, shared by two threads.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from experiments import (
    Data,
    Experiment,
    bounded,
    exploratory,
    front_door,
    gibbs,
    many_categories_some_missing,
    named_nearly_alike,
    named_two_groups,
    p_values,
    rich,
    smallest,
    two_groups,
)

from bayeslca.model.simulate import Parameters
from bayeslca.responses.units import MISSING

SEED = 20261207
REPLICATES = 300
LEVEL = 1e-3
EXPERIMENTS = {
    "two classes": exploratory(2),
    "three classes": exploratory(3, 40),
    "many categories, some missing": many_categories_some_missing(),
    "two groups": two_groups(),
    "named, two groups": named_two_groups(),
    "named, nearly alike": named_nearly_alike(),
    "shared blocks, a constant, a pair, verified cases": rich(),
    "bounds, orders, an equality": bounded(),
}


@pytest.mark.parametrize("experiment", EXPERIMENTS.values(), ids=EXPERIMENTS)
def test_ranks_are_uniform_in_many_replicates(experiment: Experiment) -> None:
    found = p_values(experiment, SEED, REPLICATES)
    assert smallest(found) > LEVEL, found


def half_of_a_pair_left_out(
    experiment: Experiment, data: Data, seed: np.random.SeedSequence
) -> Parameters:
    """Drop an answer whose partner is missing."""
    codes = data.codes.copy()
    half = (codes[:, 2:] == MISSING).any(axis=1)
    codes[half, 2:] = MISSING
    return gibbs(experiment, replace(data, codes=codes), seed)


def test_an_engine_that_leaves_out_half_answered_pairs_is_rejected() -> None:
    found = p_values(rich(), SEED, REPLICATES, half_of_a_pair_left_out)
    assert smallest(found) < LEVEL, found


def test_chains_that_the_stopping_rule_ends_are_calibrated() -> None:
    found = p_values(named_two_groups(), SEED, REPLICATES, front_door)
    assert smallest(found) > LEVEL, found
