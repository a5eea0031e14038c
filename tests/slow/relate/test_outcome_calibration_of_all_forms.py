"""The calibration of tests/statistical, for the forms of outcome that it leaves out."""

from __future__ import annotations

import pytest
from outcome_experiments import FORMS, p_values

DONE = ("normal", "negative binomial", "logistic")


@pytest.mark.parametrize("name", [name for name in FORMS if name not in DONE])
def test_ranks_of_other_outcome_models_are_uniform(name: str) -> None:
    found = p_values(name, replicates=20, seed=4)
    assert min(found.values()) > 1e-3, found
