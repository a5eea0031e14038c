"""Ranks of prior draws among posterior draws are uniform: joint models of answers and outcome."""

from __future__ import annotations

import pytest
from outcome_experiments import p_values


@pytest.mark.parametrize("name", ["normal", "negative binomial", "logistic"])
def test_ranks_of_outcome_models_are_uniform(name: str) -> None:
    found = p_values(name, replicates=20, seed=3)
    assert min(found.values()) > 1e-3, found
