"""Two tests, two populations, expert priors: a published Bayesian analysis, recomputed exactly.

Source: data of Georgiadis, Gardner & Hedrick (1998); priors and posterior of the UC Davis page that
accompanies Branscum, Gardner & Johnson (2005); exact values by enumeration, all in
tests/references/references.toml, table ``trout_two_tests``.
"""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest
from arviz_stats.base import array_stats

from bayeslca.model.compile import compile_units, split_units, verified_log_weight
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.run import sample_table

SEED = 1977
REFERENCES = Path(__file__).parents[1] / "references"
LOW, HIGH = "low_prevalence", "high_prevalence"
PRIORS = (
    "P(microscopy=1 | infected) ~ Beta(2.82, 2.49)",
    "P(microscopy=0 | healthy) ~ Beta(15.7, 1.3)",
    "P(pcr=1 | infected) ~ Beta(8.29, 1.81)",
    "P(pcr=0 | healthy) ~ Beta(10.69, 2.71)",
    f"P(infected | population={HIGH}) ~ Beta(1.73, 2.71)",
    f"P(infected | population={LOW}) ~ Beta(1.27, 9.65)",
)
QUANTITIES = ("se_microscopy", "sp_microscopy", "se_pcr", "sp_pcr", "prevalence_high")


@pytest.fixture(scope="module")
def published() -> dict[str, dict]:
    with (REFERENCES / "references.toml").open("rb") as file:
        tables = tomllib.load(file)["table"]
    trout = next(table for table in tables if table["id"] == "trout_two_tests")
    return {
        "computed": {entry["name"]: entry for entry in trout["computed"]},
        "published": {entry["name"]: entry for entry in trout["published"]},
    }


@pytest.fixture(scope="module")
def model() -> LatentClassModel:
    return LatentClassModel(
        _responses().items, ("infected", "healthy"), PRIORS, groups=_responses().groups
    )


def _responses() -> Responses:
    return Responses.read(
        REFERENCES / "trout_two_tests_two_populations.csv",
        items=["microscopy", "pcr"],
        group="population",
        counts="count",
    )


@pytest.fixture(scope="module")
def plain(model: LatentClassModel) -> dict[str, np.ndarray]:
    """Give the low population's prevalence its own Beta prior."""
    return _quantities(model, _sampled(model, fixed=False))


@pytest.fixture(scope="module")
def fixed(model: LatentClassModel) -> dict[str, np.ndarray]:
    """Declare the low population free of infection: every fish of it is verified."""
    return _quantities(model, _sampled(model, fixed=True))


def _sampled(model: LatentClassModel, *, fixed: bool) -> Draws:
    responses = _responses()
    units, log_weight = responses.units, None
    if fixed:
        low, healthy = model.groups.levels.index(LOW), model.class_names.index("healthy")
        verified = np.where(responses.group_codes == low, healthy, -1)
        weights = verified_log_weight(verified, model.n_classes)
        units, log_weight = split_units(units, responses.counts, weights)
    table = compile_units(model.table, units, log_weight)
    return sample_table(
        model.table,
        table,
        model.prevalence_source,
        model.symmetry if not fixed else None,
        seed=SEED,
        draws=20_000,
        ess=20_000,
    )


def _quantities(model: LatentClassModel, draws: Draws) -> dict[str, np.ndarray]:
    from bayeslca.model.probabilities import response_probability

    probability = response_probability(model.table, draws.elements)[:, :, 0]
    infected, healthy = 0, 1
    high = model.groups.levels.index(HIGH)
    low = model.groups.levels.index(LOW)
    return {
        "se_microscopy": probability[:, :, infected, 1],
        "sp_microscopy": probability[:, :, healthy, 0],
        "se_pcr": probability[:, :, infected, 3],
        "sp_pcr": probability[:, :, healthy, 2],
        "prevalence_high": draws.prevalence[:, :, high, infected],
        "prevalence_low": draws.prevalence[:, :, low, infected],
    }


def _mcse(values: np.ndarray) -> float:
    return float(array_stats.mcse(values, method="mean"))


@pytest.mark.parametrize("name", [*QUANTITIES, "prevalence_low"])
def test_plain_model_has_the_exact_posterior(name: str, plain: dict, published: dict) -> None:
    exact = published["computed"][
        f"{name} (plain model without Z, prevalence_low ~ Beta(1.27, 9.65))"
    ]
    draws = plain[name]
    assert draws.mean() == pytest.approx(exact["mean"], abs=5e-5 + 4 * _mcse(draws))
    assert draws.std() == pytest.approx(
        exact["sd"], abs=5e-5 + 4 * _mcse((draws - draws.mean()) ** 2) / (2 * draws.std())
    )
    assert _mcse(draws) < 5e-4  # so that this is a check to the third decimal


@pytest.mark.parametrize("name", QUANTITIES)
def test_infection_free_with_a_probability_has_the_exact_posterior(
    name: str, plain: dict, fixed: dict, published: dict
) -> None:
    # prevalence_low = Z p with Z ~ Bernoulli(0.95): the posterior is the mixture of the plain
    # model and the one with the low population fixed, with P(Z = 1 | data) = 0.5916 (exact).
    weight = 0.5916
    draws = {"plain": plain[name], "fixed": fixed[name]}
    mean = weight * draws["plain"].mean() + (1 - weight) * draws["fixed"].mean()
    error = np.hypot(weight * _mcse(draws["plain"]), (1 - weight) * _mcse(draws["fixed"]))
    assert mean == pytest.approx(published["computed"][name]["mean"], abs=1e-4 + 4 * error)


@pytest.mark.parametrize("name", ["se_microscopy", "se_pcr", "sp_microscopy", "sp_pcr"])
def test_published_posterior_mean_to_the_third_decimal(
    name: str, plain: dict, fixed: dict, published: dict
) -> None:
    # Published by MCMC with 100,000 draws: its own simulation error is about one unit of the
    # third decimal.
    weight = 0.5916
    mean = weight * plain[name].mean() + (1 - weight) * fixed[name].mean()
    assert mean == pytest.approx(published["published"][name]["mean"], abs=1e-3)
