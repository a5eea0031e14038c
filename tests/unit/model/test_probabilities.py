"""Probabilities of answers, units and classes, against plain loops and exact zeros."""

from itertools import product

import numpy as np
import pytest
from scipy import stats

from bayeslca.model import probabilities
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.prior_density import inside_bounds, log_block_priors, log_prior
from bayeslca.model.probabilities import (
    class_shares,
    draw_elements,
    log_unit_likelihood,
    membership,
    response_probability,
)
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Item
from bayeslca.responses.units import Units


def every_pattern(sizes):
    pattern = np.array(list(product(*(range(-1, size) for size in sizes))), dtype=np.int16)
    n = len(pattern)
    return Units(pattern, np.arange(n) % 2, np.ones(n, dtype=np.int64), np.arange(n))


def a_model(sizes, n_classes):
    items = [Item(f"item {j}", tuple("abcd"[:size])) for j, size in enumerate(sizes)]
    return LatentClassModel(items, n_classes)


@pytest.fixture
def drawn():
    builder = TableBuilder([2, 3, 2], 3, (0, 0))
    for j, k in product(range(3), range(3)):
        builder.set_item(0, j, k, builder.block(np.ones(builder.n_categories[j])))
    table = builder.build()
    rng = np.random.default_rng(11)
    elements = np.stack([draw_elements(table, rng) for _ in range(6)]).reshape(2, 3, -1)
    prevalence = rng.dirichlet(np.ones(3), size=(2, 3, 2))
    return table, elements, prevalence


def by_loop(table, units, elements, prevalence):
    """Return p(class, answers) of each unit (U, K), one product at a time."""
    answers = response_probability(table, elements)[0]
    out = prevalence[units.group].copy()
    for u, pattern in enumerate(units.pattern):
        for j, code in enumerate(pattern):
            if code >= 0:
                out[u] *= answers[:, table.item_start[j] + code]
    return out


@pytest.mark.parametrize("piece", [1, 300, 4_000_000])
def test_likelihood_and_membership_equal_a_plain_loop_in_pieces_of_any_size(
    drawn, piece, monkeypatch
):
    table, elements, prevalence = drawn
    units = every_pattern((2, 3, 2))
    monkeypatch.setattr(probabilities, "PIECE", piece)
    unit_table = compile_units(table, units)
    likelihood = log_unit_likelihood(table, unit_table, elements, prevalence)
    shares = membership(table, unit_table, elements, prevalence)
    assert likelihood.shape == (2, 3, units.n_units)
    assert shares.shape == (2, 3, units.n_units, 3)
    for draw in np.ndindex(2, 3):
        joint = by_loop(table, units, elements[draw], prevalence[draw])
        np.testing.assert_allclose(np.exp(likelihood[draw]), joint.sum(axis=1))
        np.testing.assert_allclose(shares[draw], joint / joint.sum(axis=1, keepdims=True))


def test_patterns_of_all_answers_sum_to_one(drawn):
    table, elements, prevalence = drawn
    pattern = np.array(list(product(range(2), range(3), range(2))), dtype=np.int16)
    n = len(pattern)
    for g in range(2):
        units = Units(pattern, np.full(n, g), np.ones(n, dtype=np.int64), np.arange(n))
        found = log_unit_likelihood(table, compile_units(table, units), elements, prevalence)
        np.testing.assert_allclose(np.exp(found).sum(axis=-1), 1.0)


def test_a_case_without_answers_keeps_the_prevalence(drawn):
    table, elements, prevalence = drawn
    units = Units(np.full((1, 3), -1), np.array([1]), np.array([1]), np.array([0]))
    unit_table = compile_units(table, units)
    assert np.allclose(log_unit_likelihood(table, unit_table, elements, prevalence), 0.0)
    shares = membership(table, unit_table, elements, prevalence)
    np.testing.assert_allclose(shares[..., 0, :], prevalence[..., 1, :])


def zeros_in_opposite_classes():
    """Class 0 never says yes to the first item, class 1 never says yes to the second."""
    builder = TableBuilder([2, 2], 2)
    for k in range(2):
        builder.set_known(0, k, k, {1: 0.0})
        builder.set_item(0, 1 - k, k, builder.block((1.0, 1.0)))
    return builder.build()


def test_a_pattern_that_no_class_can_give_has_likelihood_zero_and_no_membership():
    table = zeros_in_opposite_classes()
    pattern = np.array([(1, 1), (1, 0), (0, 0), (1, -1)], dtype=np.int16)
    units = Units(pattern, np.zeros(4, dtype=int), np.ones(4, dtype=int), np.arange(4))
    unit_table = compile_units(table, units)
    elements, prevalence = np.array([0.3, 0.7, 0.4, 0.6]), np.array([[0.5, 0.5]])
    found = log_unit_likelihood(table, unit_table, elements, prevalence)
    assert found[0] == -np.inf
    np.testing.assert_allclose(np.exp(found[1:]), [0.5 * 0.6, 0.5 * 0.3 + 0.5 * 0.4, 0.3])
    shares = membership(table, unit_table, elements, prevalence)
    assert np.isnan(shares[0]).all()
    assert shares[1].tolist() == [0.0, 1.0]
    assert np.isfinite(shares[1:]).all()


def test_hundreds_of_sharp_items_do_not_underflow():
    table = a_model((2,) * 400, 2).table
    elements = np.tile([1e-4, 1 - 1e-4], 800)
    units = Units(np.zeros((1, 400), dtype=np.int16), np.array([0]), np.array([1]), np.array([0]))
    unit_table = compile_units(table, units)
    found = log_unit_likelihood(table, unit_table, elements, np.array([[0.5, 0.5]]))
    np.testing.assert_allclose(found, [400 * np.log(1e-4)])


def test_class_shares_are_safe_where_one_class_is_impossible():
    shares = class_shares(np.array([[-np.inf, -np.inf], [-900.0, -np.inf]]))
    assert shares[:, 0].tolist() == [0.0, 1.0]
    assert np.isnan(shares[:, 1]).all()


def test_block_densities_are_scipys_dirichlet():
    """Reference: scipy.stats.dirichlet."""
    builder = TableBuilder([3, 2], 1)
    first, second = builder.block((0.5, 2.0, 3.0)), builder.block((9.0, 2.0))
    builder.set_item(0, 0, 0, first)
    builder.set_item(0, 1, 0, second)
    table = builder.build()
    elements = np.stack([draw_elements(table, np.random.default_rng(s)) for s in range(4)])
    source = DirichletPrevalence(np.array([[1.0]]))
    expected = np.array(
        [
            [
                stats.dirichlet.logpdf(e[:3] / e[:3].sum(), (0.5, 2.0, 3.0)),
                stats.beta.logpdf(e[3], 9.0, 2.0),
            ]
            for e in elements
        ]
    )
    np.testing.assert_allclose(log_block_priors(table, elements), expected)
    found = log_prior(table, source, elements, np.ones((4, 1, 1)))
    np.testing.assert_allclose(found, expected.sum(axis=1))


def test_the_prior_is_nought_outside_bounds_and_orders():
    builder = TableBuilder([2], 3)
    blocks = [builder.block((1.0, 1.0)) for _ in range(3)]
    for k in range(3):
        builder.set_item(0, 0, k, blocks[k])
    builder.bound(blocks[0][1], lower=0.5)
    builder.order(blocks[0][1], blocks[1][1])
    builder.order(blocks[1][1], blocks[2][1])
    table = builder.build()
    elements = np.array(
        [
            [0.4, 0.6, 0.5, 0.5, 0.6, 0.4],  # keeps all
            [0.6, 0.4, 0.7, 0.3, 0.8, 0.2],  # below the bound
            [0.4, 0.6, 0.5, 0.5, 0.3, 0.7],  # the last the wrong way round
        ]
    )
    assert inside_bounds(table, elements).tolist() == [True, False, False]
    source = DirichletPrevalence(np.ones((1, 3)))
    found = log_prior(table, source, elements, np.full((3, 1, 3), 1 / 3))
    # The bounds have the probability (1 - 0.5 ** 3) / 6.
    np.testing.assert_allclose(found[0], np.log(2.0 * 48 / 7), atol=1e-6)
    assert found[1:].tolist() == [-np.inf, -np.inf]


def test_elements_are_drawn_from_their_dirichlet_prior():
    """Reference: moments of the Dirichlet distribution; 4 standard errors of 4000 draws."""
    builder = TableBuilder([3], 1)
    builder.set_item(0, 0, 0, builder.block((1.0, 2.0, 5.0)))
    table = builder.build()
    rng = np.random.default_rng(20)
    draws = np.stack([draw_elements(table, rng) for _ in range(4000)])
    target = stats.dirichlet((1.0, 2.0, 5.0))
    error = np.sqrt(target.var() / len(draws))
    assert np.all(np.abs(draws.mean(axis=0) - target.mean()) < 4 * error)
    assert np.allclose(
        draws.var(axis=0), target.var(), rtol=0.1
    )  # 4 x sqrt(2 / 4000), heavier tails
