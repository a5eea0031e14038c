"""Collapsing equals pandas' group-by, whatever the width."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bayeslca.responses.units import MISSING, Units, collapse


def _check(codes: np.ndarray, group: np.ndarray, counts: np.ndarray, units: Units) -> None:
    frame = pd.DataFrame(codes)
    frame.insert(0, "group", group)
    answered = (codes != MISSING).any(axis=1)
    keys = list(frame.columns)
    expected = frame.assign(count=counts)[answered].groupby(keys, sort=True)["count"].sum()
    assert units.count.tolist() == expected.tolist()
    found = [tuple(map(int, (g, *p))) for g, p in zip(units.group, units.pattern, strict=True)]
    assert found == [tuple(map(int, np.atleast_1d(key))) for key in expected.index]
    assert np.array_equal(units.unit_of_row < 0, ~answered)
    back = units.unit_of_row[answered]
    assert np.array_equal(units.pattern[back], codes[answered])
    assert np.array_equal(units.group[back], group[answered])
    assert units.n_cases == counts[answered].sum()


@pytest.mark.parametrize(
    ("n_items", "n_categories", "n_groups", "n_rows", "missing"),
    [
        (1, 2, 1, 50, 0.3),
        (7, 2, 1, 500, 0.0),
        (7, 3, 4, 500, 0.1),
        (12, 5, 1, 2000, 0.05),
        (40, 4, 3, 300, 0.2),
        (120, 2, 1, 200, 0.9),
        (3, 64, 2, 400, 0.1),
    ],
)
@pytest.mark.parametrize("counted", [False, True])
def test_equals_group_by(
    n_items: int, n_categories: int, n_groups: int, n_rows: int, missing: float, counted: bool
) -> None:
    rng = np.random.default_rng(7)
    kinds = rng.integers(0, n_categories, (max(n_rows // 4, 1), n_items))
    codes = kinds[rng.integers(0, len(kinds), n_rows)].astype(np.int16)
    codes[rng.random(codes.shape) < missing] = MISSING
    group = rng.integers(0, n_groups, n_rows).astype(np.int32)
    counts = rng.integers(1, 2**45, n_rows) if counted else np.ones(n_rows, dtype=np.int64)
    units = collapse(codes, group, counts, (n_categories,) * n_items)
    _check(codes, group, counts, units)
    assert units.pattern.dtype == np.int16
    assert units.group.dtype == np.int32
    assert units.count.dtype == np.int64


def test_nobody_answered() -> None:
    codes = np.full((3, 2), MISSING, dtype=np.int16)
    units = collapse(codes, np.zeros(3, np.int32), np.ones(3, np.int64), (2, 2))
    assert units.n_units == 0
    assert units.unit_of_row.tolist() == [-1, -1, -1]
