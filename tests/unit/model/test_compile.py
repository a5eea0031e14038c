"""The compiled table against small cases written out by hand, one per kind of cell."""

from itertools import product

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.compile import (
    compile_table,
    compile_units,
    split_units,
    verified_log_weight,
)
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import (
    draw_elements,
    log_unit_likelihood,
    membership,
    response_probability,
    row_probability,
)
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.units import Units

FEES = Item("fees", ("no", "yes"))
TRUST = Item("trust", ("low", "middle", "high"), ordered=True)


def units_of(patterns, group=None, count=None):
    pattern = np.asarray(patterns, dtype=np.int16)
    n = len(pattern)
    return Units(
        pattern=pattern,
        group=np.zeros(n, dtype=np.int32) if group is None else np.asarray(group, dtype=np.int32),
        count=np.ones(n, dtype=np.int64) if count is None else np.asarray(count),
        unit_of_row=np.arange(n),
    )


def one_class(builder, item=0):
    """Answers' probabilities in class 0 of group 0 as a function of the elements."""
    table = builder.build()
    columns = slice(table.item_start[item], table.item_start[item + 1])
    return table, lambda elements: response_probability(table, np.asarray(elements))[
        ..., 0, 0, columns
    ]


def test_a_plain_model_has_a_block_for_each_item_and_class():
    table = compile_table(LatentClassModel((FEES, TRUST), 3))
    assert (table.n_blocks, table.n_elements, table.n_rows) == (6, 15, 5)
    assert table.is_direct
    assert not table.is_bounded
    assert sorted(table.direct_element.ravel()) == list(range(15))
    assert np.array_equal(table.element_prior, np.ones(15))
    assert np.array_equal(table.item_start, [0, 2, 5])
    assert np.array_equal(table.response_row, [[0, 1, 2, 3, 4]])
    assert (table.n_items, table.n_response_groups, table.n_prevalence_rows) == (2, 1, 1)
    # every row is one cell with constant 1 in the general form too
    for r, k in product(range(5), range(3)):
        assert table.cells(r, k) == ((1.0, (table.direct_element[r, k],)),)


def test_groups_share_rows_and_have_a_prevalence_row_each():
    table = LatentClassModel((FEES,), 2, groups=Groups("district", ("north", "south"))).table
    assert np.array_equal(table.response_group, [0, 0])
    assert table.n_prevalence_rows == 2
    assert table.n_rows == 2


def test_a_shared_block_across_classes_items_and_groups():
    builder = TableBuilder([2, 2], 2, (0, 1))
    shared, own = builder.block((1.0, 2.0)), builder.block((1.0, 1.0))
    for g in range(2):
        builder.set_item(g, 0, 0, shared)
        builder.set_item(g, 0, 1, shared)
        builder.set_item(g, 1, 0, shared)
        builder.set_item(g, 1, 1, own if g else shared)
    table = builder.build()
    found = response_probability(table, np.array([0.3, 0.7, 0.9, 0.1]))
    assert np.allclose(found[0], [[0.3, 0.7, 0.3, 0.7], [0.3, 0.7, 0.3, 0.7]])
    assert np.allclose(found[1], [[0.3, 0.7, 0.3, 0.7], [0.3, 0.7, 0.9, 0.1]])
    # item 0 is alike in both groups: one row; item 1 is not: two
    assert np.array_equal(table.response_row[:, :2], [[0, 1], [0, 1]])
    assert len(set(table.response_row[:, 2])) == 2
    assert table.n_rows == 6


def test_a_shared_block_with_the_answers_the_other_way_round():
    builder = TableBuilder([2, 2], 1)
    block = builder.block((1.0, 1.0))
    builder.set_item(0, 0, 0, block)
    builder.set_item(0, 1, 0, block[::-1])
    table = builder.build()
    found = response_probability(table, np.array([0.2, 0.8]))[0, 0]
    assert np.allclose(found, [0.2, 0.8, 0.8, 0.2])


def test_one_known_category_leaves_the_rest_to_a_block():
    builder = TableBuilder([3], 1)
    builder.set_known(0, 0, 0, {1: 0.2}, builder.block((1.0, 1.0)))
    table, answers = one_class(builder)
    assert np.allclose(answers([0.25, 0.75]), [0.8 * 0.25, 0.2, 0.8 * 0.75])
    assert not table.is_direct


def test_a_known_binary_item_needs_no_block():
    builder = TableBuilder([2], 1)
    builder.set_known(0, 0, 0, {1: 0.3})
    table, answers = one_class(builder)
    assert table.n_elements == 0
    assert np.allclose(answers([]), [0.7, 0.3])
    assert np.allclose(answers(np.zeros((4, 0))), [[0.7, 0.3]] * 4)


def test_zero_and_one_are_exact():
    builder = TableBuilder([2, 3], 1)
    builder.set_known(0, 0, 0, {1: 0.0})
    builder.set_known(0, 1, 0, {0: 0.0}, builder.block((1.0, 1.0)))
    table = builder.build()
    found = response_probability(table, np.array([0.4, 0.6]))[0, 0]
    assert found.tolist() == [1.0, 0.0, 0.0, 0.4, 0.6]
    assert table.cells(1, 0) == ()


def test_a_whole_known_vector():
    builder = TableBuilder([3], 1)
    builder.set_known(0, 0, 0, {0: 0.2, 1: 0.5, 2: 0.3})
    _, answers = one_class(builder)
    assert np.allclose(answers([]), [0.2, 0.5, 0.3])


def test_single_categories_of_items_with_three_and_two_categories_are_tied():
    builder = TableBuilder([3, 2], 1)
    split, rest = builder.block((1.0, 2.0)), builder.block((1.0, 1.0))
    builder.set_split(0, 0, 0, 1, split, rest)  # the middle answer of the first item
    builder.set_split(0, 1, 0, 1, split)  # yes to the second
    table = builder.build()
    found = response_probability(table, np.array([0.1, 0.9, 0.25, 0.75]))[0, 0]
    assert np.allclose(found, [0.9 * 0.25, 0.1, 0.9 * 0.75, 0.9, 0.1])


def test_two_categories_of_one_item_are_tied():
    builder = TableBuilder([3], 1)
    both, third = builder.block((2.0, 1.0))
    builder.set_row(0, 0, 0, 0, [(0.5, (both,))])
    builder.set_row(0, 0, 1, 0, [(0.5, (both,))])
    builder.set_row(0, 0, 2, 0, [(1.0, (third,))])
    _, answers = one_class(builder)
    assert np.allclose(answers([0.6, 0.4]), [0.3, 0.3, 0.4])


def test_a_pair_answered_together_as_margin_times_conditional():
    builder = TableBuilder([2, 2], 1)
    margin, given_no, given_yes = (builder.block((1.0, 1.0)) for _ in range(3))
    builder.set_item(0, 0, 0, margin)
    for b in range(2):
        cells = [(1.0, (margin[0], given_no[b])), (1.0, (margin[1], given_yes[b]))]
        builder.set_row(0, 1, b, 0, cells)
    table = builder.build()
    found = response_probability(table, np.array([0.4, 0.6, 0.9, 0.1, 0.3, 0.7]))[0, 0]
    assert np.allclose(found, [0.4, 0.6, 0.4 * 0.9 + 0.6 * 0.3, 0.4 * 0.1 + 0.6 * 0.7])


def dependent_pair():
    """Items 0 (2 answers) and 1 (3) together in class 0 only; item 2 apart."""
    builder = TableBuilder([2, 3, 2], 2)
    pair = builder.answered_together(0, 1)
    builder.set_joint(0, pair, 0, builder.block(np.ones(6)))
    builder.set_item(0, 0, 1, builder.block((1.0, 1.0)))
    builder.set_item(0, 1, 1, builder.block((1.0, 1.0, 1.0)))
    for k in range(2):
        builder.set_item(0, 2, k, builder.block((1.0, 1.0)))
    return builder.build()


def test_a_dependent_pair_with_a_missing_half_sums_its_cells():
    table = dependent_pair()
    rng = np.random.default_rng(8)
    elements, prevalence = draw_elements(table, rng), rng.dirichlet((1.0, 1.0))
    together = elements[:6].reshape(2, 3)
    first, second = elements[6:8], elements[8:11]
    third = elements[11:13], elements[13:15]

    def by_hand(a, b, c):
        """Sum p(class) p(answers | class) over classes and over what was not answered."""
        total = 0.0
        for x, y, z in product(range(2), range(3), range(2)):
            if a in (x, -1) and b in (y, -1) and c in (z, -1):
                total += prevalence[0] * together[x, y] * third[0][z]
                total += prevalence[1] * first[x] * second[y] * third[1][z]
        return total

    patterns = list(product((-1, 0, 1), (-1, 0, 1, 2), (-1, 0, 1)))[1:]
    unit_table = compile_units(table, units_of(patterns))
    found = log_unit_likelihood(table, unit_table, elements, prevalence[None])
    np.testing.assert_allclose(np.exp(found), [by_hand(*p) for p in patterns])
    # both halves answered: one joint row; one half: its own row
    n_rows = dict(zip(patterns, np.diff(unit_table.row_start), strict=True))
    assert n_rows[0, 2, -1] == 1
    assert n_rows[0, 2, 1] == 2
    assert n_rows[0, -1, 1] == 2


def test_the_joint_row_of_an_independent_class_is_the_product_of_its_own_rows():
    table = dependent_pair()
    elements = draw_elements(table, np.random.default_rng(2))
    rows = row_probability(table, elements)
    joint = rows[table.joint_row[0], 1].reshape(2, 3)
    np.testing.assert_allclose(joint, np.outer(elements[6:8], elements[8:11]))
    assert table.joint_row.shape == (1, 6)


def test_a_missing_answer_has_no_row():
    table = LatentClassModel((FEES, TRUST), 2).table
    unit_table = compile_units(table, units_of([(0, 2), (1, -1), (-1, 0)], count=[5, 2, 1]))
    assert unit_table.row_start.tolist() == [0, 2, 3, 4]
    assert unit_table.row.tolist() == [0, 4, 1, 2]
    assert unit_table.count.tolist() == [5, 2, 1]
    assert unit_table.n_cases == 8
    assert unit_table.log_weight.shape == (0, 2)


def test_two_prevalence_rows_with_response_groups_of_their_own():
    """By hand: two classes, one binary item; its block differs by group, prevalences too."""
    builder = TableBuilder([2], 2, (0, 1))
    for g, k in product(range(2), range(2)):
        builder.set_item(g, 0, k, builder.block((1.0, 1.0)))
    table = builder.build()
    elements = np.array([0.1, 0.9, 0.8, 0.2, 0.3, 0.7, 0.6, 0.4])
    prevalence = np.array([[0.25, 0.75], [0.5, 0.5]])
    unit_table = compile_units(table, units_of([(1,), (1,)], group=[0, 1]))
    found = np.exp(log_unit_likelihood(table, unit_table, elements, prevalence))
    np.testing.assert_allclose(found, [0.25 * 0.9 + 0.75 * 0.2, 0.5 * 0.7 + 0.5 * 0.4])
    shares = membership(table, unit_table, elements, prevalence)
    np.testing.assert_allclose(shares[0], [0.25 * 0.9 / 0.375, 0.75 * 0.2 / 0.375])
    np.testing.assert_allclose(shares[1], [0.35 / 0.55, 0.2 / 0.55])


def test_one_case_of_verified_class():
    """Rows 0 and 2 give the same answers, but the class of row 2 is known to be the second."""
    table = LatentClassModel((FEES,), 2).table
    units = Units(
        pattern=np.array([[1], [0]], dtype=np.int16),
        group=np.zeros(2, dtype=np.int32),
        count=np.array([3, 1]),
        unit_of_row=np.array([0, 1, 0, -1]),
    )
    weight = verified_log_weight(np.array([-1, -1, 1, 0]), 2)
    split, unit_weight = split_units(units, np.array([2, 1, 1, 1]), weight)
    assert split.n_units == 3
    assert split.n_cases == 4
    assert split.count[split.unit_of_row[0]] == 2
    assert split.count[split.unit_of_row[2]] == 1
    assert split.unit_of_row[3] == -1  # set aside before, set aside now
    unit_table = compile_units(table, split, unit_weight)
    elements, prevalence = np.array([0.4, 0.6, 0.9, 0.1]), np.array([[0.3, 0.7]])
    found = np.exp(log_unit_likelihood(table, unit_table, elements, prevalence))
    shares = membership(table, unit_table, elements, prevalence)
    np.testing.assert_allclose(found[split.unit_of_row[0]], 0.3 * 0.6 + 0.7 * 0.1)
    np.testing.assert_allclose(found[split.unit_of_row[2]], 0.7 * 0.1)
    np.testing.assert_allclose(shares[split.unit_of_row[2]], [0.0, 1.0])


def test_bounds_are_narrowed_and_orders_kept():
    builder = TableBuilder([2], 2)
    first, second = builder.block((1.0, 1.0)), builder.block((1.0, 1.0))
    builder.set_item(0, 0, 0, first)
    builder.set_item(0, 0, 1, second)
    builder.bound(first[1], lower=0.2)
    builder.bound(first[1], lower=0.1, upper=0.9)
    builder.order(first[1], second[1])
    table = builder.build()
    assert table.is_bounded
    assert (table.element_lower[1], table.element_upper[1]) == (0.2, 0.9)
    assert (table.element_lower[0], table.element_upper[0]) == (0.0, 1.0)
    assert (table.order_above.tolist(), table.order_below.tolist()) == ([1], [3])


def test_a_table_with_a_row_left_out_is_refused():
    builder = TableBuilder([2], 2)
    builder.set_item(0, 0, 0, builder.block((1.0, 1.0)))
    with pytest.raises(ModelError, match="column 0 of response group 0 was not set"):
        builder.build()


def test_answers_that_do_not_sum_to_one_are_refused():
    builder = TableBuilder([2], 1)
    block = builder.block((1.0, 1.0))
    builder.set_item(0, 0, 0, (block[0], block[0]))
    with pytest.raises(ModelError, match="item 0 do not sum to 1 in class 0"):
        builder.build()


def test_an_item_is_in_one_pair_only():
    builder = TableBuilder([2, 2, 2], 1)
    builder.answered_together(0, 1)
    with pytest.raises(ModelError, match="one set only"):
        builder.answered_together(1, 2)
