"""Items answered together in PyMC: the same density as NumPy's."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca import AnsweredTogether, Item, LatentClassModel
from bayeslca.model.compile import compile_units
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import draw_elements, log_unit_likelihood
from bayeslca.model.pymc.model import Parts

pytestmark = pytest.mark.pymc
pm = pytest.importorskip("pymc")

SEED = 20270103
NO_YES = ("no", "yes")
ITEMS = (
    Item("fees", NO_YES),
    Item("accounts", NO_YES),
    Item("trust", ("low", "middle", "high"), ordered=True),
    Item("meets", NO_YES),
)
MODEL = LatentClassModel(
    ITEMS,
    ("managed", "lapsed"),
    (
        "P(meets=yes | managed) ~ Beta(9, 2)",
        "P(fees=yes, accounts=yes, trust=low | managed) = 0",
    ),
    answered_together=[AnsweredTogether(["fees", "accounts", "trust"], ["managed"])],
)


def test_the_log_density_is_that_of_numpy() -> None:
    answered = np.random.default_rng(SEED).random((80, 4)) < 0.75
    simulated = MODEL.simulate(80, seed=SEED, answered=answered).responses
    model = MODEL.to_pymc(simulated, gibbs=True)  # without transforms: values as they are
    parts = Parts.of(model)
    density = model.compile_fn(
        model.logp(), inputs=model.value_vars, point_fn=False, mode="FAST_COMPILE"
    )
    units = compile_units(MODEL.table, MODEL.units(simulated))
    rng = np.random.default_rng(SEED)
    for _ in range(3):
        elements = draw_elements(MODEL.table, rng)
        prevalence = MODEL.prevalence_source.simulate(rng)
        values = parts.values(elements, prevalence)
        at = [np.asarray(values[rv.name]) for rv in model.free_RVs]
        own = log_unit_likelihood(MODEL.table, units, elements, prevalence) @ units.count
        own += log_prior(MODEL.table, MODEL.prevalence_source, elements, prevalence)
        assert float(density(*at)) == pytest.approx(float(own), rel=1e-10)
