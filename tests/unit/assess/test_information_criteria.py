"""WAIC and leave-one-out against ArviZ, direct formulas, closed forms and quadrature."""

from __future__ import annotations

import csv
import math
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from bayeslca.assess.comparison.information_criteria import (
    difference,
    psis_loo,
    relative_efficiency,
    standard_error,
    waic,
)
from bayeslca.exceptions import SamplingError

SEED = 20261201
REFERENCES = Path(__file__).parents[2] / "references"
COUNTS = np.array([7, 1, 3, 12, 2])


def log_likelihood(chains: int = 4, draws: int = 250) -> np.ndarray:
    """Make autocorrelated draws (chain, draw, unit) with tails of different weight."""
    rng = np.random.default_rng(SEED)
    noise = rng.normal(size=(chains, draws, COUNTS.size))
    for d in range(1, draws):
        noise[:, d] += 0.5 * noise[:, d - 1]
    heavy = np.array([0.2, 0.4, 0.1, 0.3, 1.2])
    return -np.array([2.0, 4.0, 3.0, 1.5, 6.0]) - heavy * np.abs(noise) ** 1.5


def expanded(values: np.ndarray, counts: np.ndarray = COUNTS) -> np.ndarray:
    return np.repeat(values, counts, axis=-1)


def arviz_loo(values: np.ndarray, reff: float | None, theta: np.ndarray) -> Any:
    """ArviZ's own figures on one column per case."""
    import arviz_stats
    import xarray as xr

    cases = expanded(values)
    dims = ("chain", "draw", "case")
    tree = xr.DataTree.from_dict(
        {
            "posterior": xr.Dataset({"theta": (("chain", "draw", "part"), theta)}),
            "log_likelihood": xr.Dataset({"responses": (dims, cases)}),
        }
    )
    for group in ("posterior", "log_likelihood"):
        sizes = {"chain": range(values.shape[0]), "draw": range(values.shape[1])}
        tree[group] = tree[group].to_dataset().assign_coords(sizes)
    return arviz_stats.loo(tree, pointwise=True, var_name="responses", reff=reff)


@pytest.mark.parametrize("efficiency", [1.0, 0.4])
@pytest.mark.filterwarnings("ignore:Estimated shape parameter")
def test_leave_one_out_agrees_with_arviz_on_expanded_cases(efficiency: float) -> None:
    values = log_likelihood()
    theirs = arviz_loo(values, efficiency, values)
    ours = psis_loo(values, COUNTS, relative_efficiency=efficiency)
    assert ours.elpd == pytest.approx(float(theirs.elpd), abs=1e-6)
    assert ours.p == pytest.approx(float(theirs.p), abs=1e-6)
    assert_allclose(expanded(ours.pointwise), theirs.elpd_i.values, atol=1e-6)
    assert_allclose(expanded(ours.pareto_k), theirs.pareto_k.values, atol=1e-6)
    assert ours.high_k == pytest.approx(theirs.good_k)
    # ArviZ took ddof 0 before its line 1 and takes ddof 1 since; ours is always 1.
    n = COUNTS.sum()
    both = (ours.se, ours.se * math.sqrt((n - 1) / n))
    assert min(abs(float(theirs.se) - se) for se in both) < 1e-6
    assert ours.n_unreliable == int((theirs.pareto_k.values > theirs.good_k).sum())
    assert ours.n_unreliable > 0  # the last unit is heavy on purpose


@pytest.mark.filterwarnings("ignore:Estimated shape parameter")
def test_relative_efficiency_is_what_arviz_uses() -> None:
    values = log_likelihood()
    efficiency = relative_efficiency(values[..., :2], values[..., 2:])
    assert 0.1 < efficiency < 0.9
    theirs = arviz_loo(values, None, values)
    ours = psis_loo(values, COUNTS, relative_efficiency=efficiency)
    assert ours.elpd == pytest.approx(float(theirs.elpd), abs=1e-6)
    assert_allclose(expanded(ours.pareto_k), theirs.pareto_k.values, atol=1e-6)
    assert relative_efficiency(values[:1]) == 1.0


def test_waic_follows_its_formula_case_by_case() -> None:
    # Gelman, Hwang & Vehtari (2014), equations 5, 12 and 13, without logs taken apart.
    values = log_likelihood()
    found = waic(values, COUNTS)
    cases = expanded(values).reshape(-1, COUNTS.sum())
    by_case = np.log(np.exp(cases).mean(axis=0)) - cases.var(axis=0, ddof=1)
    assert found.elpd == pytest.approx(by_case.sum(), abs=1e-6)
    assert found.p == pytest.approx(cases.var(axis=0, ddof=1).sum(), abs=1e-6)
    assert found.se == pytest.approx(math.sqrt(by_case.size * by_case.var(ddof=1)), abs=1e-6)
    assert found.pareto_k is None
    assert found.n_unreliable == 0


def test_chains_may_come_as_one() -> None:
    values = log_likelihood()
    flat = values.reshape(-1, COUNTS.size)
    assert waic(flat, COUNTS).elpd == pytest.approx(waic(values, COUNTS).elpd)
    assert psis_loo(flat, COUNTS).elpd == pytest.approx(psis_loo(values, COUNTS).elpd)


def test_a_unit_that_every_draw_predicts_alike_needs_no_weights() -> None:
    values = log_likelihood()
    values[..., 0] = -0.25
    found = psis_loo(values, COUNTS)
    assert found.pointwise[0] == pytest.approx(-0.25)
    assert found.p_pointwise[0] == pytest.approx(0.0, abs=1e-12)
    assert found.pareto_k is not None
    assert found.pareto_k[0] == 0.0
    alone = psis_loo(values[..., :1], COUNTS[:1])
    assert (alone.mcse, alone.se) == (0.0, 0.0)


@pytest.mark.parametrize("criterion", [waic, psis_loo])
def test_monte_carlo_error_is_that_of_repeated_runs(criterion: Any) -> None:
    # Independent runs of the same made-up chain: their spread is what mcse claims.
    rng = np.random.default_rng(SEED)
    runs = []
    for _ in range(60):
        theta = rng.normal(size=(4, 250))
        theta[:, 1:] = 0.6 * theta[:, :-1] + 0.8 * theta[:, 1:]
        values = -2.0 - 0.3 * (theta[..., None] + np.linspace(-1, 1, COUNTS.size)) ** 2 / 2
        runs.append(criterion(values, COUNTS))
    spread = np.std([run.elpd for run in runs], ddof=1)
    claimed = np.sqrt(np.mean([run.mcse**2 for run in runs]))
    # The standard error of a standard deviation from 60 runs is 9 %: four of them.
    assert spread == pytest.approx(claimed, rel=0.37)


def test_difference_takes_the_error_of_the_paired_cases() -> None:
    values = log_likelihood()
    one, other = waic(values, COUNTS), waic(values - np.arange(5) / 7, COUNTS)
    gap, se = difference(one, other)
    by_case = expanded(one.pointwise - other.pointwise)
    assert gap == pytest.approx(by_case.sum())
    assert se == pytest.approx(math.sqrt(by_case.size * by_case.var(ddof=1)))
    assert se < min(one.se, other.se)


def test_a_single_case_has_no_standard_error() -> None:
    assert math.isnan(standard_error(np.array([-1.0]), np.array([1])))


def test_impossible_answers_and_wrong_shapes_are_refused() -> None:
    values = log_likelihood()
    values[1, 2, 3] = -np.inf
    with pytest.raises(SamplingError, match="1 units have probability 0"):
        psis_loo(values, COUNTS)
    with pytest.raises(SamplingError, match="one count per unit"):
        waic(values[..., :3], COUNTS)


# Rubin (1981): eight estimates with standard errors; criteria of Gelman, Hwang & Vehtari (2014),
# Table 1, recomputed in closed form or by quadrature (references.toml, table "eight_schools").


def eight_schools() -> tuple[np.ndarray, np.ndarray, dict[str, Any]]:
    with (REFERENCES / "eight_schools.csv").open(encoding="utf-8") as file:
        rows = [(float(row["estimate"]), float(row["std_error"])) for row in csv.DictReader(file)]
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    entry = next(table for table in tables if table["id"] == "eight_schools")
    y, sigma = np.array(rows).T
    return y, sigma, {part["name"]: part for part in entry["computed"]}


def normal_log_density(y: np.ndarray, theta: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    z = (y - theta) / sigma
    return -0.5 * z**2 - np.log(sigma) - 0.5 * math.log(2 * math.pi)


def eight_schools_draws(name: str, y: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Independent draws of the eight means (4, 5000, 8) from the exact posterior."""
    rng = np.random.default_rng(SEED)
    size = (4, 5000)
    w = 1 / sigma**2
    if name == "no pooling":
        return y + sigma * rng.normal(size=(*size, 8))
    if name == "complete pooling":
        mean = (w * y).sum() / w.sum()
        return np.repeat(mean + rng.normal(size=(*size, 1)) / math.sqrt(w.sum()), 8, axis=-1)
    # mu flat and integrated out, tau flat on (0, inf): drawn from a grid (BDA3, section 5.4).
    tau = (np.arange(400_000) + 0.5) * 2000 / 400_000
    v = 1 / (sigma**2 + tau[:, None] ** 2)
    v_mu = 1 / v.sum(axis=1)
    mu_hat = v_mu * (v * y).sum(axis=1)
    log_p = 0.5 * np.log(v_mu) + 0.5 * np.log(v).sum(axis=1)
    log_p -= 0.5 * (v * (y - mu_hat[:, None]) ** 2).sum(axis=1)
    p = np.exp(log_p - log_p.max())
    at = rng.choice(tau.size, p=p / p.sum(), size=size)
    mu = mu_hat[at] + np.sqrt(v_mu[at]) * rng.normal(size=size)
    precision = w + 1 / tau[at][..., None] ** 2
    mean = (w * y + mu[..., None] / tau[at][..., None] ** 2) / precision
    return mean + rng.normal(size=(*size, 8)) / np.sqrt(precision)


@pytest.mark.parametrize("name", ["no pooling", "complete pooling", "hierarchical"])
def test_eight_schools_waic(name: str) -> None:
    y, sigma, computed = eight_schools()
    values = normal_log_density(y, eight_schools_draws(name, y, sigma), sigma)
    found = waic(values, np.ones(8, dtype=int))
    truth = computed[name]
    rounding = 0.005 if name == "hierarchical" else 0.0001  # as the reference states
    assert 0 < found.mcse < 0.1
    assert abs(-2 * found.elpd - truth["WAIC"]) < 8 * found.mcse + rounding  # 4 MCSE, deviance
    # Each of the eight variances has a Monte Carlo error of its own of some 1 to 2 %.
    assert found.p == pytest.approx(truth["pWAIC2"], abs=4 * 0.02 * truth["pWAIC2"])


@pytest.mark.parametrize("name", ["complete pooling", "hierarchical"])
@pytest.mark.filterwarnings("ignore:Estimated shape parameter")
def test_eight_schools_exact_leave_one_out(name: str) -> None:
    y, sigma, computed = eight_schools()
    values = normal_log_density(y, eight_schools_draws(name, y, sigma), sigma)
    found = psis_loo(values, np.ones(8, dtype=int))
    truth = computed[name]
    rounding = 0.005 if name == "hierarchical" else 0.0001
    assert abs(-2 * found.elpd - truth["m2loo_exact"]) < 8 * found.mcse + rounding
    # Leaving out a school moves tau a good deal: two of the eight ratios have heavy tails.
    assert found.n_unreliable == (2 if name == "hierarchical" else 0)
