"""Simulated responses against the probabilities they are drawn from."""

from itertools import product

import numpy as np
import pytest
from scipy import stats

from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.simulate import (
    Parameters,
    draw_answers,
    draw_parameters,
    parameters_from,
    simulate,
)
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("meets", ("never", "sometimes", "often"), ordered=True),
)


@pytest.fixture
def model():
    return LatentClassModel(ITEMS, 2, groups=Groups("district", ("north", "south")))


@pytest.fixture
def parameters(model):
    return parameters_from(
        model,
        np.array([[0.3, 0.7], [0.8, 0.2]]),
        {
            "fees": {"1": 0.9, "2": 0.2},
            "meets": {"1": [0.1, 0.2, 0.7], "2": [0.6, 0.4, 0.0]},
        },
    )


def test_answers_and_classes_have_the_given_probabilities(model, parameters):
    """Chi-squared test of the whole table of class by answers in each group, p > 0.001."""
    drawn = simulate(model, [40_000, 40_000], seed=1, parameters=parameters)
    responses = drawn.responses
    fees = {0: (0.1, 0.9), 1: (0.8, 0.2)}
    meets = {0: (0.1, 0.2, 0.7), 1: (0.6, 0.4, 0.0)}
    for g, k in product(range(2), range(2)):
        chosen = (responses.group_codes == g) & (drawn.latent_class == k)
        n_class = int(chosen.sum())
        expected_class = 40_000 * parameters.prevalence[g, k]
        error = np.sqrt(40_000 * parameters.prevalence[g, k] * (1 - parameters.prevalence[g, k]))
        assert abs(n_class - expected_class) < 4 * error
        cells = [(a, b) for a in range(2) for b in range(3) if meets[k][b] > 0]
        observed = [int(np.sum(chosen & (responses.codes == c).all(axis=1))) for c in cells]
        expected = [n_class * fees[k][a] * meets[k][b] for a, b in cells]
        assert sum(observed) == n_class  # nobody gave the answer of probability 0
        assert stats.chisquare(observed, expected).pvalue > 0.001


def test_the_same_seed_gives_the_same_responses(model):
    one, two, other = (simulate(model, 50, seed=s) for s in (3, 3, 4))
    assert np.array_equal(one.responses.codes, two.responses.codes)
    assert np.array_equal(one.parameters.elements, two.parameters.elements)
    assert not np.array_equal(one.responses.codes, other.responses.codes)


def test_a_single_number_of_cases_is_divided_evenly(model):
    drawn = simulate(model, 7, seed=1)
    assert np.bincount(drawn.responses.group_codes).tolist() == [4, 3]
    assert drawn.responses.items == ITEMS
    assert drawn.responses.groups == model.groups
    assert drawn.latent_class.shape == (7,)


def test_group_sizes_must_be_one_per_group(model):
    with pytest.raises(ModelError, match=r"3 group sizes, but the model has 2 group"):
        simulate(model, [1, 2, 3])


def test_answers_that_are_not_given_are_missing(model):
    answered = np.array([[True, False], [False, True], [True, True]])
    drawn = simulate(model, 3, seed=2, answered=answered)
    assert np.array_equal(drawn.responses.codes >= 0, answered)
    whole = simulate(model, 3, seed=2)
    assert np.array_equal(drawn.responses.codes[answered], whole.responses.codes[answered])


def test_the_mask_must_fit(model):
    with pytest.raises(ModelError, match="one row per case and one column per item"):
        simulate(model, 3, answered=np.ones((2, 2), dtype=bool))


def test_a_dependent_pair_is_drawn_from_its_joint_probabilities():
    builder = TableBuilder([2, 2], 1)
    pair = builder.answered_together(0, 1)
    builder.set_joint(0, pair, 0, builder.block(np.ones(4)))
    table = builder.build()
    joint = np.array([0.45, 0.05, 0.1, 0.4])
    n = 4000
    zero = np.zeros(n, dtype=int)
    codes = draw_answers(table, joint, zero, zero, np.random.default_rng(5))
    observed = np.bincount(2 * codes[:, 0] + codes[:, 1], minlength=4)
    assert stats.chisquare(observed, n * joint).pvalue > 0.001


def test_prior_draws_keep_the_bounds():
    builder = TableBuilder([2], 2)
    blocks = [builder.block((1.0, 1.0)) for _ in range(2)]
    for k in range(2):
        builder.set_item(0, 0, k, blocks[k])
    builder.order(blocks[0][1], blocks[1][1])
    builder.bound(blocks[1][1], lower=0.3)
    table = builder.build()
    source = LatentClassModel(ITEMS, 2).prevalence_source
    rng = np.random.default_rng(1)
    for _ in range(50):
        elements = draw_parameters(table, source, rng).elements
        assert elements[1] > elements[3] >= 0.3


def test_bounds_that_the_prior_never_keeps_are_an_error():
    builder = TableBuilder([2], 1)
    block = builder.block((1.0, 1000.0))
    builder.set_item(0, 0, 0, block)
    builder.bound(block[0], lower=0.9)
    source = LatentClassModel(ITEMS, 1).prevalence_source
    with pytest.raises(ModelError, match="practically no probability"):
        draw_parameters(builder.build(), source, np.random.default_rng(0))


def test_parameters_stand_in_the_right_places(model, parameters):
    table = model.table
    fees_yes = table.direct_element[table.response_row[0, 1]]
    assert parameters.elements[fees_yes].tolist() == [0.9, 0.2]
    often = table.direct_element[table.response_row[0, 4]]
    assert parameters.elements[often].tolist() == [0.7, 0.0]


@pytest.mark.parametrize(
    ("prevalence", "probability", "message"),
    [
        ([0.5, 0.6], {}, "the prevalences must be probabilities that sum to 1"),
        ({"1": 1.0}, {}, "prevalence has no entry for '2'"),
        ([0.5, 0.5], {}, "response_probability has no entry for 'fees'"),
        ([0.5, 0.5], {"fees": {"1": 0.5}}, r"response_probability\['fees'\] has no entry for '2'"),
        ([0.5, 0.5], {"fees": {"1": 1.5, "2": 0.5}}, "the answers to 'fees' in class '1'"),
        (
            [0.5, 0.5],
            {"fees": {"1": 0.5, "2": 0.5}, "meets": {"1": 0.5, "2": 0.5}},
            "'meets' has 3 categories; 1 got 1",
        ),
    ],
)
def test_parameters_that_do_not_fit_are_refused(model, prevalence, probability, message):
    with pytest.raises(ModelError, match=message):
        parameters_from(model, prevalence, probability)


def test_parameters_may_be_given_as_elements(model):
    elements = np.concatenate([[0.0, 1.0]] * 2 + [[0.0, 0.0, 1.0]] * 2)
    drawn = simulate(model, 5, parameters=Parameters(elements, np.full((2, 2), 0.5)))
    assert drawn.responses.codes.tolist() == [[1, 2]] * 5
