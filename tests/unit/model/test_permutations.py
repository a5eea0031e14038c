"""Permutations of classes within groups, and how groups of them are kept."""

from math import factorial

import numpy as np
import pytest

from bayeslca.model.permutations import (
    Factor,
    compose,
    identity,
    inverse,
    permutation_group,
    product_members,
    transposition,
)


def test_composing_with_the_inverse_changes_nothing():
    rng = np.random.default_rng(2)
    p = np.stack([rng.permutation(5) for _ in range(3)])
    assert np.array_equal(compose(p, inverse(p)), identity(3, 5))
    assert np.array_equal(compose(inverse(p), p), identity(3, 5))


def test_composition_relabels_one_after_the_other():
    rng = np.random.default_rng(3)
    value = rng.normal(size=(2, 4))
    p, q = (np.stack([rng.permutation(4) for _ in range(2)]) for _ in range(2))
    step_by_step = np.take_along_axis(np.take_along_axis(value, p, 1), q, 1)
    assert np.array_equal(np.take_along_axis(value, compose(p, q), 1), step_by_step)


def test_a_transposition_swaps_in_some_groups_only():
    assert transposition(3, 3, (0, 2), 0, 2).tolist() == [[2, 1, 0], [0, 1, 2], [2, 1, 0]]


def test_members_of_a_product_act_alike_within_a_factor():
    factors = (Factor((0, 1), (0, 2)), Factor((2,), (0, 1, 2)))
    members = [m.tobytes() for m in product_members(3, 3, factors)]
    assert len(members) == len(set(members)) == 2 * 6
    for member in product_members(3, 3, factors):
        assert np.array_equal(member[0], member[1])
        assert member[0, 1] == 1


def test_a_product_keeps_its_factors_and_proposes_transpositions():
    group = permutation_group(1, 4, [Factor((0,), (0, 1, 3)), Factor((0,), (2,))])
    assert group.n_members == 6
    assert group.factors == (Factor((0,), (0, 1, 3)),)
    assert len(group.proposals) == 3
    assert group.orbits == (((0, 0), (0, 1), (0, 3)),)
    assert group.mixed_classes() == ((0, 1, 3),)


@pytest.mark.parametrize(("n_classes", "listed"), [(6, True), (7, False)])
def test_members_are_listed_up_to_seven_hundred_and_twenty(n_classes, listed):
    group = permutation_group(1, n_classes, [Factor((0,), tuple(range(n_classes)))])
    assert group.n_members == factorial(n_classes)
    assert (group.permutations is not None) == listed
    assert len(group.proposals) == n_classes * (n_classes - 1) // 2


def test_what_moves_factors_is_proposed_as_it_is():
    blocks = [Factor((0,), (0, 1)), Factor((0,), (2, 3))]
    across = np.array([[2, 3, 0, 1]])
    group = permutation_group(1, 4, blocks, [[identity(1, 4), across]])
    assert group.factors is None
    assert group.n_members == 8
    assert len(group.proposals) == 7
    assert group.orbits == (((0, 0), (0, 1), (0, 2), (0, 3)),)


def test_a_large_group_that_is_no_product_is_cut_to_its_factors():
    blocks = [Factor((0,), tuple(range(5))), Factor((0,), tuple(range(5, 10)))]
    across = np.array([[5, 6, 7, 8, 9, 0, 1, 2, 3, 4]])
    group = permutation_group(1, 10, blocks, [[identity(1, 10), across]])
    assert group.permutations is None
    assert group.factors == tuple(blocks)
    assert group.n_members == 120 * 120
