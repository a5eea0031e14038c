"""Stacking weights against ArviZ and against a direct search."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from bayeslca.assess.comparison.stacking import stacking_weights

SEED = 20261202
COUNTS = np.array([3, 1, 9, 4, 6, 2, 5, 8])


def pointwise(n_models: int = 3) -> np.ndarray:
    rng = np.random.default_rng(SEED)
    return -2.0 + rng.normal(scale=0.6, size=(n_models, COUNTS.size))


@pytest.mark.filterwarnings("ignore")
def test_weights_agree_with_arviz_on_expanded_cases() -> None:
    import arviz_stats
    import xarray as xr

    rng = np.random.default_rng(SEED)
    chains, draws = 4, 200
    trees, ours = {}, []
    from bayeslca.assess.comparison.information_criteria import psis_loo

    for m, level in enumerate(pointwise()):
        values = level + 0.1 * rng.normal(size=(chains, draws, COUNTS.size))
        cases = np.repeat(values, COUNTS, axis=-1)
        coords = {"chain": range(chains), "draw": range(draws)}
        log_likelihood = xr.Dataset({"y": (("chain", "draw", "case"), cases)}, coords=coords)
        posterior = xr.Dataset({"theta": (("chain", "draw"), values[..., 0])}, coords=coords)
        tree = {"posterior": posterior, "log_likelihood": log_likelihood}
        trees[str(m)] = arviz_stats.loo(xr.DataTree.from_dict(tree), pointwise=True, reff=1.0)
        ours.append(psis_loo(values, COUNTS).pointwise)
    theirs = arviz_stats.compare(trees, method="stacking")["weight"].astype(float)
    found = stacking_weights(np.stack(ours), COUNTS)
    assert_allclose(found, [theirs[str(m)] for m in range(3)], atol=0.01)
    assert np.sort(found)[-2] > 0.05  # not a corner, where everything agrees


def test_weights_maximise_the_score_of_the_mixture() -> None:
    values = pointwise()
    found = stacking_weights(values, COUNTS)
    grid = np.linspace(0, 1, 101)
    triples = [(a, b, 1 - a - b) for a in grid for b in grid if a + b <= 1]
    scores = np.log(np.array(triples) @ np.exp(values)) @ COUNTS
    assert COUNTS @ np.log(found @ np.exp(values)) >= scores.max() - 1e-9
    assert_allclose(found, triples[int(scores.argmax())], atol=0.011)


def test_a_model_that_predicts_every_case_better_takes_all() -> None:
    values = np.stack([np.full(8, -1000.0), np.full(8, -1001.0)])
    assert_allclose(stacking_weights(values, COUNTS), [1, 0], atol=1e-9)
    assert stacking_weights(values[:1], COUNTS).tolist() == [1.0]
