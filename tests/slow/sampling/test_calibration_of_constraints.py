"""Calibration by simulation (Talts et al. 2018) of ordered, bounded, equal, fixed, grouped models.

Parameters from the constrained prior, data from them, and the rank of the parameters among the
posterior draws: uniform if prior draws, likelihood and sampler agree. No relabelling: the models
name their classes by constraints and priors, the sampler crosses labellings by itself (rule 25).
The log likelihood of the data is always among the quantities (Modrák et al. 2023).
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from bayeslca import Item, LatentClassModel
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import log_unit_likelihood, response_probability
from bayeslca.responses.item import Groups
from bayeslca.sampling.run import draw_posterior

SEED = 20261207
REPLICATES = 60
N_CASES = 40
KEPT = 100

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("meets", ("no", "yes"), yes="yes"),
    Item("mends", ("no", "yes"), yes="yes"),
    Item("type", ("a", "b", "c")),
)
NAMES = ("managed", "lapsed")
DISTRICTS = Groups("district", ("north", "south"))

MODELS = {
    "ordered": ([f"P({i}=yes | managed) > P({i}=yes | lapsed)" for i in ("fees", "meets")], {}),
    "bounded": (
        ["P(fees=yes | managed) >= 0.6", "0.1 < P(meets=yes | .) < 0.8", "P(managed) > 0.3"],
        {},
    ),
    "ordered categories": (
        [
            "P(type=a | managed) > P(type=a | lapsed)",
            "P(type=b | managed) < P(type=b | lapsed)",
            "P(managed) > P(lapsed)",
        ],
        {},
    ),
    "equal": (
        [
            "P(fees=yes | managed) = P(meets=yes | managed)",
            "P(type=a | lapsed) = P(mends=yes | lapsed)",
            "P(fees=yes | lapsed) ~ Beta(1, 3)",
        ],
        {},
    ),
    "fixed": (["P(fees=yes | lapsed) = 0.05", "P(type=b | managed) = 0"], {}),
    "grouped": (
        [
            "P(managed | district=north) > P(managed | district=south)",
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
        ],
        {"groups": DISTRICTS, "free_by_group": ("fees",)},
    ),
}


def quantities(model, units, elements, prevalence):
    """Quantities (..., q) of draws with any leading axes."""
    leading = elements.shape[:-1]
    log_likelihood = log_unit_likelihood(model.table, units, elements, prevalence) @ units.count
    answers = response_probability(model.table, elements).reshape(*leading, -1)
    parts = [log_likelihood[..., None], prevalence.reshape(*leading, -1), answers]
    return np.concatenate(parts, axis=-1)


@pytest.mark.parametrize("name", MODELS)
def test_ranks_of_the_parameters_are_uniform(name):
    statements, options = MODELS[name]
    model = LatentClassModel(ITEMS, NAMES, statements, **options)
    ranks = []
    for child in np.random.SeedSequence(SEED).spawn(REPLICATES):
        rng = np.random.default_rng(child)
        made = model.simulate(N_CASES, rng)
        units = compile_units(model.table, model.units(made.responses))
        draws = draw_posterior(
            model, made.responses, seed=child.spawn(1)[0], ess=400, r_hat=1.03, progress=False
        )
        every = draws.elements.shape[0] * draws.elements.shape[1] // KEPT
        elements = draws.elements.reshape(-1, model.table.n_elements)[::every]
        prevalence = draws.prevalence.reshape(-1, *draws.prevalence.shape[2:])[::every]
        found = quantities(model, units, elements, prevalence)
        truth = quantities(model, units, made.parameters.elements, made.parameters.prevalence)
        below = (found < truth).sum(axis=0) + rng.random() * (found == truth).sum(axis=0)
        ranks.append((below + rng.random()) / (len(found) + 1))
    ranks = np.array(ranks)
    varies = (quantities(model, units, elements, prevalence).std(axis=0)) > 1e-12
    p = np.array([stats.kstest(column, "uniform").pvalue for column in ranks[:, varies].T])
    assert p.min() > 1e-3 / varies.sum(), p.round(4)
