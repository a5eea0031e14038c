"""WAIC and leave-one-out of our own draws against exact figures on published tables."""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from bayeslca.assess.comparison.information_criteria import psis_loo, relative_efficiency, waic
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.responses.item import Item
from bayeslca.responses.units import Units
from bayeslca.sampling.run import draw_posterior

SEED = 20261201
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = ("stouffer_toby_1951", "carcinoma_raters_1977", "academic_cheating_dayton_1998")
EXACT = [(name, 1) for name in TABLES] + [(name, 2) for name in TABLES[1:]]
"""Tables and class counts whose leave-one-out figure is known exactly."""


def computed(name: str, key: str, classes: int) -> dict[str, Any]:
    """Look up an exact or simulated figure of references.toml."""
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    table = next(table for table in tables if table.get("file") == f"{name}.csv")
    return next(part for part in table[key] if part["classes"] == classes)


@cache
def counts_of(name: str) -> tuple[np.ndarray, np.ndarray]:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        rows = [[int(value) for value in row] for row in list(csv.reader(file))[1:]]
    table = np.array(rows)
    return table[:, :-1].astype(np.int16), table[:, -1]


@cache
def sampled(name: str, classes: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, float]:
    """Pattern, count and log likelihood (chain, draw, unit), and relative efficiency."""
    pattern, count = counts_of(name)
    pattern, count = pattern[count > 0], count[count > 0]
    group = np.zeros(count.size, dtype=np.int32)
    units = Units(pattern, group, count.astype(np.int64), np.arange(count.size))
    items = tuple(Item(f"item_{j + 1}", ("0", "1")) for j in range(pattern.shape[1]))
    model = LatentClassModel(items, classes)
    table = compile_units(model.table, units)
    draws = draw_posterior(model, table, seed=SEED + classes, draws=4000, ess=4000, progress=False)
    values = log_unit_likelihood(model.table, table, draws.elements, draws.prevalence)
    # Labels switch in these draws, which are not relabelled: efficiency of label-free quantities.
    return pattern, count, values, relative_efficiency(np.exp(values))


@pytest.mark.parametrize(("name", "classes"), EXACT)
def test_leave_one_out_is_the_exact_one(name: str, classes: int) -> None:
    # Exact: log evidence of the table less that of the table without one case of the pattern.
    truth = computed(name, "computed_loo", classes)
    pattern, count, values, efficiency = sampled(name, classes)
    found = psis_loo(values, count, relative_efficiency=efficiency)
    assert found.mcse < 0.1
    assert abs(found.elpd - truth["elpd_loo"]) < 4 * found.mcse + 0.0001  # as printed
    exact = dict(zip(truth["patterns"], truth["log_predictive_by_pattern"], strict=True))
    by_pattern = [exact["".join(map(str, row))] for row in pattern]
    assert_allclose(found.pointwise, by_pattern, atol=0.05)


@pytest.mark.parametrize("name", TABLES)
def test_one_class_to_two_decimals_by_independent_draws(name: str) -> None:
    # With one class the posterior is Beta(1 + yes, 1 + no), item by item.
    truth = computed(name, "computed_loo", 1)
    pattern, count = counts_of(name)
    yes = count @ pattern
    rng = np.random.default_rng(SEED)
    theta = rng.beta(1 + yes, 1 + count.sum() - yes, size=(4, 60_000, yes.size))
    values = np.log(theta) @ pattern.T + np.log1p(-theta) @ (1 - pattern.T)
    found = psis_loo(values, count)
    assert found.mcse < 0.012
    assert abs(found.elpd - truth["elpd_loo"]) < 4 * found.mcse + 0.0001
    assert found.elpd == pytest.approx(truth["elpd_loo"], abs=0.02)


@pytest.mark.parametrize("name", TABLES)
def test_waic_is_that_of_a_long_run(name: str) -> None:
    truth = computed(name, "computed_waic", 2)
    _, count, values, _ = sampled(name, 2)
    found = waic(values, count)
    both = np.hypot(found.mcse, truth["mc_standard_error_elpd"])
    assert abs(found.elpd - truth["elpd_waic"]) < 4 * both
    assert found.p == pytest.approx(truth["p_waic"], rel=0.03)
