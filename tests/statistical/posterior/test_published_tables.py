"""Two classes on published tables: the posteriors computed for them outside this project.

Sources: tests/references/references.toml, "computed_posterior" of Stouffer & Toby (1951), Landis &
Koch (1977) and Dayton (1998): own Gibbs sampler in plain NumPy, flat priors. Monte Carlo error of
those means below 0.0005; 0.003 is allowed for quantiles.
"""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca

REFERENCES = Path(__file__).parents[2] / "references"
SEED = 20261201
MEAN_ERROR = 0.0005
QUANTILE_ERROR = 0.003
TABLES = {
    "stouffer_toby_1951.csv": 0.0,
    "carcinoma_raters_1977.csv": 0.0,
    "academic_cheating_dayton_1998.csv": 0.0,
}


def reference(file: str) -> dict[str, dict[str, Any]]:
    with (REFERENCES / "references.toml").open("rb") as stream:
        tables = tomllib.load(stream)["table"]
    (table,) = (table for table in tables if table.get("file") == file)
    return {row["quantity"]: row for row in table["computed_posterior"]}


def batch_error_of_sd(draws: np.ndarray, n_batches: int = 40) -> float:
    """Monte Carlo error of the sd, from the sd of batches (batch means, per chain)."""
    squares = (draws - draws.mean()) ** 2
    batches = squares.reshape(n_batches, -1).mean(axis=1)
    return float(batches.std(ddof=1) / np.sqrt(n_batches) / (2 * draws.std()))


@pytest.mark.parametrize("file", TABLES)
def test_posterior_moments(file: str) -> None:
    frame = pd.read_csv(REFERENCES / file).astype(str)
    items = [name for name in frame.columns if name != "count"]
    responses = lca.Responses.from_frame(frame, items=items, counts="count")
    model = lca.LatentClassModel(responses.items, 2)
    posterior = model.sample(responses, seed=SEED, draws=4000, ess=4000, progress=False)
    yes = posterior.response_probability_draws[:, :, 0, :, 1::2]
    high = int(yes.mean(axis=(0, 1)).sum(axis=1).argmax())
    prevalence = posterior.prevalence().iloc[high]
    rows = {"weight_high": (prevalence, posterior.prevalence_draws[:, :, 0, high])}
    table = posterior.response_probabilities().set_index(["latent_class", "item", "category"])
    for name, k in (("high", high), ("low", 1 - high)):
        for j, item in enumerate(items):
            row = table.loc[(str(k + 1), item, "1")]
            rows[f"{name}_item{j + 1}"] = (row, yes[:, :, k, j])
    expected = reference(file)
    assert set(rows) == set(expected)
    for quantity, (row, draws) in rows.items():
        assert row["ess_bulk"] > 400
        truth = expected[quantity]
        assert row["mean"] == pytest.approx(truth["mean"], abs=4 * row["mcse"] + MEAN_ERROR)
        error = 4 * batch_error_of_sd(draws) + MEAN_ERROR
        assert row["sd"] == pytest.approx(truth["sd"], abs=error)
        # A quantile moves more than a mean where the density is low: 4 errors of the mean, twice.
        quantile = 8 * row["mcse"] + QUANTILE_ERROR
        for ours, theirs in (("median", "median"), ("lower", "q025"), ("upper", "q975")):
            assert row[ours] == pytest.approx(truth[theirs], abs=quantile)
