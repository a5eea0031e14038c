"""Exact leave-one-out against whole fits by NUTS of the responses without one case.

A model with all that makes refits differ from a plain one: groups, an item of three categories,
an informative prior, a bound and a tie. NUTS (PyMC) shares nothing with the refits' sampler.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.special import logsumexp

from bayeslca.assess.comparison.information_criteria import mcse_of_mean
from bayeslca.assess.left_out.exact_loo import leave_one_out
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.responses.responses import Responses
from bayeslca.sampling.stopping import some_units

SEED = 20261224
Z = 4.0


def responses() -> Responses:
    frame = pd.DataFrame(
        {
            "fees": ["yes"] * 6 + ["no"] * 6 + ["yes"],
            "meets": ["yes"] * 5 + ["no"] * 7 + ["yes"],
            "type": ["a"] * 4 + ["b", "a"] + ["c"] * 5 + ["a", "c"],
            "gate": ["yes", "no"] * 6 + ["no"],
            "district": ["north", "south", "north"] * 4 + ["south"],
        }
    )
    frame.loc[3, "meets"] = None
    return Responses.from_frame(frame, items=["fees", "meets", "type", "gate"], group="district")


@pytest.mark.filterwarnings("ignore")
def test_a_refit_is_a_whole_fit_by_nuts_without_the_case() -> None:
    data = responses()
    model = LatentClassModel(
        data.items,
        classes=["managed", "lapsed"],
        statements=[
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
            "P(meets=yes | managed) >= 0.5",
            "P(gate=yes | managed) = P(gate=yes | lapsed)",
            "P(type=a, b, c | managed) ~ Dirichlet(4, 1, 1)",
        ],
        groups=data.groups,
    )
    posterior = model.sample(data, seed=SEED, progress=False)
    found = leave_one_out(posterior, exact=True, progress=False)
    assert found.table["reliable"].all()
    unit = int(np.argmin(found.loo.pointwise))
    case = int(np.flatnonzero(posterior.units.unit_of_row == unit)[0])
    rest = np.delete(np.arange(data.n_rows), case)
    without = replace(
        data,
        codes=data.codes[rest],
        counts=data.counts[rest],
        group_codes=data.group_codes[rest],
    )
    fit = model.sample(
        without, sampler="nuts", seed=SEED + unit, progress=False, nuts_backend="pymc", ess=400
    )
    scored = some_units(
        compile_units(model.table, posterior.units), np.array([unit], dtype=np.int64)
    )
    log_p = log_unit_likelihood(model.table, scored, fit.draws.elements, fit.draws.prevalence)[
        ..., 0
    ]
    log_density = float(logsumexp(log_p) - np.log(log_p.size))
    error = np.hypot(
        mcse_of_mean(np.exp(log_p - log_density)), found.table.loc[unit, "log_density_mcse"]
    )
    assert error < 0.05
    assert abs(found.table.loc[unit, "log_density"] - log_density) < Z * error
