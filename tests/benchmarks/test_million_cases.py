"""A million cases with seven yes/no items, from a Parquet file to a posterior.

Run with ``pytest tests/benchmarks/test_million_cases.py -s``. Reading and collapsing stand beside
reading the file with polars or pandas and grouping by all items, in one run. Processor time of
the process (its threads added up) stands beside the clock's, which other work on the machine
makes longer. The target for collapsing alone is in test_collapse.py.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pytest

import bayeslca as lca

N_CASES = 1_000_000
NAMES = [f"item{j}" for j in range(7)]
ROUNDS = 5


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rng = np.random.default_rng(20261201)
    latent_class = rng.choice(3, p=[0.5, 0.3, 0.2], size=N_CASES)
    yes = rng.beta(0.8, 0.8, size=(3, len(NAMES)))
    said = rng.random((N_CASES, len(NAMES))) < yes[latent_class]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=NAMES)
    path = tmp_path_factory.mktemp("million") / "answers.parquet"
    frame.to_parquet(path)
    return path


def _best(work: Callable[[], Any]) -> tuple[float, float]:
    """Return the least processor time and the least time by the clock of some rounds."""
    spent = []
    for _ in range(ROUNDS):
        at = time.process_time(), time.perf_counter()
        work()
        spent.append((time.process_time() - at[0], time.perf_counter() - at[1]))
    return min(cpu for cpu, _ in spent), min(clock for _, clock in spent)


def test_reading_and_collapsing(path: Path) -> None:
    spent = {
        "bayeslca": _best(lambda: lca.Responses.read(path, items=NAMES).units),
        "polars": _best(lambda: pl.read_parquet(path).group_by(NAMES).len()),
        "pandas": _best(lambda: pd.read_parquet(path).groupby(NAMES).size()),
    }
    for name, (cpu, clock) in spent.items():
        print(f"{name}: {cpu:.2f} s of processor time, {clock:.2f} s by the clock")
    assert spent["bayeslca"][0] < 2 * spent["pandas"][0]


def test_from_file_to_posterior(path: Path) -> None:
    def whole() -> lca.Posterior:
        responses = lca.Responses.read(path, items=NAMES)
        return lca.LatentClassModel(responses.items, 3).sample(responses, seed=7, progress=False)

    whole()  # numba compiles, or reads what it compiled
    at = time.process_time(), time.perf_counter()
    posterior = whole()
    cpu, clock = time.process_time() - at[0], time.perf_counter() - at[1]
    sampling = posterior.draws.seconds
    print(
        f"{cpu:.1f} s of processor time, {clock:.1f} s by the clock, of which sampling "
        f"{sampling:.1f} s ({posterior.draws.sweeps} sweeps of {posterior.draws.n_chains} chains, "
        f"{posterior.unit_table.count.size} patterns)"
    )
    assert posterior.diagnostics().trustworthy
