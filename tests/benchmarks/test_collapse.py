"""Collapsing a million cases with seven items, against group-by of polars and pandas.

Run with ``pytest tests/benchmarks/test_collapse.py --benchmark-group-by=group``. The comparison
that matters is within one run. Reading has no rival: its row says how long it takes.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pytest

from bayeslca.responses.responses import Responses
from bayeslca.responses.units import collapse

N_CASES, N_ITEMS = 1_000_000, 7
NAMES = [f"item{j}" for j in range(N_ITEMS)]


@pytest.fixture(scope="module")
def codes() -> np.ndarray:
    rng = np.random.default_rng(1)
    return np.asfortranarray(rng.integers(-1, 2, (N_CASES, N_ITEMS)).astype(np.int16))


@pytest.mark.benchmark(group="collapse")
def test_ours(benchmark: Any, codes: np.ndarray) -> None:
    group, counts = np.zeros(N_CASES, np.int32), np.ones(N_CASES, np.int64)
    units = benchmark(collapse, codes, group, counts, (2,) * N_ITEMS)
    assert units.n_units == 3**N_ITEMS - 1


@pytest.mark.benchmark(group="collapse")
def test_polars(benchmark: Any, codes: np.ndarray) -> None:
    frame = pl.DataFrame({name: codes[:, j] for j, name in enumerate(NAMES)})
    assert len(benchmark(lambda: frame.group_by(NAMES).len())) == 3**N_ITEMS


@pytest.mark.benchmark(group="collapse")
def test_pandas(benchmark: Any, codes: np.ndarray) -> None:
    frame = pd.DataFrame({name: codes[:, j] for j, name in enumerate(NAMES)})
    assert len(benchmark(lambda: frame.groupby(NAMES).size())) == 3**N_ITEMS


@pytest.mark.benchmark(group="read")
@pytest.mark.parametrize("kind", ["parquet", "csv"])
def test_read(benchmark: Any, codes: np.ndarray, tmp_path: Path, kind: str) -> None:
    answers = np.array(["no", "yes", None], dtype=object)
    frame = pd.DataFrame({name: answers[codes[:, j]] for j, name in enumerate(NAMES)})
    path = tmp_path / f"answers.{kind}"
    if kind == "csv":
        frame.to_csv(path, index=False)
    else:
        frame.to_parquet(path)
    responses = benchmark.pedantic(Responses.read, (path,), {"items": NAMES}, rounds=3)
    assert responses.units.n_units == 3**N_ITEMS - 1
