"""The PyMC model's log density against NumPy's, its zeros, its draws and its names."""

from dataclasses import replace

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.compile import verified_log_weight
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import draw_elements, log_unit_likelihood, response_probability
from bayeslca.model.pymc.model import Names, Parts, as_cases, build, build_from_table
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units

pytestmark = pytest.mark.pymc
pm = pytest.importorskip("pymc")

SEED = 20261201
QUICK = "FAST_COMPILE"  # evaluates the same graph without compiling C
FEES = Item("fees", ("no", "yes"))
FENCED = Item("fenced", ("yes", "no"), yes="yes")
TRUST = Item("trust", ("low", "middle", "high"), ordered=True)
METER = Item("meter", ("none", "broken", "old", "new"))


def units_of(pattern, group=None, count=None):
    pattern = np.asarray(pattern, dtype=np.int16)
    n = len(pattern)
    return Units(
        pattern=pattern,
        group=np.zeros(n, dtype=np.int32) if group is None else np.asarray(group, dtype=np.int32),
        count=np.ones(n, dtype=np.int64) if count is None else np.asarray(count, dtype=np.int64),
        unit_of_row=np.arange(n),
    )


def random_units(sizes, n, seed=0, groups=1, missing=0.2):
    rng = np.random.default_rng(seed)
    pattern = np.column_stack([rng.integers(0, size, n) for size in sizes])
    pattern[rng.random(pattern.shape) < missing] = -1
    pattern[:, 0] = np.maximum(pattern[:, 0], 0)
    return units_of(pattern, rng.integers(0, groups, n), rng.integers(1, 6, n))


def plain_names(table, groups=0):
    sizes = np.diff(table.item_start)
    return Names(
        latent_class=tuple(f"class {k}" for k in range(table.n_classes)),
        item=tuple(f"item {j}" for j in range(table.n_items)),
        response=tuple(f"item {j}={c}" for j, size in enumerate(sizes) for c in range(size)),
        yes=tuple(int(size) - 1 for size in sizes),
        block=tuple(f"block {b}" for b in range(table.n_blocks)),
        group=tuple(f"group {g}" for g in range(groups)),
    )


def plain(classes, groups=None, statements=()):
    model = LatentClassModel((FEES, FENCED, TRUST, METER), classes, statements, groups=groups)
    units = random_units([2, 2, 3, 4], 12, groups=model.n_groups)
    return model.table, model.prevalence_source, units, Names.of(model), None


def one_class():
    return plain(1)


def polytomous_with_missing():
    return plain(3, statements=("P(fees=yes | .) ~ Beta(4, 2)", "P(fenced | .) ~ Beta(1, 3)"))


def groups():
    return plain(2, Groups("district", ("north", "south", "west")))


def everything_else():
    """Combine a shared block, known values 0, 1 and .7, a split, a pair, groups, verified cases.

    Groups of cases answer item 0 with blocks of their own.
    """
    builder = TableBuilder([2, 3, 2, 2, 4], 2, (0, 1))
    shared = builder.block([2.0, 3.0])
    split = builder.block([1.5, 2.5])
    for g in (0, 1):
        own = builder.block([1.0 + g, 2.0])
        for k in (0, 1):
            builder.set_item(g, 0, k, own if k else shared)
    known = builder.block([2.0, 1.0])
    pair = builder.block([1.0, 2.0, 3.0, 1.0])
    alone = builder.block([3.0, 1.0]), builder.block([1.0, 4.0])
    rest = builder.block([1.0, 2.0, 1.0])
    meter = builder.block([1.0, 1.0, 2.0, 2.0])
    together = builder.answered_together(2, 3)
    for g in (0, 1):
        builder.set_known(g, 1, 0, {0: 0.0, 1: 0.7})
        builder.set_known(g, 1, 1, {2: 0.25}, known)
        builder.set_joint(g, together, 0, pair)
        builder.set_item(g, 2, 1, alone[0])
        builder.set_item(g, 3, 1, alone[1])
        builder.set_split(g, 4, 0, 2, split, rest)
        builder.set_item(g, 4, 1, meter)
    table = builder.build()
    units = random_units([2, 3, 2, 2, 4], 24, seed=3, groups=2)
    verified = np.where(np.arange(24) % 6 == 0, 1, -1)
    source = DirichletPrevalence(np.array([[1.0, 2.0], [3.0, 0.5]]))
    return table, source, units, plain_names(table, 2), verified_log_weight(verified, 2)


CASES = [one_class, polytomous_with_missing, groups, everything_else]


@pytest.fixture(scope="module", params=CASES, ids=lambda case: case.__name__)
def built(request):
    table, source, units, names, weight = request.param()
    model = build_from_table(table, source, units, names, log_weight=weight, gibbs=True)
    return table, source, units, model, Parts.of(model)


def points(table, source, n):
    rng = np.random.default_rng(SEED)
    return [(draw_elements(table, rng), source.simulate(rng)) for _ in range(n)]


def test_log_density_is_that_of_numpy(built):
    table, source, units, model, parts = built
    log_density = model.compile_logp(mode=QUICK)
    for elements, prevalence in points(table, source, 5):
        per_unit = log_unit_likelihood(table, parts.units, elements, prevalence)
        expected = per_unit @ units.count + log_prior(table, source, elements, prevalence)
        found = log_density(parts.values(elements, prevalence))
        np.testing.assert_allclose(found, expected, rtol=1e-10)


def test_pointwise_log_density_counts_a_units_cases(built):
    table, source, units, model, parts = built
    pointwise = model.compile_fn(
        model.logp(vars=[model["responses"]], sum=False), mode=QUICK, on_unused_input="ignore"
    )
    elements, prevalence = points(table, source, 1)[0]
    expected = log_unit_likelihood(table, parts.units, elements, prevalence) * units.count
    inputs = parts.values(elements, prevalence)
    np.testing.assert_allclose(pointwise(inputs)[0], expected, rtol=1e-10)


def test_gradient_is_finite_and_right_beside_exact_zeros():
    table, source, units, names, weight = everything_else()
    model = build_from_table(table, source, units, names, log_weight=weight)
    value = model.compile_logp(mode=QUICK)
    gradient = model.compile_dlogp(mode=QUICK)
    point = model.initial_point()
    found = gradient(point)
    assert np.all(np.isfinite(found))
    steps, at = [], 0
    for name in [variable.name for variable in model.value_vars]:
        for i in np.ndindex(point[name].shape):
            up, down = ({k: v.copy() for k, v in point.items()} for _ in range(2))
            up[name][i] += 1e-6
            down[name][i] -= 1e-6
            steps.append((value(up) - value(down)) / 2e-6)
            at += 1
    np.testing.assert_allclose(found, steps, rtol=1e-5, atol=1e-5)


def test_response_probability_follows_from_the_blocks(built):
    table, source, _, model, parts = built
    elements, prevalence = points(table, source, 1)[0]
    (found,) = model.compile_fn(
        model.replace_rvs_by_values([model["response_probability"]]),
        inputs=[v for v in model.value_vars if v.name != "prevalence"],
        mode=QUICK,
    )({k: v for k, v in parts.values(elements, prevalence).items() if k != "prevalence"})
    expected = response_probability(table, elements)
    np.testing.assert_allclose(found, expected[0] if found.ndim == 2 else expected, rtol=1e-12)


def test_values_and_elements_are_inverse(built):
    table, source, _, _, parts = built
    for elements, prevalence in points(table, source, 3):
        values = parts.values(elements, prevalence)
        np.testing.assert_allclose(parts.elements(values), elements, rtol=1e-12)


def test_random_answers_have_the_probabilities_of_the_model():
    """Frequencies of 4000 draws of one case in each group against the exact joint probabilities.

    Within 4.5 standard errors of a binomial share; the missing answer stays missing.
    """
    table, source, _, names, _ = everything_else()
    units = units_of([[0, 1, 0, 0, 0], [0, 1, 0, -1, 0]], [0, 1])
    rng = np.random.default_rng(SEED)
    elements, prevalence = draw_elements(table, rng), source.simulate(rng)
    model = build_from_table(table, source, units, names)
    parts = Parts.of(model)
    fixed = pm.do(model, parts.values(elements, prevalence))
    draws = pm.draw(fixed["responses"], draws=4000, random_seed=1, mode=QUICK)
    assert draws.shape == (4000, 2, 5)
    assert np.all(draws[:, 1, 3] == -1)
    for u in (0, 1):
        patterns, times = np.unique(draws[:, u], axis=0, return_counts=True)
        seen = units_of(patterns, np.full(len(patterns), u))
        exact = np.exp(
            log_unit_likelihood(
                table,
                Parts.of(build_from_table(table, source, seen, names)).units,
                elements,
                prevalence,
            )
        )
        assert exact.sum() > 0.99
        error = np.sqrt(exact * (1 - exact) / 4000)
        assert np.max(np.abs(times / 4000 - exact) / error) < 4.5


def some_responses():
    codes = np.array([[0, 1], [1, 0], [0, 1], [-1, -1], [1, -1]], dtype=np.int16)
    return Responses(
        items=(FEES, FENCED),
        codes=codes,
        counts=np.array([1, 2, 1, 1, 1]),
        group_codes=np.zeros(5, dtype=np.int32),
    )


def test_dims_and_coords_are_named():
    model = build(LatentClassModel((FEES, FENCED), 2), some_responses())
    assert dict(model.named_vars_to_dims) == {
        "prevalence": ("latent_class",),
        "binary_probability": ("latent_class", "binary_response"),
        "response_probability": ("latent_class", "response"),
        "count": ("unit",),
        "responses": ("unit", "item"),
    }
    assert list(model.coords["binary_response"]) == ["fees=yes", "fenced=yes"]
    assert list(model.coords["latent_class"]) == ["1", "2"]


def test_by_case_has_a_line_for_each_case():
    responses = some_responses()
    cases = as_cases(responses.units, responses.counts)
    assert cases.pattern.tolist() == [[0, 1], [1, 0], [1, 0], [0, 1], [1, -1]]
    model = build(LatentClassModel((FEES, FENCED), 2), responses, by_case=True)
    assert model.named_vars_to_dims["responses"] == ("case", "item")
    assert "count" not in model.named_vars


def test_impossible_answers_and_bounds_for_the_gibbs_step_are_refused():
    builder = TableBuilder([2], 1)
    builder.set_known(0, 0, 0, {0: 0.0})
    table = builder.build()
    source = DirichletPrevalence(np.ones((1, 1)))
    with pytest.raises(ModelError, match="3 cases gave answers that no class allows"):
        build_from_table(table, source, units_of([[0]], count=[3]), plain_names(table))
    bounded = replace(LatentClassModel((FEES,), 1).table, element_lower=np.array([0.2, 0.0]))
    with pytest.raises(ModelError, match="bounded, ordered or pooled"):
        build_from_table(bounded, source, units_of([[0]]), plain_names(bounded), gibbs=True)


def test_a_foreign_model_is_refused():
    with pytest.raises(ModelError, match="not made by to_pymc"):
        Parts.of(pm.Model())


def test_variables_stand_in_their_named_places():
    """The value at (class, "fees=yes") is that response probability of that class; no others."""
    table, source, units, names, _ = plain(3)
    parts = Parts.of(build_from_table(table, source, units, names, gibbs=True))
    elements, prevalence = points(table, source, 1)[0]
    values = parts.values(elements, prevalence)
    by_name = dict(zip(names.response, response_probability(table, elements)[0].T, strict=True))
    binary = {variable.name: variable for variable in parts.variables}["binary_probability"]
    for i, response in enumerate(binary.coords["binary_response"]):
        np.testing.assert_array_equal(values["binary_probability"][:, i], by_name[response])
    assert list(binary.coords["binary_response"]) == ["fees=yes", "fenced=yes"]
    for c, category in enumerate(TRUST.categories):
        found = values["probability_of_3"][:, 0, c]
        np.testing.assert_array_equal(found, by_name[f"trust={category}"])
