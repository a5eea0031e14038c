"""The DataTree, and ArviZ's own functions on it."""

from __future__ import annotations

import json

import arviz_stats as azs
import numpy as np
import pytest

from bayeslca.exceptions import BayesLCAError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior import tree as trees
from bayeslca.posterior.posterior import Posterior


def test_groups_names_and_dimensions(posterior: Posterior, grouped: Posterior) -> None:
    tree = posterior.tree
    assert set(tree.children) == {
        "posterior", "sample_stats", "unit_log_likelihood", "log_prior", "observed_data",
        "block_draws",
    }  # fmt: skip
    assert tree["posterior"]["prevalence"].dims == ("chain", "draw", "latent_class")
    response = tree["posterior"]["response_probability"]
    assert response.dims == ("chain", "draw", "latent_class", "response")
    spring = response.sel(latent_class="2", response="type=spring").to_numpy()
    np.testing.assert_array_equal(spring, posterior.response_probability_draws[:, :, 0, 1, 6])
    prevalence = grouped.tree["posterior"]["prevalence"]
    assert prevalence.dims == ("chain", "draw", "group", "latent_class")
    np.testing.assert_array_equal(
        prevalence.sel(group="south", latent_class="lapsed"), grouped.prevalence_draws[:, :, 1, 1]
    )


def test_attributes_say_what_made_it(posterior: Posterior) -> None:
    attrs = posterior.tree.attrs
    assert attrs["inference_library"] == "bayeslca"
    assert attrs["seed"] == "11"
    assert attrs["data_hash"] == posterior.responses.data_hash
    assert LatentClassModel.from_dict(json.loads(attrs["model"])) == posterior.model
    assert json.loads(attrs["versions"])["numpy"] == np.__version__
    assert posterior.tree["posterior"].attrs["created_at"] == attrs["created_at"]


def test_log_likelihood_of_units_and_of_the_data_agree(posterior: Posterior) -> None:
    group = posterior.tree["unit_log_likelihood"]
    total = (group["responses"] * group["count"]).sum("unit")
    stats = posterior.tree["sample_stats"]
    np.testing.assert_allclose(total, stats["log_likelihood"])
    np.testing.assert_allclose(stats["lp"], stats["log_likelihood"] + stats["log_prior"])


@pytest.mark.parametrize("name", ["posterior", "grouped", "single"])
def test_log_prior_has_an_entry_per_block_and_adds_up(
    name: str, request: pytest.FixtureRequest
) -> None:
    posterior: Posterior = request.getfixturevalue(name)
    group = posterior.tree["log_prior"]
    total = group["prevalence"] + group["response_probability"].sum("block")
    total = total - posterior.model.log_bounds_probability.value
    np.testing.assert_allclose(total, posterior.draws.log_prior, rtol=1e-9, atol=1e-9)
    assert group["response_probability"].sizes["block"] == 4 * posterior.model.n_classes


def test_the_entry_of_a_block_is_the_density_of_its_prior(grouped: Posterior) -> None:
    fees = grouped.response_probability_draws[:, :, 0, :, 1]  # (chain, draw, class)
    group = grouped.tree["log_prior"]["response_probability"]
    names = {str(block): group.sel(block=block).to_numpy() for block in group["block"].values}
    managed, lapsed = (names[f"P(fees=no, yes | {name})"] for name in ("managed", "lapsed"))
    np.testing.assert_allclose(managed, np.log(3) + 2 * np.log(fees[..., 0]))  # Beta(3, 1)
    np.testing.assert_allclose(lapsed, 0.0, atol=1e-12)


def test_elements_are_named_by_what_they_are(posterior: Posterior) -> None:
    elements = posterior.tree["block_draws"]["elements"]
    np.testing.assert_array_equal(
        elements.sel(element="P(accounts=yes | 2)"),
        posterior.response_probability_draws[:, :, 0, 1, 3],
    )


def test_a_column_of_the_case_log_likelihood_is_a_case(posterior: Posterior) -> None:
    tree = posterior.to_arviz()
    assert "log_likelihood" not in posterior.tree.children
    case = tree["log_likelihood"]["responses"]
    assert case.sizes["case"] == 88  # without the two that answered nothing
    unit = posterior.units.unit_of_row[5]
    np.testing.assert_array_equal(
        case.sel(case="WP005"), posterior.log_likelihood_draws[:, :, unit]
    )
    np.testing.assert_allclose(case.sum("case"), posterior.draws.log_likelihood)


def test_arviz_functions_work_on_it(grouped: Posterior) -> None:
    tree = grouped.to_arviz()
    loo = azs.loo(tree, pointwise=True)
    assert loo.n_data_points == 88
    assert loo.elpd < 0
    summary = azs.summary(grouped.tree, round_to="none")
    ours = grouped.response_probabilities().set_index(["latent_class", "item", "category"])
    row = summary.loc["response_probability[managed, fees=yes]"]
    assert row["mean"] == pytest.approx(ours.loc[("managed", "fees", "yes"), "mean"])
    ess = azs.ess(grouped.tree, method="bulk")
    found = ess["response_probability"].sel(latent_class="managed", response="fees=yes")
    assert float(found) == pytest.approx(ours.loc[("managed", "fees", "yes"), "ess_bulk"])
    sensitivity = azs.psense(tree, group="prior")
    assert np.isfinite(sensitivity["prevalence"]).all()


def test_a_log_likelihood_that_would_not_fit_is_refused(
    posterior: Posterior, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(trees, "MOST_NUMBERS", 1000)
    with pytest.raises(BayesLCAError, match=r"88 cases in 600 draws .*log_likelihood_draws"):
        posterior.to_arviz()
