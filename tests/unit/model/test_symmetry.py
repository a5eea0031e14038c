"""The groups L and P of labels, on models whose symmetry can be seen by eye.

Every case's group is also found by brute force over all permutations of (group, class)
positions: a permutation is a symmetry when relabelling the parameters gives the same
probabilities, which is checked on the probabilities themselves, not on the table.
"""

from itertools import permutations, product

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units, verified_log_weight
from bayeslca.model.permutations import compose, inverse
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import draw_elements, log_unit_likelihood, response_probability
from bayeslca.model.symmetry import element_map, symmetry
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units


def uniform(n_groups, n_classes):
    return DirichletPrevalence(np.ones((n_groups, n_classes)))


def plain(n_classes, n_items=3, prior=lambda j, k: (1.0, 1.0), n_groups=1):
    builder = TableBuilder([2] * n_items, n_classes, (0,) * n_groups)
    for j, k in product(range(n_items), range(n_classes)):
        builder.set_item(0, j, k, builder.block(prior(j, k)))
    return builder.build()


def free_by_group(n_classes, n_groups, shared_items=0):
    builder = TableBuilder([2, 3], n_classes, tuple(range(n_groups)))
    for j, k in product(range(2), range(n_classes)):
        block = None
        for g in range(n_groups):
            if block is None or j >= shared_items:
                block = builder.block(np.ones(builder.n_categories[j]))
            builder.set_item(g, j, k, block)
    return builder.build()


def crossed_blocks(prior=((1.0, 1.0), (1.0, 1.0))):
    """Item 0: A and C share a block, B and D share one. Item 1 is free in every class."""
    builder = TableBuilder([2, 2], 4)
    x, y = builder.block(prior[0]), builder.block(prior[1])
    for k, block in enumerate([x, y, x, y]):
        builder.set_item(0, 0, k, block)
        builder.set_item(0, 1, k, builder.block((1.0, 1.0)))
    return builder.build()


def paired_by_two_items():
    """A~C, B~D in item 0 and A~D, B~C in item 1: only products of two swaps are left."""
    builder = TableBuilder([2, 2], 4)
    for j, partner in enumerate([(0, 1, 0, 1), (0, 1, 1, 0)]):
        blocks = [builder.block((1.0, 1.0)) for _ in range(2)]
        for k in range(4):
            builder.set_item(0, j, k, blocks[partner[k]])
    return builder.build()


def turned_round():
    """Both classes share one block, the answers the other way round in the second."""
    builder = TableBuilder([2, 2], 2)
    block = builder.block((2.0, 2.0))
    builder.set_item(0, 0, 0, block)
    builder.set_item(0, 0, 1, block[::-1])
    for k in range(2):
        builder.set_item(0, 1, k, builder.block((1.0, 1.0)))
    return builder.build()


def with_pair(dependent):
    builder = TableBuilder([2, 3], len(dependent))
    pair = builder.answered_together(0, 1)
    for k, joint in enumerate(dependent):
        if joint:
            builder.set_joint(0, pair, k, builder.block(np.ones(6)))
        else:
            builder.set_item(0, 0, k, builder.block((1.0, 1.0)))
            builder.set_item(0, 1, k, builder.block((1.0, 1.0, 1.0)))
    return builder.build()


def with_known(known):
    builder = TableBuilder([3, 2], len(known))
    for k, value in enumerate(known):
        if value is None:
            builder.set_item(0, 0, k, builder.block((1.0, 1.0, 1.0)))
        else:
            builder.set_known(0, 0, k, {0: value}, builder.block((1.0, 1.0)))
        builder.set_item(0, 1, k, builder.block((1.0, 1.0)))
    return builder.build()


def chain(n_classes, links):
    builder = TableBuilder([2, 2], n_classes)
    first = []
    for k in range(n_classes):
        first.append(builder.block((1.0, 1.0))[1])
        builder.set_item(0, 0, k, (first[k] - 1, first[k]))
        builder.set_item(0, 1, k, builder.block((1.0, 1.0)))
    for above, below in links:
        builder.order(first[above], first[below])
    return builder.build()


def half_and_half():
    """Class 0 mixes the blocks answer by answer, class 1 block by block: no exchange."""
    builder = TableBuilder([2], 2)
    a, b = builder.block((1.0, 1.0)), builder.block((1.0, 1.0))
    for category, pair in enumerate([(a[0], b[0]), (a[1], b[1])]):
        builder.set_row(0, 0, category, 0, [(0.5, (e,)) for e in pair])
    for category, pair in enumerate([(a[0], a[1]), (b[0], b[1])]):
        builder.set_row(0, 0, category, 1, [(0.5, (e,)) for e in pair])
    return builder.build()


CASES = {
    # name: (table, source, members of L, members of P)
    "everything": (plain(4), uniform(1, 4), 24, 24),
    "everything, prevalence told apart": (
        plain(3),
        DirichletPrevalence(np.array([[1.0, 2.0, 3.0]])),
        6,
        1,
    ),
    "two of three by prior": (
        plain(3, prior=lambda j, k: (3.0, 1.0) if (j, k) == (0, 0) else (1.0, 1.0)),
        uniform(1, 3),
        6,
        2,
    ),
    "all told apart by priors": (
        plain(4, prior=lambda j, k: (1.0 + k, 1.0)),
        uniform(1, 4),
        24,
        1,
    ),
    "groups share everything": (plain(3, n_groups=2), uniform(2, 3), 6, 6),
    "groups share everything, one group's prior differs": (
        plain(3, n_groups=2),
        DirichletPrevalence(np.array([[1.0, 1.0, 1.0], [2.0, 1.0, 1.0]])),
        6,
        2,
    ),
    "all items free by group": (free_by_group(3, 2), uniform(2, 3), 36, 36),
    "free by group, prior differs in one": (
        free_by_group(3, 2),
        DirichletPrevalence(np.array([[1.0, 1.0, 1.0], [2.0, 1.0, 1.0]])),
        36,
        12,
    ),
    "one item shared by the groups": (free_by_group(3, 2, shared_items=1), uniform(2, 3), 6, 6),
    "crossed blocks": (crossed_blocks(), uniform(1, 4), 8, 8),
    "crossed blocks, one prior differs": (
        crossed_blocks(((2.0, 1.0), (1.0, 1.0))),
        uniform(1, 4),
        8,
        4,
    ),
    "swaps only in twos": (paired_by_two_items(), uniform(1, 4), 4, 4),
    "turned round": (turned_round(), uniform(1, 2), 2, 2),
    "a pair in one of three classes": (with_pair((True, False, False)), uniform(1, 3), 2, 2),
    "pairs in two of four classes": (with_pair((True, True, False, False)), uniform(1, 4), 4, 4),
    "a known value": (with_known((0.0, None, None)), uniform(1, 3), 2, 2),
    "two equal known values": (with_known((0.2, 0.2, None)), uniform(1, 3), 2, 2),
    "two known values": (with_known((0.2, 0.3, None)), uniform(1, 3), 1, 1),
    "identity": (with_known((0.0, 0.1, None)), uniform(1, 3), 1, 1),
    "elements could move, blocks could not": (half_and_half(), uniform(1, 2), 1, 1),
    "a chain": (chain(3, [(0, 1), (1, 2)]), uniform(1, 3), 6, 1),
    "a chain with a link that follows": (
        chain(4, [(0, 1), (1, 2), (0, 2)]),
        uniform(1, 4),
        24,
        1,
    ),
    "two above two": (
        chain(4, [(0, 2), (0, 3), (1, 2), (1, 3)]),
        uniform(1, 4),
        24,
        4,
    ),
    "two chains of two": (chain(4, [(0, 1), (2, 3)]), uniform(1, 4), 24, 2),
}


def brute_force(table):
    """Return all permutations for which relabelled classes have the probabilities of the table."""
    n_groups, n_classes = table.n_prevalence_rows, table.n_classes
    everyone = list(permutations(range(n_classes)))
    for choice in product(everyone, repeat=n_groups):
        yield np.array(choice)


@pytest.mark.parametrize("name", CASES)
def test_the_groups_have_the_members_that_the_model_leaves_open(name):
    table, source, n_table, n_prior = CASES[name]
    found = symmetry(table, source)
    assert found.table_group.n_members == n_table
    assert found.prior_group.n_members == n_prior
    assert found.named_group.n_members == n_prior


@pytest.mark.parametrize("name", CASES)
def test_members_are_distinct_form_a_group_and_start_with_the_identity(name):
    table, source, _, _ = CASES[name]
    for group in vars(symmetry(table, source)).values():
        members = {p.tobytes() for p in group.permutations}
        assert len(members) == group.n_members
        assert np.array_equal(group.permutations[0], np.sort(group.permutations[0], axis=-1))
        for p in group.permutations:
            assert inverse(p).tobytes() in members
            for q in group.permutations:
                assert compose(p, q).tobytes() in members


@pytest.mark.parametrize("name", CASES)
def test_every_member_gives_the_relabelled_probabilities_and_no_other_permutation_does(name):
    table, source, _, _ = CASES[name]
    elements = draw_elements(table, np.random.default_rng(3))
    before = response_probability(table, elements)[table.response_group]
    members = {p.tobytes() for p in symmetry(table, source).table_group.permutations}
    for permutation in brute_force(table):
        relabelled = np.take_along_axis(before, permutation[:, :, None], axis=1)
        if permutation.astype(np.int64).tobytes() in members:
            moved = elements[element_map(table, permutation)]
            after = response_probability(table, moved)[table.response_group]
            np.testing.assert_allclose(after, relabelled)
        else:
            with pytest.raises(ModelError, match="changes the model's table"):
                element_map(table, permutation)


def test_what_is_no_permutation_is_refused():
    with pytest.raises(ModelError, match="changes the model's table"):
        element_map(plain(3), np.array([[0, 0, 1]]))


def test_ten_exchangeable_classes_are_a_product_that_is_not_enumerated():
    group = symmetry(plain(10), uniform(1, 10)).prior_group
    assert group.permutations is None
    assert group.n_members == 3_628_800
    assert [f.classes for f in group.factors] == [tuple(range(10))]
    assert group.proposals.shape == (45, 1, 10)
    assert group.orbits == (tuple((0, k) for k in range(10)),)


def test_ten_classes_told_apart_are_found_at_once():
    group = symmetry(plain(10, prior=lambda j, k: (1.0 + k, 1.0)), uniform(1, 10)).prior_group
    assert group.is_identity
    assert group.proposals.shape == (0, 1, 10)
    assert group.orbits == ()


def test_groups_with_items_of_their_own_permute_on_their_own():
    group = symmetry(free_by_group(4, 3), uniform(3, 4)).prior_group
    assert group.n_members == 24**3
    assert group.permutations is None
    assert [(f.groups, f.classes) for f in group.factors] == [
        ((g,), (0, 1, 2, 3)) for g in range(3)
    ]


def test_groups_that_share_one_item_permute_alike():
    group = symmetry(free_by_group(3, 2, shared_items=1), uniform(2, 3)).prior_group
    assert [(f.groups, f.classes) for f in group.factors] == [((0, 1), (0, 1, 2))]
    assert np.array_equal(group.permutations[:, 0], group.permutations[:, 1])


def test_crossed_blocks_move_both_pairs_together():
    group = symmetry(crossed_blocks(), uniform(1, 4)).prior_group
    members = {tuple(p[0]) for p in group.permutations}
    assert (2, 1, 0, 3) in members  # A and C swap on their own
    assert (1, 0, 3, 2) in members  # A and B swap only with C and D
    assert (1, 0, 2, 3) not in members
    assert group.factors is None


def test_a_naming_rule_fixes_its_class():
    found = symmetry(plain(4), uniform(1, 4), named={0, 2})
    assert found.prior_group.n_members == 24
    assert {tuple(p[0]) for p in found.named_group.permutations} == {(0, 1, 2, 3), (0, 3, 2, 1)}
    assert found.named_group.mixed_classes() == ((1, 3),)


def test_a_case_of_verified_class_tells_that_class_apart():
    table = plain(3)
    units = Units(
        pattern=np.array([[0, 1, 1], [1, 1, -1]], dtype=np.int16),
        group=np.zeros(2, dtype=np.int32),
        count=np.array([4, 1]),
        unit_of_row=np.arange(2),
    )
    weight = verified_log_weight(np.array([-1, 1]), 3)
    unit_table = compile_units(table, units, weight)
    found = symmetry(table, uniform(1, 3), unit_table)
    assert {tuple(p[0]) for p in found.table_group.permutations} == {(0, 1, 2), (2, 1, 0)}
    # and the likelihood agrees: only those two leave it unchanged
    rng = np.random.default_rng(5)
    elements, prevalence = draw_elements(table, rng), rng.dirichlet(np.ones(3))[None]
    value = log_unit_likelihood(table, unit_table, elements, prevalence)
    for p in brute_force(table):
        moved = log_unit_likelihood(
            table, unit_table, elements[element_map(table, p)], prevalence[:, p[0]]
        )
        assert np.allclose(moved, value) == (tuple(p[0]) in {(0, 1, 2), (2, 1, 0)})


def test_a_bound_in_one_class_breaks_the_priors_symmetry_only():
    builder = TableBuilder([2, 2], 2)
    for j, k in product(range(2), range(2)):
        block = builder.block((1.0, 1.0))
        builder.set_item(0, j, k, block)
        if (j, k) == (0, 0):
            builder.bound(block[1], lower=0.5)
    found = symmetry(builder.build(), uniform(1, 2))
    assert (found.table_group.n_members, found.prior_group.n_members) == (2, 1)


def test_orders_that_follow_from_others_break_nothing():
    """Two chains of three, one of them with a link stated that follows from the others."""
    table = chain(6, [(0, 1), (1, 2), (0, 2), (3, 4), (4, 5)])
    group = symmetry(table, uniform(1, 6)).prior_group
    assert {tuple(p[0]) for p in group.permutations} == {
        (0, 1, 2, 3, 4, 5),
        (3, 4, 5, 0, 1, 2),
    }


class OnlyRotations(DirichletPrevalence):
    """A source whose classes look alike but may only be turned round in a ring."""

    def is_invariant(self, permutation):
        return tuple(permutation[0]) in {(0, 1, 2), (1, 2, 0), (2, 0, 1)}


def test_the_source_has_the_last_word_on_its_own_symmetry():
    rotations = symmetry(plain(3), OnlyRotations(np.ones((1, 3)))).prior_group
    assert rotations.n_members == 3
    assert rotations.factors is None
