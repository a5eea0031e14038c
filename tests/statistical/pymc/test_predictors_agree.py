"""Polya-Gamma Gibbs and PyMC's NUTS agree on the joint model of answers and covariates."""

from __future__ import annotations

from statistics import NormalDist

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca

pytestmark = pytest.mark.pymc

SEED = 20261214


@pytest.mark.filterwarnings("ignore")
def test_gibbs_and_nuts_agree_on_coefficients_and_response_probabilities():
    from arviz_stats.base import array_stats

    rng = np.random.default_rng(SEED)
    n = 90
    age = rng.normal(size=n)
    district = rng.choice(["hill", "lake"], size=n)
    first = rng.random(n) < 1 / (1 + np.exp(-age))
    yes = rng.random((n, 4)) < np.where(first, 0.85, 0.2)[:, None]
    items = [f"item_{j + 1}" for j in range(4)]
    frame = pd.DataFrame(np.where(yes, "yes", "no"), columns=items)
    frame["age"], frame["district"] = age, district
    frame.loc[0, "item_1"] = None
    responses = lca.Responses.from_frame(
        frame, items=[lca.ItemSpec(name, categories=("no", "yes"), yes="yes") for name in items]
    )
    statements = [f"P({item}=yes | first) ~ Beta(4, 2)" for item in items]
    statements += [f"P({item}=yes | second) ~ Beta(2, 4)" for item in items]
    model = lca.LatentClassModel(responses.items, ["first", "second"], statements=statements)
    posterior = model.sample(responses, seed=1, draws=500, ess=500, progress=False)
    common = {"ways": ("joint",), "seed": 2}
    gibbs = lca.class_predictors(posterior, frame, "age + district", ess=2000, **common)
    nuts = lca.class_predictors(
        posterior, frame, "age + district", sampler="nuts", draws=700, **common
    )
    pairs = []
    for found in (gibbs, nuts):
        drawn = found.draws["joint"]
        beta = drawn.coefficients
        shape = (*beta.shape[:2], -1)
        pairs.append(
            np.concatenate(
                [
                    (beta[:, :, :1] - beta[:, :, 1:]).reshape(shape),
                    beta.sum(axis=2).reshape(shape),
                    drawn.draws.elements[:, :, 1::2],
                    drawn.draws.log_likelihood[:, :, None] / 10.0,
                    drawn.draws.log_prior[:, :, None] / 10.0,
                ],
                axis=2,
            )
        )
    n_checks = 2 * pairs[0].shape[2]
    limit = NormalDist().inv_cdf(1 - 1e-4 / (2 * n_checks))
    for q in range(pairs[0].shape[2]):
        for power in (1, 2):
            a, b = (one[:, :, q] ** power for one in pairs)
            assert min(array_stats.ess(x, method="mean") for x in (a, b)) > 400
            error = np.hypot(*(array_stats.mcse(x, method="mean") for x in (a, b)))
            assert abs(a.mean() - b.mean()) < limit * error, (q, power)
