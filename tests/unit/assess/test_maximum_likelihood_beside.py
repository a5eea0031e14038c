"""Criteria beside a comparison: the table's figures and the paragraph."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.assess.likelihood.criteria_beside import criteria_beside

ITEMS = tuple(lca.Item(name, ("no", "yes")) for name in ("fees", "accounts", "meets", "fenced"))
YES = np.array([[0.95, 0.9, 0.95, 0.85], [0.1, 0.15, 0.05, 0.2]])


def compared(best: int, tied: tuple[int, ...]) -> Any:
    """Stand in for a comparison of one to three classes: what it says is made up."""
    rng = np.random.default_rng(20261214)
    codes = (rng.random((150, 4)) < YES[rng.integers(0, 2, size=150)]).astype(np.int16)
    responses = lca.Responses(ITEMS, codes, np.ones(150, np.int64))
    classes = (1, 2, 3)
    table = pd.DataFrame(
        {
            "elpd": [-400.0, -330.0, -331.0],
            "elpd_diff": [-70.0, 0.0, -1.0],
            "tied": [k in tied for k in classes],
        },
        index=pd.Index(classes, name="classes"),
    )
    posteriors = {
        k: SimpleNamespace(model=lca.LatentClassModel(ITEMS, k), responses=responses)
        for k in classes
    }
    return SimpleNamespace(table=table, posteriors=posteriors, best=best, tied=tied)


def test_criteria_stand_beside_the_comparison() -> None:
    found = criteria_beside(compared(2, (2, 3)), starting_points=10, seed=1)
    bic = {k: fit.bic for k, fit in found.fits.items()}
    smallest = min(bic.values())
    for k, value in bic.items():
        assert found.table.loc[k, "bic"] == pytest.approx(value - smallest)
    assert found.table["n_parameters"].tolist() == [4, 9, 14]
    assert found.table["elpd_diff"].tolist() == [-70.0, 0.0, -1.0]
    assert min(bic, key=lambda k: bic[k]) == 2
    assert "two classes, tied with three classes" in found.agreement
    assert "smallest for two classes: in agreement" in found.agreement
    assert "not in agreement" not in found.agreement
    assert max(map(len, repr(found).splitlines())) <= 80


def test_disagreement_is_said() -> None:
    found = criteria_beside(compared(1, (1,)), starting_points=10, seed=1)
    assert "one class, and no other is tied with it" in found.agreement
    assert "smallest for two classes: not in agreement" in found.agreement
