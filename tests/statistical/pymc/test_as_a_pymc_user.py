"""The model as an ordinary ``pm.Model``: PyMC's own functions work on it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

import bayeslca as lca
from bayeslca._compat import as_tree

SEED = 1951
TABLE = Path(__file__).parents[2] / "references" / "stouffer_toby_1951.csv"
ITEMS = ["item_a", "item_b", "item_c", "item_d"]

pytestmark = pytest.mark.pymc


@pytest.fixture(scope="module")
def responses() -> lca.Responses:
    return lca.Responses.read(TABLE, items=ITEMS, counts="count")


@pytest.fixture(scope="module")
def model(responses: lca.Responses) -> lca.LatentClassModel:
    return lca.LatentClassModel(responses.items, 2)


@pytest.fixture(scope="module")
def sampled(model: lca.LatentClassModel, responses: lca.Responses) -> tuple[Any, Any]:
    """Sample with PyMC's own function and compute the pointwise log likelihood of cases."""
    import pymc as pm

    with model.to_pymc(responses, by_case=True) as by_case:
        trace = pm.sample(
            draws=200, tune=300, chains=2, cores=2, random_seed=SEED, progressbar=False,
            nuts_sampler="pymc", compute_convergence_checks=False,
        )  # fmt: skip
        pm.compute_log_likelihood(trace, progressbar=False)
    return by_case, as_tree(trace)


def test_pointwise_log_likelihood_is_ours(
    sampled: tuple[Any, Any], model: lca.LatentClassModel, responses: lca.Responses
) -> None:
    from bayeslca.model.compile import compile_units
    from bayeslca.model.probabilities import log_unit_likelihood

    tree = sampled[1]
    units = responses.units
    element_of = np.zeros((*tree.posterior["prevalence"].shape[:2], model.table.n_elements))
    probability = tree.posterior["response_probability"].to_numpy()
    rows = model.table.response_row[0]
    for column, row in enumerate(rows):
        for k in range(2):
            element_of[..., model.table.direct_element[row, k]] = probability[..., k, column]
    prevalence = tree.posterior["prevalence"].to_numpy()[:, :, None, :]
    ours = log_unit_likelihood(
        model.table, compile_units(model.table, units), element_of, prevalence
    )
    theirs = tree["log_likelihood"]["responses"].to_numpy()
    assert theirs.shape[-1] == responses.n_cases
    unit_of_case = np.repeat(np.arange(units.n_units), units.count)
    np.testing.assert_allclose(
        np.sort(theirs, axis=-1), np.sort(ours[..., unit_of_case], axis=-1), rtol=1e-8
    )


def test_posterior_predictive_draws_are_whole_replicates(
    sampled: tuple[Any, Any], responses: lca.Responses
) -> None:
    import pymc as pm

    by_case, tree = sampled
    with by_case:
        drawn = as_tree(
            pm.sample_posterior_predictive(_thinned(tree), random_seed=SEED, progressbar=False)
        )
    replicates = drawn["posterior_predictive"]["responses"].to_numpy()
    assert replicates.shape[-2:] == (216, 4)
    assert set(np.unique(replicates)) == {0, 1}
    # The mean of each item under the posterior is close to the observed share: within 4 standard
    # errors of a share of 216 cases (common practice, no source).
    observed = (responses.codes * responses.counts[:, None]).sum(axis=0) / 216
    error = np.sqrt(observed * (1 - observed) / 216)
    assert np.all(np.abs(replicates.mean(axis=(0, 1, 2)) - observed) < 4 * error)


def test_prior_predictive_draws_have_the_priors_margins(
    model: lca.LatentClassModel, responses: lca.Responses
) -> None:
    import pymc as pm

    with model.to_pymc(responses):
        drawn = as_tree(pm.sample_prior_predictive(draws=400, random_seed=SEED))
    prevalence = drawn["prior"]["prevalence"].to_numpy().reshape(-1, 2)
    # Dirichlet(1, 1): mean 1/2, sd sqrt(1/12); 400 independent draws.
    assert abs(prevalence[:, 0].mean() - 0.5) < 4 * np.sqrt(1 / 12 / 400)
    codes = drawn["prior_predictive"]["responses"].to_numpy()
    assert codes.shape[-2:] == (responses.units.n_units, 4)


def _thinned(tree: Any) -> Any:
    """Return what this PyMC line's predictive function takes, every 20th draw."""
    import xarray as xr

    thin = xr.DataTree.from_dict(
        {"posterior": tree["posterior"].to_dataset().isel(draw=slice(None, None, 20))}
    )
    try:
        import arviz

        return arviz.InferenceData(posterior=thin["posterior"].to_dataset())
    except (ImportError, AttributeError, TypeError):
        return thin
