"""EM: against NumPy, closed forms, SciPy's optimiser and other packages where a model coincides."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import minimize

from bayeslca import Groups, Item, LatentClassModel, Responses
from bayeslca.assess.likelihood.em import climb, expect, maximise, work_for
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.em_runs import climb_from, scattered
from bayeslca.assess.likelihood.maximum_likelihood import maximum_likelihood
from bayeslca.assess.likelihood.observed_information import Score
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import log_unit_likelihood, membership
from bayeslca.model.simulate import Parameters

SEED = 20261207
ITEMS = (
    Item("fees", ("no", "yes")),
    Item("accounts", ("no", "yes")),
    Item("meets", ("never", "yearly", "monthly")),
    Item("fenced", ("no", "yes")),
)
MODELS = {
    "free": {"classes": 2},
    "known": {"classes": 2, "statements": ["P(fees=yes | .) = 0.4"]},
    "part known": {"classes": 2, "statements": ["P(meets=never | .) = 0.2"]},
    "equal": {"classes": 2, "statements": ["P(fees=yes | .) = P(accounts=yes | .)"]},
    "equal 2 v 3": {"classes": 2, "statements": ["P(fees=yes | .) = P(meets=monthly | .)"]},
    "bound": {"classes": 2, "statements": ["P(fees=yes | .) > 0.45"]},
    "bound of three": {"classes": 2, "statements": ["P(meets=never | .) < 0.1"]},
    "ordered": {
        "classes": ("managed", "lapsed"),
        "statements": [
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
            "P(accounts=yes | managed) < P(accounts=yes | lapsed)",
            "P(meets=never | managed) > P(meets=never | lapsed)",
        ],
    },
    "prevalence": {
        "classes": ("managed", "lapsed"),
        "statements": ["P(managed) < 0.25", "P(fees=yes | managed) > P(fees=yes | lapsed)"],
    },
    "equal prevalences": {
        "classes": ("managed", "lapsed"),
        "statements": ["P(managed) = P(lapsed)", "P(fees=yes | managed) > P(fees=yes | lapsed)"],
    },
    "known prevalence": {
        "classes": ("a", "b", "c"),
        "statements": ["P(a) = 0.3", "P(fees=yes | b) > P(fees=yes | c)"],
    },
    "three ordered": {
        "classes": ("a", "b", "c"),
        "statements": ["P(fees=yes | a) > P(fees=yes | b) > P(fees=yes | c) > 0.3"],
    },
}


def answers(n: int = 150, groups: Groups | None = None, missing: float = 0.15) -> Responses:
    model = LatentClassModel(ITEMS, 2, groups=groups)
    mask = np.random.default_rng(SEED).random((n, len(ITEMS))) >= missing
    return model.simulate(n, seed=SEED, answered=mask).responses


def stated(name: str, groups: Groups | None = None) -> LatentClassModel:
    return LatentClassModel(ITEMS, groups=groups, **MODELS[name])


@pytest.mark.parametrize("name", MODELS)
def test_every_step_climbs_and_keeps_the_constraints(name: str) -> None:
    model, responses = stated(name), answers()
    blocks = AllBlocks.of(model)
    layout = blocks.layout(compile_units(model.table, model.units(responses)))
    for point in scattered(blocks, 5, np.random.default_rng(SEED)):
        trace = np.full(400, np.nan)
        value, steps = climb(layout, point, 400, 1e-9, trace)
        seen = trace[: steps + 1][np.isfinite(trace[: steps + 1])]
        assert seen.size > 5
        assert np.diff(seen).min() > -1e-9
        assert value >= seen[-1] - 1e-9
        own = blocks.blocks
        assert np.all(point >= own.element_lower - 1e-12)
        assert np.all(point <= own.element_upper + 1e-12)
        assert np.all(point[own.order_above] >= point[own.order_below] - 1e-12)
        assert_allclose(np.add.reduceat(point, own.block_start[:-1]), 1.0)


@pytest.mark.parametrize("name", MODELS)
def test_expectation_is_that_of_numpy(name: str) -> None:
    groups = Groups("herd", ("a", "b"))
    model, responses = stated(name, groups), answers(groups=groups)
    blocks = AllBlocks.of(model)
    units = compile_units(model.table, model.units(responses))
    layout = blocks.layout(units)
    work = work_for(layout)
    (point,) = scattered(blocks, 1, np.random.default_rng(SEED))
    value = expect(layout, work, point)
    one = blocks.parameters(point)
    log_p = log_unit_likelihood(model.table, units, one.elements, one.prevalence)
    assert value == pytest.approx(float(units.count @ log_p), abs=1e-9)
    shares = membership(model.table, units, one.elements, one.prevalence)
    assert_allclose(work.shares, shares, atol=1e-12)


def test_extra_weights_of_classes_count() -> None:
    # Known classes: weight 0 or minus infinity; here finite ones too.
    model, responses = stated("free"), answers(missing=0.0)
    units = model.units(responses)
    rng = np.random.default_rng(SEED)
    weight = rng.normal(size=(units.n_units, 2))
    weight[::3, 0] = -np.inf
    table = compile_units(model.table, units, weight)
    blocks = AllBlocks.of(model)
    (point,) = scattered(blocks, 1, rng)
    one = blocks.parameters(point)
    log_p = log_unit_likelihood(model.table, table, one.elements, one.prevalence)
    layout = blocks.layout(table)
    work = work_for(layout)
    assert expect(layout, work, point) == pytest.approx(float(table.count @ log_p))
    assert_allclose(
        work.shares, membership(model.table, table, one.elements, one.prevalence), atol=1e-12
    )
    value, _ = Score.of(blocks, table).by_unit(point)
    assert_allclose(np.log(value), log_p)


@pytest.mark.parametrize("name", MODELS)
def test_gradient_is_that_of_differences(name: str) -> None:
    groups = Groups("herd", ("a", "b"))
    model, responses = stated(name, groups), answers(groups=groups)
    blocks = AllBlocks.of(model)
    units = compile_units(model.table, model.units(responses))
    score = Score.of(blocks, units)
    (point,) = scattered(blocks, 1, np.random.default_rng(SEED))

    def log_likelihood(x: np.ndarray) -> float:
        one = blocks.parameters(x)
        log_p = log_unit_likelihood(model.table, units, one.elements, one.prevalence)
        return float(units.count @ log_p)

    h = 1e-6
    steps = np.eye(point.size) * h
    slopes = [(log_likelihood(point + s) - log_likelihood(point - s)) / (2 * h) for s in steps]
    assert_allclose(score.gradient(point), slopes, rtol=1e-4, atol=1e-3)
    some = np.eye(point.size)[:, :4]
    curved = [
        -(score.gradient(point + h * s) - score.gradient(point - h * s)) / (2 * h) for s in some.T
    ]
    assert_allclose(score.information(point, some), np.array(curved) @ some, rtol=1e-4, atol=1e-2)


def test_tiny_probabilities_go_by_logs() -> None:
    items = tuple(Item(f"item_{j}", ("no", "yes")) for j in range(60))
    model = LatentClassModel(items, 2)
    responses = model.simulate(20, seed=SEED).responses
    blocks = AllBlocks.of(model)
    units = compile_units(model.table, model.units(responses))
    point = np.where(np.arange(blocks.n_elements) % 2, 1e-13, 1.0 - 1e-13)
    point[-2:] = 0.3, 0.7
    layout = blocks.layout(units)
    one = blocks.parameters(point)
    expected = units.count @ log_unit_likelihood(model.table, units, one.elements, one.prevalence)
    assert expect(layout, work_for(layout), point) == pytest.approx(float(expected), rel=1e-12)
    assert expected < 20 * np.log(1e-308)  # their product is 0


def test_one_class_is_the_margins() -> None:
    # Closed form: with one class the estimates are the observed shares.
    responses = answers(missing=0.0)
    fit = LatentClassModel(ITEMS, 1).maximum_likelihood(responses, starting_points=3, seed=1)
    shares = np.concatenate(
        [
            np.bincount(c, minlength=i.n_categories)
            for c, i in zip(responses.codes.T, ITEMS, strict=True)
        ]
    ) / len(responses.codes)
    assert_allclose(fit.response_probability["estimate"], shares, atol=1e-12)
    n = responses.n_cases
    errors = np.sqrt(shares * (1 - shares) / n)
    assert_allclose(fit.response_probability["standard_error"], errors, rtol=1e-9)
    assert np.isnan(fit.relative_entropy)
    assert fit.n_parameters == 5
    assert fit.df == 24 - 1 - 5


def test_one_class_of_binary_items_is_statsmodels_binomial() -> None:
    from statsmodels.genmod.families import Binomial
    from statsmodels.genmod.generalized_linear_model import GLM

    responses = answers(missing=0.0).with_items(["fees", "accounts", "fenced"])
    fit = LatentClassModel(responses.items, 1).maximum_likelihood(
        responses, starting_points=20, seed=1
    )
    item = np.tile(np.eye(3), (len(responses.codes), 1))
    glm = GLM(responses.codes.ravel(), item, family=Binomial()).fit()
    assert fit.log_likelihood == pytest.approx(glm.llf, abs=1e-6)
    assert fit.aic == pytest.approx(glm.aic, abs=1e-6)
    p = glm.predict(np.eye(3))
    yes = fit.response_probability.query("category == 'yes'")
    assert_allclose(yes["estimate"], p, atol=1e-6)
    # Delta method from the logit, where statsmodels has its standard errors.
    assert_allclose(yes["standard_error"], glm.bse * p * (1 - p), rtol=1e-5)


def test_likelihood_and_standard_errors_are_those_of_scipy() -> None:
    # BFGS on logits, derivatives by differences: knows nothing of EM or of our gradients.
    responses = answers(400, missing=0.1).with_items(["fees", "accounts", "meets"])
    truth = LatentClassModel(responses.items, 1)
    model = LatentClassModel(
        responses.items, 2, ["P(fees=yes | .) = P(accounts=yes | .)"], groups=None
    )
    fit = model.maximum_likelihood(responses, starting_points=20, seed=1)
    assert truth.n_classes == 1
    codes = responses.codes

    def log_likelihood(x: np.ndarray) -> float:
        share = 1 / (1 + np.exp(-x[0]))
        total = np.zeros((len(codes), 2))
        for k in range(2):
            yes = 1 / (1 + np.exp(-x[1 + k]))
            three = np.exp(np.append(x[3 + 2 * k : 5 + 2 * k], 0.0))
            three /= three.sum()
            p = np.full(len(codes), share if k == 0 else 1 - share)
            for j in range(2):
                p *= np.where(codes[:, j] < 0, 1.0, np.where(codes[:, j] == 1, yes, 1 - yes))
            p *= np.where(codes[:, 2] < 0, 1.0, three[codes[:, 2]])
            total[:, k] = p
        seen = (codes >= 0).any(axis=1)
        return float(np.log(total.sum(axis=1)[seen]).sum())

    rng = np.random.default_rng(SEED)
    runs = [minimize(lambda x: -log_likelihood(x), rng.normal(size=7)) for _ in range(4)]
    best = -min(run.fun for run in runs)
    assert fit.log_likelihood == pytest.approx(best, abs=1e-4)
    # Standard errors of the estimates from differences of this function at the solution.
    yes = fit.response_probability.query("item == 'fees' and category == 'yes'")
    share = float(fit.prevalence["estimate"][0])
    three = fit.response_probability.query("item == 'meets'")["estimate"].to_numpy().reshape(2, 3)
    x = np.concatenate(
        [
            [np.log(share / (1 - share))],
            np.log(yes["estimate"] / (1 - yes["estimate"])),
            np.log(three[:, :2] / three[:, 2:]).ravel(),
        ]
    )
    h = 1e-4
    step = np.eye(7) * h
    f = log_likelihood
    information = -np.array(
        [[f(x + a + b) - f(x + a - b) - f(x - a + b) + f(x - a - b) for a in step] for b in step]
    ) / (4 * h * h)
    variance = np.diag(np.linalg.inv(information))
    p = np.concatenate([[share], yes["estimate"]])
    assert_allclose(
        np.concatenate([[fit.prevalence["standard_error"][0]], yes["standard_error"]]),
        np.sqrt(variance[:3]) * p * (1 - p),
        rtol=2e-3,
    )


@pytest.mark.parametrize("name", ["bound", "ordered", "three ordered", "prevalence"])
def test_constrained_maximum_is_scipys(name: str) -> None:
    # SLSQP with the constraints as such, from our solution and from elsewhere: finds no better.
    model, responses = stated(name), answers(missing=0.0)
    blocks = AllBlocks.of(model)
    units = compile_units(model.table, model.units(responses))
    found = climb_from(blocks, units, scattered(blocks, 30, np.random.default_rng(1)), 1)
    layout = blocks.layout(units)
    own = blocks.blocks
    starts = own.block_start[:-1]
    orders = np.zeros((own.order_above.size, blocks.n_elements))
    orders[np.arange(len(orders)), own.order_above] = 1.0
    orders[np.arange(len(orders)), own.order_below] -= 1.0
    best = -np.inf
    rng = np.random.default_rng(SEED)
    for point in [found.elements, *scattered(blocks, 1, rng)]:
        run = minimize(
            lambda x: -expect(layout, work_for(layout), np.maximum(x, 1e-9)),
            point,
            method="SLSQP",
            bounds=list(zip(np.maximum(own.element_lower, 1e-9), own.element_upper, strict=True)),
            constraints=[
                {"type": "eq", "fun": lambda x: np.add.reduceat(x, starts) - 1.0},
                *([{"type": "ineq", "fun": lambda x: orders @ x}] if len(orders) else []),
            ],
            options={"maxiter": 150, "ftol": 1e-10},
        )
        if np.abs(np.add.reduceat(run.x, starts) - 1.0).max() < 1e-9:
            best = max(best, -run.fun)
    assert best > -np.inf
    assert found.log_likelihood == pytest.approx(best, abs=1e-4) or found.log_likelihood > best


def test_pooling_is_isotonic_regression_of_scikit_learn() -> None:
    from sklearn.isotonic import IsotonicRegression

    model = stated("three ordered")
    blocks = AllBlocks.of(model)
    layout = blocks.layout(compile_units(model.table, model.units(answers())))
    work = work_for(layout)
    rng = np.random.default_rng(SEED)
    for _ in range(50):
        counts = rng.gamma(1.0, 10.0, blocks.n_elements)
        work.counts[:] = counts
        point = np.zeros(blocks.n_elements)
        maximise(layout, work, point)
        chain = blocks.chains
        cases = np.array([counts[e] + counts[e ^ 1] for e in chain.element])
        assert chain.element.size == 3
        fitted = IsotonicRegression(y_min=0.3, y_max=1.0).fit_transform(
            np.arange(3), counts[chain.element] / cases, sample_weight=cases
        )
        assert_allclose(point[chain.element], fitted, atol=1e-12)
        assert point[chain.element[0]] >= 0.3


def test_different_bounds_along_a_chain() -> None:
    # SLSQP on the three proportions, which knows nothing of pooling.
    model = LatentClassModel(
        ITEMS,
        ("a", "b", "c"),
        [
            "P(fees=yes | a) > P(fees=yes | b) > P(fees=yes | c)",
            "P(fees=yes | a) < 0.6",
            "P(fees=no | b) < 0.6",
            "P(fees=yes | c) > 0.3",
        ],
    )
    blocks = AllBlocks.of(model)
    layout = blocks.layout(compile_units(model.table, model.units(answers())))
    work = work_for(layout)
    rng = np.random.default_rng(SEED)
    low, high = np.array([0.3, 0.4, 0.3]), 0.6
    for _ in range(20):
        counts = rng.gamma(1.0, 10.0, blocks.n_elements)
        work.counts[:] = counts
        point = np.full(blocks.n_elements, 0.5)
        maximise(layout, work, point)
        chain = blocks.chains.element
        yes = np.array([e if model.table.item_start[0] == 0 and e % 2 else e ^ 1 for e in chain])
        order = yes if yes[0] == chain[0] else yes[::-1]
        a, b = counts[order], counts[order ^ 1]  # from c to a

        def loss(x: np.ndarray, a: np.ndarray = a, b: np.ndarray = b) -> float:
            return -float(a @ np.log(x) + b @ np.log1p(-x))

        run = minimize(
            loss,
            [0.41, 0.45, 0.5],
            method="SLSQP",
            bounds=[(low[0], high), (low[1], high), (low[2], high)],
            constraints=[{"type": "ineq", "fun": np.diff}],
            options={"ftol": 1e-14},
        )
        found = point[order]
        assert loss(found) <= run.fun + 1e-7
        assert np.all(found >= low - 1e-12)
        assert np.all(found <= high + 1e-12)
        assert np.all(np.diff(found) >= -1e-12)


@pytest.mark.parametrize("name", MODELS)
def test_free_parameters_are_those_of_the_identifiability_check(name: str) -> None:
    groups = Groups("herd", ("a", "b"))
    for model in (stated(name), stated(name, groups)):
        assert AllBlocks.of(model).n_free == model.identifiability().n_free


def test_groups_that_share_nothing_are_fitted_apart() -> None:
    groups = Groups("herd", ("a", "b"))
    responses = answers(300, groups)
    model = LatentClassModel(ITEMS, 2, groups=groups, free_by_group=True)
    both = model.maximum_likelihood(responses, starting_points=30, seed=1)
    apart = 0.0
    for g in range(2):
        here = responses.group_codes == g
        some = Responses(ITEMS, responses.codes[here], responses.counts[here])
        fit = LatentClassModel(ITEMS, 2).maximum_likelihood(some, starting_points=30, seed=1)
        apart += fit.log_likelihood
        assert both.n_parameters == 2 * fit.n_parameters
    assert both.log_likelihood == pytest.approx(apart, abs=1e-5)
    assert both.df == 2 * 23 - both.n_parameters


def test_same_seed_same_result_whatever_the_threads() -> None:
    model, responses = stated("free"), answers()
    one = maximum_likelihood(model, responses, starting_points=10, seed=4, threads=1)
    two = maximum_likelihood(model, responses, starting_points=10, seed=4, threads=2)
    assert np.array_equal(one.log_likelihoods, two.log_likelihoods)
    other = maximum_likelihood(model, responses, starting_points=10, seed=5, threads=2)
    assert not np.array_equal(one.log_likelihoods, other.log_likelihoods)


def test_a_start_of_ones_own() -> None:
    model, responses = stated("free"), answers()
    best = model.maximum_likelihood(responses, starting_points=20, seed=1)
    again = model.maximum_likelihood(responses, start=best.parameters)
    assert again.starting_points == again.reached_best == 1
    assert again.log_likelihood == pytest.approx(best.log_likelihood, abs=1e-6)
    by_row = model.maximum_likelihood(responses, start=best.membership())
    assert by_row.log_likelihood == pytest.approx(best.log_likelihood, abs=1e-6)
    with pytest.raises(ModelError, match=r"give the probability of each class for each row"):
        model.maximum_likelihood(responses, start=np.ones((3, 2)))
    with pytest.raises(ModelError, match="sum to 1"):
        model.maximum_likelihood(responses, start=np.ones((responses.n_rows, 2)))
    with pytest.raises(ModelError, match="start has elements"):
        model.maximum_likelihood(responses, start=Parameters(np.ones(3), np.ones((1, 2))))
    with pytest.raises(ModelError, match="at least one"):
        model.maximum_likelihood(responses, starting_points=0)


def test_counts_of_patterns_are_cases() -> None:
    responses = answers(missing=0.2)
    frame = responses.to_frame()
    table = frame.groupby(list(frame.columns), dropna=False).size().reset_index(name="count")
    patterns = Responses.from_frame(table, items=ITEMS, counts="count")
    model = stated("free")
    one = model.maximum_likelihood(responses, starting_points=5, seed=1)
    two = model.maximum_likelihood(patterns, starting_points=5, seed=1)
    assert one.log_likelihood == pytest.approx(two.log_likelihood, abs=1e-9)
    assert one.bic == pytest.approx(two.bic)
    start = two.membership()
    assert start.shape == (patterns.n_rows, 2)
    again = model.maximum_likelihood(patterns, start=start)
    assert again.log_likelihood == pytest.approx(two.log_likelihood, abs=1e-6)


def test_names_by_rule_by_prior_and_by_size() -> None:
    responses = answers(missing=0.0)
    sizes = (
        stated("free")
        .maximum_likelihood(responses, starting_points=20, seed=1)
        .prevalence["estimate"]
    )
    assert sizes.is_monotonic_decreasing

    def yes(statements: list[str]) -> np.ndarray:
        model = LatentClassModel(ITEMS, ("managed", "lapsed"), statements)
        fit = model.maximum_likelihood(responses, starting_points=20, seed=1)
        table = fit.response_probability.query("item == 'fees' and category == 'yes'")
        return table.set_index("latent_class")["estimate"]

    by_rule = yes(["managed is where P(fees=yes) is highest"])
    assert by_rule["managed"] > by_rule["lapsed"]
    turned = yes(["managed is where P(fees=yes) is lowest"])
    assert turned["managed"] == pytest.approx(by_rule["lapsed"], abs=1e-6)
    by_prior = yes(["P(fees=yes | managed) ~ Beta(9, 2)"])
    assert by_prior["managed"] == pytest.approx(by_rule["managed"], abs=1e-6)
    by_other = yes(["P(fees=yes | managed) ~ Beta(2, 9)"])
    assert by_other["managed"] == pytest.approx(by_rule["lapsed"], abs=1e-6)


@pytest.mark.parametrize(
    ("statements", "named"),
    [
        (["P(meets=never | a) > 0.1", "P(meets=yearly | a) < 0.5"], r"P\(meets=yearly \| a\)"),
        (
            [
                "P(fees=yes | a) > P(fees=yes | b)",
                "P(fees=yes | a) > P(fees=yes | c)",
            ],
            r"P\(fees=(yes|no) \| [bc]\).*branch",
        ),
    ],
)
def test_what_has_no_exact_step_is_refused_by_name(statements: list[str], named: str) -> None:
    apart = ["P(fenced=yes | a) ~ Beta(9, 2)", "P(fenced=yes | b) ~ Beta(2, 9)"]
    model = LatentClassModel(ITEMS, ("a", "b", "c"), [*statements, *apart])
    with pytest.raises(ModelError, match=named):
        model.maximum_likelihood(answers(), starting_points=2, seed=1)


def test_orders_of_no_are_orders_of_yes() -> None:
    responses = answers()
    classes = ("a", "b")
    plain = ["P(fees=yes | a) > P(fees=yes | b)", "P(fees=yes | b) > 0.2"]
    turned = ["P(fees=no | a) < P(fees=no | b)", "P(fees=no | b) < 0.8"]
    mixed = ["P(fees=no | a) < P(fees=no | b)", "P(fees=yes | b) > 0.2"]
    found = [
        LatentClassModel(ITEMS, classes, s)
        .maximum_likelihood(responses, starting_points=20, seed=1)
        .log_likelihood
        for s in (plain, turned, mixed)
    ]
    assert_allclose(found, found[0], atol=1e-6)


def test_a_chain_stated_by_yes_and_by_no_is_one_chain() -> None:
    responses = answers()
    found = [
        LatentClassModel(ITEMS, ("a", "b", "c"), statements)
        .maximum_likelihood(responses, starting_points=20, seed=1)
        .response_probability.query("item == 'fees' and category == 'yes'")["estimate"]
        .to_numpy()
        for statements in (
            ["P(fees=yes | a) > P(fees=yes | b)", "P(fees=yes | b) > P(fees=yes | c)"],
            ["P(fees=yes | a) > P(fees=yes | b)", "P(fees=no | b) < P(fees=no | c)"],
        )
    ]
    for yes in found:
        assert np.all(np.diff(yes) <= 1e-9)
    assert_allclose(found[0], found[1], atol=1e-3)


def test_active_constraints_are_named_and_have_no_error() -> None:
    responses = answers(missing=0.0)
    free = stated("free").maximum_likelihood(responses, starting_points=20, seed=1)
    low = free.response_probability.query("item == 'fenced' and category == 'yes'")["estimate"]
    text = f"P(fenced=yes | .) > {min(0.95, low.max() + 0.02):.2f}"
    fit = LatentClassModel(ITEMS, 2, [text]).maximum_likelihood(
        responses, starting_points=20, seed=1
    )
    assert fit.log_likelihood < free.log_likelihood
    assert fit.active
    assert all(name.startswith("P(fenced=") for name in fit.active)
    held = fit.response_probability.query("item == 'fenced'")
    assert held["standard_error"].isna().all()
    assert held["at_boundary"].all()
    assert np.isnan(fit.g2_p_value)
    assert "bounds and orders" in fit.chi_square


def test_shown_in_a_terminal() -> None:
    model = LatentClassModel(
        ITEMS,
        ("managed " * 3 + "always", "lapsed"),
        ["lapsed is where P(fees=yes) is lowest"],
        groups=Groups("herd", ("a", "b")),
    )
    fit = model.maximum_likelihood(
        answers(groups=Groups("herd", ("a", "b"))), starting_points=10, seed=1
    )
    text = repr(fit)
    assert max(map(len, text.splitlines())) <= 80
    for shown in ("log likelihood", "G2", "X2", "AICc", "BIC (Sclove)", "CAIC", "of 10 starting"):
        assert shown in text
    assert f"{fit.aic:.4f}" in text


def test_a_known_probability_has_no_error_and_is_no_boundary() -> None:
    fit = LatentClassModel(ITEMS, 2, ["P(fees=yes | .) = 0.4"])
    table = fit.maximum_likelihood(answers(), starting_points=5, seed=1).response_probability
    known = table.query("item == 'fees'")
    assert not known["at_boundary"].any()
    assert_allclose(known["standard_error"], 0.0)
    assert isinstance(table, pd.DataFrame)
