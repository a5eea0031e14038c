"""Gibbs and NUTS on a model with orders, bounds and equalities: the same posterior.

Means and mean squares of all elements and prevalences, within 4.5 standard errors of both engines
together.
"""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca import Item, LatentClassModel
from bayeslca.sampling.nuts import draw_with_nuts
from bayeslca.sampling.run import draw_posterior

pytestmark = pytest.mark.pymc
SEED = 20261208
ITEMS = (*(Item(f"i{j}", ("no", "yes"), yes="yes") for j in range(4)), Item("t", ("a", "b", "c")))
STATEMENTS = (
    "P(i0=yes | a) > P(i0=yes | b)",
    "P(i1=no | a) > P(i2=yes | a) > 0.1",
    "0.2 < P(i2=yes | b) < 0.7",
    "P(i3=yes | b) = P(i0=yes | b)",
    "P(t=b | a) = 0.3",
    "P(a) > P(b)",
)


def moments(draws):
    values = np.concatenate([draws.elements, draws.prevalence[:, :, 0]], axis=-1)
    values = np.concatenate([values, values**2], axis=-1)
    batches = values.reshape(draws.n_chains * 10, -1, values.shape[-1]).mean(axis=1)
    return values.mean(axis=(0, 1)), batches.std(axis=0, ddof=1) / np.sqrt(len(batches))


def test_gibbs_and_nuts_agree_under_bounds():
    model = LatentClassModel(ITEMS, ("a", "b"), STATEMENTS)
    data = model.simulate(60, seed=SEED).responses
    gibbs = draw_posterior(model, data, seed=SEED, ess=2000, progress=False)
    nuts = draw_with_nuts(model, data, seed=SEED, ess=800, progress=False)
    one, first = moments(gibbs)
    two, second = moments(nuts)
    z = (one - two) / np.hypot(np.maximum(first, 1e-12), second)
    assert np.abs(z).max() < 4.5, z.round(1)
