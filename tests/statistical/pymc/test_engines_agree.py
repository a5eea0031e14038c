"""NUTS, the Gibbs step inside PyMC and the Gibbs sampler against exact enumeration.

No source but arithmetic: given the classes of all cases, prevalences and blocks are independent
Dirichlets, so summing over all assignments of nine cases to two classes gives exact posterior
moments. Quantities do not depend on labels. Within 4 Monte Carlo standard errors.
"""

import logging
from itertools import product

import numpy as np
import pytest
from scipy.special import gammaln, logsumexp

from bayeslca._compat import as_tree
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.pymc.model import Parts, build
from bayeslca.responses.item import Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.nuts import sample_pymc_model
from bayeslca.sampling.run import draw_posterior

pm = pytest.importorskip("pymc")
pytestmark = [pytest.mark.pymc, pytest.mark.filterwarnings("ignore")]

SEED = 20261201
ITEMS = (
    Item("fees", ("no", "yes")),
    Item("meets", ("no", "yes")),
    Item("trust", ("low", "middle", "high")),
)
CODES = [[1, 1, 2], [1, 1, 2], [1, 0, 2], [0, 0, 0], [0, 0, 0], [0, -1, 1], [1, 1, 1], [0, 1, -1]]
COUNTS = [1, 1, 1, 1, 2, 1, 1, 1]
MODEL = LatentClassModel(
    ITEMS,
    2,
    ("P(fees=yes | .) ~ Beta(3, 2)", "P(trust=low, middle, high | .) ~ Dirichlet(1, 2, 1)"),
)
PRIOR = ((2.0, 3.0), (1.0, 1.0), (1.0, 2.0, 1.0))


def responses():
    return Responses(
        items=ITEMS,
        codes=np.array(CODES, dtype=np.int16),
        counts=np.array(COUNTS),
        group_codes=np.zeros(len(CODES), dtype=np.int32),
    )


def assignments(cases):
    """Return log p(cases | classes) and the class counts of every assignment to two classes."""
    log_weight, counts = [], []
    for classes in product((0, 1), repeat=len(cases)):
        total = 0.0
        for j, prior in enumerate(PRIOR):
            for k in (0, 1):
                codes = [c[j] for c, z in zip(cases, classes, strict=True) if z == k and c[j] >= 0]
                count = np.bincount(np.array(codes, dtype=int), minlength=len(prior))
                total += _log_beta(count + np.array(prior)) - _log_beta(np.array(prior))
        log_weight.append(total)
        counts.append(np.bincount(classes, minlength=2))
    return np.array(log_weight), np.array(counts)


def evidence(states, concentration=1.0):
    """Return log p(cases) and the posterior mean of the sum of squared prevalences."""
    log_weight, counts = states
    n = counts + concentration
    log_weight = log_weight + _log_beta(n) - _log_beta(np.full(2, concentration))
    total = logsumexp(log_weight)
    squares = np.sum(n * (n + 1), axis=1) / (n.sum(axis=1) * (n.sum(axis=1) + 1))
    return total, float(np.exp(log_weight - total) @ squares)


def _log_beta(a):
    return gammaln(a).sum(axis=-1) - gammaln(a.sum(axis=-1))


CASES = [code for code, count in zip(CODES, COUNTS, strict=True) for _ in range(count)]
NEW = [[1, 1, 2], [0, 0, 0], [1, 0, 1]]


@pytest.fixture(scope="module")
def exact():
    total, squares = evidence(assignments(CASES))
    out = {"sum of squared prevalences": squares}
    for case in NEW:
        out[f"p({case})"] = float(np.exp(evidence(assignments([*CASES, case]))[0] - total))
    return out


def quantities(elements, prevalence):
    """Compute the same from draws: elements (chain, draw, E), prevalence (chain, draw, 1, K)."""
    new = Responses(
        items=ITEMS,
        codes=np.array(NEW, dtype=np.int16),
        counts=np.ones(3, dtype=int),
        group_codes=np.zeros(3, dtype=np.int32),
    )
    units = Parts.of(build(MODEL, new)).units
    p = np.exp(log_unit_likelihood(MODEL.table, units, elements, prevalence))
    out = {"sum of squared prevalences": np.sum(prevalence[..., 0, :] ** 2, axis=-1)}
    order = new.units.unit_of_row
    return out | {f"p({case})": p[..., order[i]] for i, case in enumerate(NEW)}


def check(exact, elements, prevalence):
    from arviz_stats.base import array_stats

    for name, draws in quantities(elements, prevalence).items():
        error = float(array_stats.mcse(draws, chain_axis=0, draw_axis=1, method="mean"))
        z = (draws.mean() - exact[name]) / error
        assert abs(z) < 4, f"{name}: {draws.mean():.5f} against {exact[name]:.5f}, z = {z:.1f}"
        assert error < 0.02 * exact[name], f"{name}: error {error} says little"


def sample(model, steps, draws=4000):
    logging.getLogger("pymc").setLevel(logging.ERROR)
    with model:
        return as_tree(
            pm.sample(
                draws,
                tune=500,
                chains=2,
                cores=1,
                step=steps(),
                random_seed=SEED,
                progressbar=False,
                compute_convergence_checks=False,
            )
        )


def test_gibbs_sampler_against_enumeration(exact):
    draws = draw_posterior(MODEL, responses(), seed=SEED, draws=4000, progress=False)
    check(exact, draws.elements, draws.prevalence)


def test_nuts_against_enumeration(exact):
    draws = sample_pymc_model(
        build(MODEL, responses()),
        MODEL.symmetry,
        seed=SEED,
        draws=1000,
        tune=500,
        nuts_backend="pymc",
    )
    check(exact, draws.elements, draws.prevalence)
    assert draws.sampler == "nuts"
    assert draws.statistics["diverging"].shape == (4, 1000)
    assert draws.statistics["diverging"].mean() < 0.01
    assert not draws.limit_reached


def test_gibbs_step_against_enumeration(exact):
    from bayeslca.sampling.pymc_step import GibbsStep

    model = build(MODEL, responses(), gibbs=True)
    posterior = sample(model, lambda: [GibbsStep()]).posterior
    values = {rv.name: posterior[rv.name].values for rv in model.free_RVs}
    elements = Parts.of(model).elements(values, (2, 4000))
    check(exact, elements, values["prevalence"][:, :, None])


def test_gibbs_step_beside_a_hyperprior():
    """A concentration of its own prior: NUTS draws it while the Gibbs step draws the rest.

    Exact posterior moments by quadrature over the concentration of the enumerated evidence.
    """
    from arviz_stats.base import array_stats

    from bayeslca.sampling.pymc_step import GibbsStep

    with pm.Model() as model:
        concentration = pm.Gamma("concentration", 2.0, 0.5)
    build(MODEL, responses(), gibbs=True, concentration=concentration, into=model)
    tree = sample(model, lambda: [GibbsStep()], draws=2500)
    grid = np.linspace(0.01, 40, 4000)
    states = assignments(CASES)
    log_evidence, squares = np.array([evidence(states, a) for a in grid]).T
    log_density = np.log(grid) - 0.5 * grid + log_evidence
    weight = np.exp(log_density - log_density.max())
    weight /= weight.sum()
    prevalence = tree.posterior["prevalence"].values
    for draws, truth in [
        (np.log1p(tree.posterior["concentration"].values), weight @ np.log1p(grid)),
        (np.sum(prevalence**2, axis=-1), weight @ squares),
    ]:
        error = float(array_stats.mcse(draws, chain_axis=0, draw_axis=1, method="mean"))
        assert abs(draws.mean() - truth) < 4 * error
        assert error < 0.02


def test_gibbs_step_refuses_what_it_cannot_draw_exactly():
    from bayeslca.sampling.pymc_step import GibbsStep

    model = build(MODEL, responses(), gibbs=True)
    with model:
        pm.Potential("few in class 1", -10 * model["prevalence"][0])
    with pytest.raises(ModelError, match="'few in class 1' depends on prevalence"):
        GibbsStep(model=model)
    with pytest.raises(ModelError, match="gibbs=True"):
        GibbsStep(model=build(MODEL, responses()))
