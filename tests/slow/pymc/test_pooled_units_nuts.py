"""NUTS and Gibbs agree on pooled units, within Monte Carlo error."""

from __future__ import annotations

import numpy as np
import pytest
from arviz_stats.base import array_stats

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.pooled_prevalence import spread_of
from bayeslca.model.pymc.model import Parts
from bayeslca.responses.item import Groups, Item

pm = pytest.importorskip("pymc")
pytestmark = [pytest.mark.pymc, pytest.mark.filterwarnings("ignore")]

SEED = 20261215
ITEMS = tuple(Item(f"item{j}", ("no", "yes")) for j in range(4))
MODEL = LatentClassModel(
    ITEMS,
    ("one", "two"),
    ("P(one, two) ~ Dirichlet(2, 3)", "one is where P(item0=yes) is highest"),
    groups=Groups("herd", tuple("abcdef")),
    pooled=True,
    spread_prior=(3.0, 4.0),
)


@pytest.fixture(scope="module")
def data():
    return MODEL.simulate([6, 8, 3, 9, 5, 1], SEED).responses


def test_gibbs_and_nuts_agree(data):
    gibbs = MODEL.sample(data, seed=SEED, draws=1500, ess=1000, progress=False)
    nuts = MODEL.sample(
        data, seed=SEED, sampler="nuts", chains=2, draws=500, ess=100, progress=False
    )
    assert nuts.draws.concentration is not None

    def quantities(posterior):
        alpha, shares = posterior.draws.concentration, posterior.prevalence_draws
        spread = spread_of(alpha)
        return {
            "spread": spread,
            "spread squared": spread**2,
            "mean": alpha[..., 0] / alpha.sum(axis=-1),
            "a herd": shares[:, :, 1, 0],
            "a herd of one": shares[:, :, 5, 0],
            "squared": shares[:, :, 1, 0] ** 2,
            "log likelihood": posterior.draws.log_likelihood,
            "log prior": posterior.draws.log_prior,
        }

    one, two = quantities(gibbs), quantities(nuts)
    for name, values in one.items():
        error = np.hypot(
            array_stats.mcse(values, method="mean"), array_stats.mcse(two[name], method="mean")
        )
        assert abs(values.mean() - two[name].mean()) < 4 * error, name


def test_density_of_the_pymc_model_is_ours(data):
    """Up to a constant: PyMC adds the transforms' terms, which are not those of log odds."""
    pm_model = MODEL.to_pymc(data)
    parts = Parts.of(pm_model)
    source, rng = MODEL.prevalence_source, np.random.default_rng(SEED)
    density = pm_model.compile_logp(vars=[pm_model["mean_prevalence"], pm_model["spread"],
                                          pm_model["prevalence"]], jacobian=False)  # fmt: skip
    gaps = []
    for _ in range(4):
        prevalence, alpha = source.simulate_many(rng, 1)
        prevalence, alpha = np.clip(prevalence[0], 0.02, 0.98), np.clip(alpha[0], 0.2, 50.0)
        prevalence /= prevalence.sum(axis=1, keepdims=True)
        values = parts.values(np.full(MODEL.table.n_elements, 0.5), prevalence, alpha)
        point = pm_model.initial_point()
        for name, value in values.items():
            rv = pm_model[name]
            transform = pm_model.rvs_to_transforms[rv]
            key = pm_model.rvs_to_values[rv].name
            moved = transform.forward(value, *rv.owner.inputs) if transform else value
            point[key] = np.asarray(moved.eval() if hasattr(moved, "eval") else moved)
        ours = source.log_density(prevalence, alpha) - np.log(prevalence).sum()
        gaps.append(float(density(point)) - float(ours))
    np.testing.assert_allclose(gaps, 0.0, atol=1e-6)
