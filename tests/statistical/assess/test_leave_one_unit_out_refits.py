"""Leaving one unit out by importance sampling, against fits without it; engines on pooled units."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.assess.left_out.leave_one_unit_out import _refitted, leave_one_unit_out
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.simulate import Parameters
from bayeslca.responses.item import Groups, Item

SEED = 20261214
ITEMS = tuple(Item(f"item{j}", ("no", "yes")) for j in range(5))
HERDS = "abcdefghijkl"
SIZES = [5, 2, 6, 3, 4, 5, 1, 6, 3, 4, 5, 2]
MODEL = LatentClassModel(
    ITEMS, 2, groups=Groups("herd", tuple(HERDS)), pooled=True, spread_prior=(2.0, 2.0)
)


@pytest.fixture(scope="module")
def posterior():
    yes = np.array([[0.9, 0.85, 0.9, 0.8, 0.9], [0.1, 0.2, 0.1, 0.15, 0.3]])
    elements = np.ones(MODEL.table.n_elements)
    for k in (0, 1):
        for j in range(5):
            row = MODEL.table.response_row[0, MODEL.table.item_start[j] + 1]
            at = MODEL.table.direct_element[row, k]
            elements[at] = yes[k, j]
            elements[at - 1] = 1 - yes[k, j]
    first = np.array([0.8, 0.5, 0.3, 0.6, 0.9, 0.7, 0.5, 0.4, 0.6, 0.7, 0.2, 0.5])
    shares = np.stack([first, 1 - first], axis=1)
    data = MODEL.simulate(SIZES, SEED, Parameters(elements, shares)).responses
    return MODEL.sample(data, seed=SEED, draws=1500, ess=1500, progress=False)


def test_importance_weights_and_fits_without_the_unit_agree(posterior):
    """Two ways to one number: from the one fit, and from a fit that never saw the unit."""
    found = leave_one_unit_out(posterior)
    units = posterior.responses.units
    rows = [row for row in range(6) if HERDS[row] not in found.unreliable]
    assert len(rows) > 3
    for row in rows:
        level = HERDS[row]
        again, error = _refitted(posterior, units, row, level, seed=1)
        one = found.table.iloc[row]
        assert abs(one["elpd"] - again) < 4 * np.hypot(error, one["elpd_mcse"]), level


def test_a_unit_that_is_left_out_is_predicted_worse_than_one_that_is_kept(posterior):
    """The mutation: without the weights the figure is that of the fit that saw the unit."""
    from scipy.special import logsumexp

    from bayeslca.assess.left_out.leave_one_unit_out import unit_log_likelihood

    values = unit_log_likelihood(posterior, posterior.responses.units, np.arange(12), 0)
    seen = logsumexp(values, axis=(0, 1)) - np.log(values[..., 0].size)
    left_out = leave_one_unit_out(posterior).table
    gap = seen - left_out["elpd"].to_numpy()
    assert np.all(gap > 0)
    assert np.any(gap > 6 * left_out["elpd_mcse"].to_numpy())
