"""The numba kernel and a few lines of NumPy draw from the same posterior.

Agreement of NUTS, the Gibbs step inside PyMC and the kernel is tested in tests/statistical/pymc.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import norm

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.responses.item import Item
from bayeslca.responses.units import MISSING, Units
from bayeslca.sampling.run import draw_posterior

SEED = 20261208
CHAINS, DRAWS, THIN = 4, 3000, 2
PATTERN = np.array(
    [[0, 0, 0], [0, 1, 2], [1, 1, 2], [1, 1, 1], [1, MISSING, 0], [MISSING, 0, 1], [0, 0, 2]],
    dtype=np.int16,
)
COUNT = np.array([14, 3, 11, 6, 4, 5, 2])
CATEGORIES = (2, 2, 3)
N_CLASSES = 2


def numpy_gibbs(rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """One chain: draws of elements (draw, E) and prevalence (draw, 1, K) under uniform priors."""
    theta = [rng.dirichlet(np.ones(n), size=N_CLASSES) for n in CATEGORIES]  # (K, categories)
    prevalence = rng.dirichlet(np.ones(N_CLASSES))
    elements, kept = [], []
    for sweep in range(200 + DRAWS * THIN):
        weight = np.tile(prevalence, (len(PATTERN), 1))
        for j, given in enumerate((PATTERN != MISSING).T):
            weight[given] *= theta[j][:, PATTERN[given, j]].T
        split = rng.multinomial(COUNT, weight / weight.sum(axis=1, keepdims=True))  # (U, K)
        prevalence = rng.dirichlet(1 + split.sum(axis=0))
        for j, n in enumerate(CATEGORIES):
            counts = [split[PATTERN[:, j] == c].sum(axis=0) for c in range(n)]
            theta[j] = np.array([rng.dirichlet(1 + one) for one in np.transpose(counts)])
        if sweep >= 200 and sweep % THIN == 0:
            elements.append(np.concatenate([block for item in theta for block in item]))
            kept.append(prevalence[None])
    return np.array(elements), np.array(kept)


def test_moments_of_both_samplers_agree() -> None:
    from arviz_stats.base import array_stats

    items = tuple(Item(f"item_{j}", tuple("abc"[:n])) for j, n in enumerate(CATEGORIES))
    model = LatentClassModel(items, N_CLASSES)
    units = Units(PATTERN, np.zeros(len(COUNT), np.int32), COUNT, np.arange(len(COUNT)))
    cases = compile_units(model.table, units)
    kernel = draw_posterior(
        model, cases, seed=SEED, chains=CHAINS, draws=DRAWS, ess=DRAWS, progress=False
    )
    streams = np.random.SeedSequence(SEED).spawn(CHAINS)
    chains = [numpy_gibbs(np.random.default_rng(stream)) for stream in streams]
    reference = [np.stack(part) for part in zip(*chains, strict=True)]

    def quantities(elements: np.ndarray, prevalence: np.ndarray) -> list[np.ndarray]:
        unit = log_unit_likelihood(model.table, cases, elements, prevalence)
        first = [unit @ COUNT, prevalence[..., 0, :].max(axis=-1), *np.moveaxis(unit, -1, 0)]
        # Chains keep their labels, so only what no relabelling changes is compared.
        first.append(np.sum(prevalence[..., 0, :] * elements[..., [0, 2]] ** 2, axis=-1))
        return first + [x**2 for x in first]

    z = []
    both = zip(quantities(kernel.elements, kernel.prevalence), quantities(*reference), strict=True)
    for one, two in both:
        for x in (one, two):
            assert array_stats.ess(x, method="mean") > 400
        error = np.hypot(*(array_stats.mcse(x, method="mean") for x in (one, two)))
        z.append((one.mean() - two.mean()) / error)
    assert np.abs(z).max() < norm.isf(1e-4 / len(z) / 2), np.round(z, 1)
