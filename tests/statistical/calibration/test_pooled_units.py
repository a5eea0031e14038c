"""Pooled units: ranks are uniform, and the posterior is that of numerical integration.

Simulation-based calibration as in `experiments` (Talts et al. 2018; the data's log likelihood
among the quantities, Modrák et al. 2023). The published values are of Gelman et al. (2013),
Bayesian Data Analysis, 3rd ed., section 5.3 (rat tumours; data of Tarone 1982): data and values
from memory.
"""

from __future__ import annotations

from threading import Event

import numpy as np
import pytest
from rank_uniformity import p_value
from scipy.special import betaln

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.pooled_prevalence import PooledPrevalence, spread_of
from bayeslca.model.probabilities import draw_elements, log_unit_likelihood
from bayeslca.model.simulate import Parameters, simulate
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.chain import make_task
from bayeslca.sampling.starting_points import find_starting_points

SEED = 20261211
LEVEL = 1e-3
DRAWS, THIN = 99, 61
ITEMS = tuple(Item(f"item {j}", ("no", "yes")) for j in range(4))


def units(n: int) -> Groups:
    return Groups("district", tuple(f"d{g}" for g in range(n)))


EXCHANGEABLE = LatentClassModel(
    ITEMS, 3, ("P(item 0=yes | .) ~ Beta(1, 2)".replace("item 0", "'item 0'"),),
    groups=units(6), pooled=True,
)  # fmt: skip
NEARLY_ALIKE = LatentClassModel(
    ITEMS,
    ("one", "two"),
    ("P(one, two) ~ Dirichlet(2, 1)", "P('item 0'=yes | one) ~ Beta(2, 1)"),
    groups=units(5),
    pooled=True,
    spread_prior=(2.0, 1.5),
)


def replicate(model: LatentClassModel, sizes: list[int], seed: np.random.SeedSequence):
    """Return the rank of each true value among nearly independent draws of its posterior."""
    truth_seed, chain_seed, ties = seed.spawn(3)
    rng = np.random.default_rng(truth_seed)
    source = model.prevalence_source
    assert isinstance(source, PooledPrevalence)
    prevalence, concentration = source.simulate_many(rng, 1)
    true = Parameters(draw_elements(model.table, rng), prevalence[0])
    responses = simulate(model, sizes, rng, true).responses
    table = compile_units(model.table, responses.units)
    task = make_task(model.table, table, source, model.symmetry)
    _, (chain,) = find_starting_points(
        task, chain_seed, chains=1, threads=1, stop=Event(), runs=2, sweeps=40
    )
    chain.run(1, 400)
    kept = chain.run(DRAWS, THIN)

    def ranked(elements, shares, alpha):
        by_unit = log_unit_likelihood(model.table, table, elements, shares)
        mean = alpha / alpha.sum(axis=-1, keepdims=True)
        out = {
            "log likelihood": by_unit @ table.count,
            "spread": spread_of(alpha),
            "sum of squared means": np.sum(mean**2, axis=-1),
            "sum of squared prevalences": np.sum(shares[..., 0, :] ** 2, axis=-1),
            "of a unit without cases": np.sum(shares[..., -1, :] ** 2, axis=-1),
        }
        if not model.exploratory:
            out |= {"mean": mean[..., 0], "prevalence": shares[..., 1, 0]}
            out["response probability"] = elements[..., 1]
        return out

    values = ranked(kept.elements, kept.prevalence, kept.concentration)
    truth = ranked(true.elements, true.prevalence, concentration[0])
    jitter = np.random.default_rng(ties)
    return {
        name: int(np.sum(v < truth[name])) + jitter.integers(int(np.sum(v == truth[name])) + 1)
        for name, v in values.items()
    }


@pytest.mark.parametrize(
    ("model", "sizes"),
    [
        pytest.param(EXCHANGEABLE, [1, 2, 12, 5, 3, 0], id="three exchangeable classes"),
        pytest.param(NEARLY_ALIKE, [8, 1, 4, 6, 0], id="named, labels move"),
    ],
)
def test_ranks_of_the_hierarchical_model_are_uniform(model, sizes):
    seeds = np.random.SeedSequence(SEED).spawn(60)
    found = [replicate(model, sizes, seed) for seed in seeds]
    p = {name: p_value(np.array([one[name] for one in found]), DRAWS + 1) for name in found[0]}
    assert min(p.values()) * len(p) > LEVEL, p


ILL = (
    "0 0 0 0 0 0 0 0 0 0 0 0 0 0 1 1 1 1 1 1 1 1 2 2 2 2 2 2 2 2 2 1 5 2 5 3 2 7 7 3 3 2 9 10 4 4 "
    "4 4 4 4 4 10 4 4 4 5 11 12 5 5 6 5 6 6 6 6 16 15 15 9 4"
)
RATS = (
    "20 20 20 20 20 20 20 19 19 19 19 18 18 17 20 20 20 20 19 19 18 18 25 24 23 20 20 20 20 20 20 "
    "10 49 19 46 27 17 49 47 20 20 13 48 50 20 20 20 20 20 20 20 48 19 19 19 22 46 49 20 20 23 19 "
    "22 20 20 20 52 47 46 24 14"
)


@pytest.fixture(scope="module")
def tumours():
    """71 experiments, classes surely known: a Beta-binomial model."""
    ill, n = (np.array(text.split(), dtype=int) for text in (ILL, RATS))
    items = (Item("tumour", ("no", "yes")), Item("kept", ("no", "yes")))
    groups = Groups("experiment", tuple(f"e{g}" for g in range(71)))
    model = LatentClassModel(
        items,
        ["ill", "well"],
        ["P(tumour=yes | ill) = 1", "P(tumour=yes | well) = 0"],
        groups=groups,
        pooled=True,
    )
    counts = np.stack([ill, n - ill], axis=1).ravel()
    rows = np.flatnonzero(counts)
    responses = Responses(
        items=items,
        codes=np.asfortranarray(np.array([[1, 0], [0, 0]] * 71, dtype=np.int16)[rows]),
        counts=counts[rows],
        groups=groups,
        group_codes=np.repeat(np.arange(71), 2)[rows].astype(np.int32),
    )
    return ill, n, model.sample(responses, seed=SEED, progress=False, draws=2000, ess=2000)


def test_rat_tumours_as_published(tumours):
    """Their prior is flat in the mean and in c^(-1/2), ours in (1 + c)^(-1/2): weighed anew."""
    _, _, posterior = tumours
    alpha = posterior.draws.concentration.reshape(-1, 2)
    c = alpha.sum(axis=1)
    weight = ((1 + c) / c) ** 1.5
    mean = weight @ alpha / weight.sum()
    error = 3 * alpha.std(axis=0) / np.sqrt(1500)
    assert abs(mean[0] - 2.4) < 0.05 + error[0]
    assert abs(mean[1] - 14.3) < 0.05 + error[1]


def test_rat_tumours_by_integration_on_a_grid(tumours):
    ill, n, posterior = tumours
    s, m = np.meshgrid(np.linspace(0.05, 0.6, 400), np.linspace(0.05, 0.35, 400), indexing="ij")
    a, b = (s**-2 - 1) * m, (s**-2 - 1) * (1 - m)
    log_p = sum(betaln(a + y, b + k - y) - betaln(a, b) for y, k in zip(ill, n, strict=True))
    weight = np.exp(log_p - log_p.max())
    weight /= weight.sum()
    alpha = posterior.draws.concentration
    checks = {
        "spread": (spread_of(alpha), np.sum(weight * s)),
        "mean": (alpha[..., 0] / alpha.sum(axis=-1), np.sum(weight * m)),
        "spread squared": (spread_of(alpha) ** 2, np.sum(weight * s**2)),
        "the last experiment": (
            posterior.prevalence_draws[:, :, -1, 0],
            np.sum(weight * (a + ill[-1]) / (a + b + n[-1])),
        ),
        "the first": (
            posterior.prevalence_draws[:, :, 0, 0],
            np.sum(weight * (a + ill[0]) / (a + b + n[0])),
        ),
    }
    from arviz_stats.base import array_stats

    for name, (draws, exact) in checks.items():
        assert abs(draws.mean() - exact) < 4 * array_stats.mcse(draws, method="mean"), name


def test_each_experiment_alone_is_its_own_share_of_ill_rats(tumours):
    ill, n, posterior = tumours
    frame = posterior.partial_pooling()
    alone = frame[frame["latent_class"] == "ill"]
    np.testing.assert_allclose(alone["alone"], ill / n, atol=1e-6)
    np.testing.assert_array_equal(alone["cases"], n)
    between = np.abs(alone["mean"] - 0.144) < np.abs(alone["alone"] - 0.144) + 0.01
    assert between.all()  # every estimate is drawn towards the mean


def test_when_labels_move_mean_and_prevalences_move_together():
    """One class holds most cases everywhere: whichever name it has, its mean must be the larger.

    Fails when the move leaves mean and concentration where they were.
    """
    model, rng = NEARLY_ALIKE, np.random.default_rng(SEED)
    yes = np.where(rng.random((60, 1)) < 0.85, 0.9, 0.1)
    codes = (rng.random((60, 4)) < yes).astype(np.int16)
    responses = Responses(
        items=ITEMS,
        codes=np.asfortranarray(codes),
        counts=np.ones(60, dtype=np.int64),
        groups=model.groups,
        group_codes=np.repeat(np.arange(5), 12).astype(np.int32),
    )
    table = compile_units(model.table, responses.units)
    task = make_task(model.table, table, model.prevalence_source, model.symmetry)
    start = find_starting_points(
        task, np.random.SeedSequence(SEED), chains=1, threads=1, stop=Event(), runs=2
    )
    kept = start[1][0].run(6000, 1)
    first_larger = kept.prevalence.mean(axis=1)[:, 0] > 0.5
    assert kept.swaps.sum() > 10
    assert 0.01 < first_larger.mean() < 0.99
    mean_larger = kept.concentration[:, 0] > kept.concentration[:, 1]
    assert np.mean(first_larger == mean_larger) > 0.99
