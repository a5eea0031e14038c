"""Bounds on the real line: densities, Jacobians, prior draws, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca import Item, LatentClassModel
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.prior_density import inside_bounds, log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.pymc.bounds import bounded_transform, coordinates
from bayeslca.model.pymc.model import Parts, build
from bayeslca.model.simulate import draw_parameters
from bayeslca.responses.item import Groups

pytestmark = pytest.mark.pymc
SEED = 20261208
ITEMS = (*(Item(f"i{j}", ("no", "yes"), yes="yes") for j in range(4)), Item("t", ("a", "b", "c")))
STATEMENTS = (
    "P(i0=yes | a) > P(i0=yes | b)",
    "P(i1=no | a) > P(i2=yes | a) > 0.1",
    "0.2 < P(i2=yes | b) < 0.7",
    "P(i3=yes | b) = P(i0=yes | b)",
)


@pytest.fixture(scope="module")
def model():
    return LatentClassModel(ITEMS, ("a", "b"), STATEMENTS)


@pytest.fixture(scope="module")
def responses(model):
    return model.simulate(60, seed=SEED).responses


@pytest.fixture(scope="module")
def pm_model(model, responses):
    return model.to_pymc(responses)


def on_the_line(pm_model, values):
    """Return a point of the PyMC model's value variables."""
    point = {}
    for variable in pm_model.free_RVs:
        transform = pm_model.rvs_to_transforms[variable]
        value = values[variable.name]
        moved = transform.forward(value, *variable.owner.inputs)
        point[pm_model.rvs_to_values[variable].name] = moved.eval()
    return point


def test_the_log_density_is_the_constrained_priors_and_the_likelihoods(model, responses, pm_model):
    parts, rng = Parts.of(pm_model), np.random.default_rng(SEED)
    units = compile_units(model.table, model.units(responses))
    log_density = pm_model.compile_logp(jacobian=False)
    for _ in range(5):
        p = draw_parameters(model.table, model.prevalence_source, rng)
        ours = log_prior(model.table, model.prevalence_source, p.elements, p.prevalence)
        ours += log_unit_likelihood(model.table, units, p.elements, p.prevalence) @ units.count
        point = on_the_line(pm_model, parts.values(p.elements, p.prevalence))
        assert float(log_density(point)) == pytest.approx(float(ours), rel=1e-9)


def test_the_jacobian_is_that_of_the_transform(model):
    import pytensor
    import pytensor.tensor as pt

    found = coordinates(model.table)
    transform = bounded_transform(found)
    u = pt.vector("u")
    x = transform.backward(u)
    both = pytensor.function(
        [u], [x, transform.log_jac_det(u), pytensor.gradient.jacobian(x, u), transform.forward(x)]
    )
    rng = np.random.default_rng(SEED)
    for _ in range(5):
        at = rng.normal(size=len(found.lower))
        values, log_det, jacobian, back = both(at)
        assert log_det == pytest.approx(np.linalg.slogdet(jacobian)[1], rel=1e-9)
        np.testing.assert_allclose(back, at, rtol=1e-8)
        elements = np.zeros(model.table.n_elements)
        elements[found.elements[:, 0]] = values
        elements[found.elements[:, 1]] = 1 - values
        used = found.elements.ravel()
        whole = np.where(np.isin(np.arange(elements.size), used), elements, 0.5)
        assert inside_bounds(model.table, whole)


def test_prior_draws_keep_the_bounds(model, pm_model):
    import pymc as pm

    with pm_model:
        drawn = pm.sample_prior_predictive(100, random_seed=SEED)
    parts = Parts.of(pm_model)
    values = {v.name: drawn.prior[v.name].values[0] for v in parts.variables}
    assert inside_bounds(model.table, parts.elements(values, (100,))).all()
    inside = pm_model.initial_point()["bounded_probability_bounded__"]
    assert np.abs(inside).max() < 5  # starts well inside


@pytest.mark.parametrize(
    ("statements", "message"),
    [
        (("P(t=a | a) > P(t=a | b)",), "more than two categories"),
        (("P(i0 | a) > P(i1=no | a)", "P(i0 | a) > P(i1 | a)"), "turn round"),
    ],
)
def test_what_has_no_form_on_the_real_line_is_refused_by_name(statements, message):
    model = LatentClassModel(ITEMS, ("a", "b"), ("P(i3 | a) ~ Beta(2, 1)", *statements))
    with pytest.raises(ModelError, match=message):
        model.to_pymc(model.simulate(20, seed=SEED).responses)


DISTRICTS = Groups("district", ("north", "south"))
PREVALENCES = [
    (("a", "b"), ("P(a) > P(b)",), None),
    (("a", "b", "c"), ("P(a) = 0.2", "P(b) > P(c)"), None),
    (("a", "b", "c"), ("P(a) = P(b)",), None),
    (("a", "b"), ("P(a | district=north) > P(a | district=south) > 0.2",), DISTRICTS),
    (("a", "b", "c"), ("P(a | district=north) = 0.3",), DISTRICTS),
]


@pytest.mark.parametrize(("classes", "statements", "groups"), PREVALENCES)
def test_constrained_prevalences_have_their_density_and_jacobian(classes, statements, groups):
    import pytensor
    import pytensor.tensor as pt

    apart = [f"P(i{j} | {classes[j]}) > P(i{j} | {classes[-1]})" for j in range(len(classes) - 1)]
    model = LatentClassModel(ITEMS, classes, (*apart, *statements), groups)
    data = model.simulate(40, seed=SEED).responses
    pm_model, rng = model.to_pymc(data), np.random.default_rng(SEED)
    parts = Parts.of(pm_model)
    p = draw_parameters(model.table, model.prevalence_source, rng)
    units = compile_units(model.table, model.units(data))
    ours = log_prior(model.table, model.prevalence_source, p.elements, p.prevalence)
    ours += log_unit_likelihood(model.table, units, p.elements, p.prevalence) @ units.count
    point = on_the_line(pm_model, parts.values(p.elements, p.prevalence))
    assert float(pm_model.compile_logp(jacobian=False)(point)) == pytest.approx(float(ours))
    source = model.prevalence_source
    variable = pm_model["prevalence"]
    transform = pm_model.rvs_to_transforms[variable]
    u = pt.vector("u")
    shares = transform.backward(u).reshape(source.element.shape)
    starts = source.blocks.block_start
    free = [e for e in range(starts[-1]) if e + 1 not in starts]  # all but each block's last
    places = source.first_place[free]
    x = pt.stack([shares[g, k] / source.share[g, k] for g, k in places.tolist()])
    both = pytensor.function(
        [u], [shares, transform.log_jac_det(u), pytensor.gradient.jacobian(x, u)]
    )
    values, log_det, jacobian = both(rng.normal(size=source.n_free))
    assert log_det == pytest.approx(np.linalg.slogdet(jacobian)[1], rel=1e-9)
    assert source.is_inside(values)
    np.testing.assert_allclose(values.sum(axis=-1), 1.0)


def test_orders_of_three_prevalences_are_refused_by_name():
    apart = ("P(i0 | a) > P(i0 | c)", "P(i1 | b) > P(i1 | c)")
    model = LatentClassModel(ITEMS, ("a", "b", "c"), (*apart, "P(a) > P(b)"))
    with pytest.raises(ModelError, match="prevalences of more than two classes"):
        model.to_pymc(model.simulate(20, seed=SEED).responses)


def test_another_prior_of_constrained_prevalences_is_refused():
    model = LatentClassModel(ITEMS, ("a", "b"), ("P(i0 | a) > P(i0 | b)", "P(a) > P(b)"))
    data = model.simulate(20, seed=SEED).responses
    with pytest.raises(ModelError, match="neither constrained nor pooled"):
        build(model, data, concentration=np.ones(2))
