"""Order hypotheses on published tables, and the trout example's quantities.

The values were computed outside the project: tests/references/references.toml,
``computed_order_hypothesis`` (Gibbs sampling of 400 chains) and ``trout_two_tests`` (exact
enumeration, with priors from the page that accompanies Branscum, Gardner & Johnson 2005).
"""

from __future__ import annotations

import math
import tomllib
from pathlib import Path

import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261201
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]


@pytest.mark.parametrize(
    "file",
    ["stouffer_toby_1951.csv", "carcinoma_raters_1977.csv", "academic_cheating_dayton_1998.csv"],
)
def test_one_class_is_above_the_other_in_every_item(file: str) -> None:
    table = next(table for table in TABLES if table.get("file") == file)
    computed = table["computed_order_hypothesis"][0]
    header = (REFERENCES / file).read_text(encoding="utf-8").splitlines()[0].split(",")
    responses = Responses.read(REFERENCES / file, items=header[:-1], counts=header[-1])
    first, *others = (f"P({item.name}={item.categories[1]}" for item in responses.items)
    model = LatentClassModel(
        responses.items, ("high", "low"), (f"high is where {first}) is highest",)
    )
    posterior = model.sample(responses, seed=SEED, progress=False)
    found = posterior.test(*(f"{other} | high) > {other} | low)" for other in others))
    assert found.prior_probability == pytest.approx(computed["prior_probability"], rel=1e-4)
    error = math.hypot(found.posterior_mcse, computed["mc_standard_error"])
    assert found.posterior_probability == pytest.approx(
        computed["posterior_probability"], abs=5e-6 + 4 * error
    )
    factor = computed["bayes_factor_vs_unconstrained"]
    assert found.log_bayes_factor == pytest.approx(
        math.log(factor), abs=1e-4 + 4 * error / computed["posterior_probability"]
    )
    assert found.posterior_mcse < 0.002


@pytest.fixture(scope="module")
def trout() -> Posterior:
    responses = Responses.read(
        REFERENCES / "trout_two_tests_two_populations.csv",
        items=["microscopy", "pcr"],
        group="population",
        counts="count",
    )
    priors = (
        "P(microscopy=1 | infected) ~ Beta(2.82, 2.49)",
        "P(microscopy=0 | healthy) ~ Beta(15.7, 1.3)",
        "P(pcr=1 | infected) ~ Beta(8.29, 1.81)",
        "P(pcr=0 | healthy) ~ Beta(10.69, 2.71)",
        "P(infected | population=high_prevalence) ~ Beta(1.73, 2.71)",
        "P(infected | population=low_prevalence) ~ Beta(1.27, 9.65)",
    )
    model = LatentClassModel(
        responses.items, ("infected", "healthy"), priors, groups=responses.groups
    )
    return model.sample(responses, seed=SEED, draws=4000, ess=8000, progress=False)


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("se_microscopy", "P(microscopy=1 | infected)"),
        ("sp_pcr", "P(pcr=0 | healthy)"),
        ("prevalence_high", "P(infected | population=high_prevalence)"),
    ],
)
def test_trout_quantities_are_the_exact_ones(trout: Posterior, name: str, text: str) -> None:
    computed = next(table for table in TABLES if table["id"] == "trout_two_tests")["computed"]
    exact = next(one for one in computed if one["name"].startswith(f"{name} (plain"))
    found = trout.quantity(text)
    assert found.mean == pytest.approx(exact["mean"], abs=5e-5 + 4 * found.mcse)
    assert found.median == pytest.approx(exact["median"], abs=0.1 * exact["sd"])
    assert (found.lower, found.upper) == pytest.approx(
        (exact["q025"], exact["q975"]), abs=0.2 * exact["sd"]
    )


def test_trout_predictive_values_follow_prevalence(trout: Posterior) -> None:
    # Both tests positive: more convincing where infection is common (a fact of the trade).
    frame = trout.quantities({"ppv": "P(infected | microscopy=1, pcr=1)"})
    by_group = frame.set_index("group")["median"]
    assert by_group["high_prevalence"] > 0.99
    assert by_group["high_prevalence"] > by_group["low_prevalence"] > 0.1
