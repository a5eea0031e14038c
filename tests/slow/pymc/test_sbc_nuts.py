"""Simulation-based calibration of NUTS on the PyMC model, compiled once for all replicates.

Talts et al. (2018); the log likelihood is among the quantities (Modrak et al. 2023). The classes
are exchangeable, so all quantities are free of labels. Units are all possible patterns; a
replicate only changes their counts.
"""

from itertools import product

import numpy as np
import pytest
from scipy.stats import kstest

from bayeslca._compat import as_tree
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import draw_elements, log_unit_likelihood
from bayeslca.model.pymc.model import Names, Parts, build_from_table
from bayeslca.responses.item import Item
from bayeslca.responses.units import Units

nutpie = pytest.importorskip("nutpie")
pytestmark = [pytest.mark.pymc, pytest.mark.filterwarnings("ignore")]

SEED = 20261201
REPLICATES = 60
LEVELS = 99
THIN = 8
CASES = 60
MODEL = LatentClassModel(tuple(Item(f"item_{j}", ("no", "yes")) for j in range(4)), 2)
PATTERNS = np.array(list(product((0, 1), repeat=4)), dtype=np.int16)


def quantities(units, elements, prevalence):
    per_unit = log_unit_likelihood(MODEL.table, units, elements, prevalence)
    return {
        "log likelihood": per_unit @ units.count,
        "sum of squared prevalences": np.sum(prevalence[..., 0, :] ** 2, axis=-1),
        "p(no, no, no, no)": per_unit[..., 0],
        "p(yes, no, yes, no)": per_unit[..., 10],
    }


def test_ranks_of_prior_draws_are_uniform():
    """Kolmogorov-Smirnov at level 1e-4 in all, for 4 quantities; ties do not occur."""
    n = len(PATTERNS)
    units = Units(
        pattern=PATTERNS,
        group=np.zeros(n, dtype=np.int32),
        count=np.ones(n, dtype=np.int64),
        unit_of_row=np.arange(n),
    )
    source = MODEL.prevalence_source
    pm_model = build_from_table(MODEL.table, source, units, Names.of(MODEL))
    compiled = nutpie.compile_pymc_model(pm_model)
    rng = np.random.default_rng(SEED)
    ranks = {}
    for replicate in range(REPLICATES):
        elements, prevalence = draw_elements(MODEL.table, rng), source.simulate(rng)
        parts = Parts.of(pm_model)
        share = np.exp(log_unit_likelihood(MODEL.table, parts.units, elements, prevalence))
        pm_model.set_data("count", rng.multinomial(CASES, share / share.sum()))
        parts = Parts.of(pm_model)
        result = nutpie.sample(
            compiled.with_data(count=parts.units.count),
            draws=LEVELS * THIN,
            tune=400,
            chains=1,
            seed=replicate,
            progress_bar=False,
            save_warmup=False,
            target_accept=0.9,
        )
        posterior = as_tree(result).posterior
        values = {v.name: posterior[v.name].values[:, ::THIN] for v in parts.variables}
        drawn = quantities(
            parts.units,
            parts.elements(values, (1, LEVELS)),
            posterior["prevalence"].values[:, ::THIN, None],
        )
        for name, truth in quantities(parts.units, elements, prevalence).items():
            ranks.setdefault(name, []).append(int(np.sum(drawn[name] < truth)))
    for name, found in ranks.items():
        spread = (np.array(found) + rng.random(REPLICATES)) / (LEVELS + 1)
        p = kstest(spread, "uniform").pvalue
        assert p > 1e-4 / len(ranks), f"{name}: ranks are not uniform, p = {p:.1g}: {found}"
