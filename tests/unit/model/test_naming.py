"""Naming rules give each draw's classes their names."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bayeslca.exceptions import StatementError
from bayeslca.model.naming import apply_naming_rules, classes_named
from bayeslca.model.statements.resolve import read_statements
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import Item

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("meets", ("no", "yes"), yes="yes"),
    Item("trust", ("low", "middle", "high"), ordered=True),
)
CLASSES = ("managed", "informal", "lapsed", "other")
VOCABULARY = Vocabulary(ITEMS, CLASSES)
ITEM_START = np.array([0, 2, 4, 7])
SEED = 20261


def rules(*texts):
    return read_statements(texts, VOCABULARY).naming_rules


def draws(n, n_groups=1, seed=SEED):
    """Random response probabilities (n, G, 4, 7) and prevalences (n, groups, 4)."""
    rng = np.random.default_rng(seed)
    parts = [rng.dirichlet(np.ones(r), size=(n, n_groups, 4)) for r in (2, 2, 3)]
    return np.concatenate(parts, axis=-1), rng.dirichlet(np.ones(4), size=(n, n_groups))


def named(texts, response, prevalence, **options):
    return apply_naming_rules(response, prevalence, rules(*texts), ITEM_START, **options)


def test_one_draw_by_hand():
    fees = np.array([0.2, 0.9, 0.5, 0.7])
    meets = np.array([0.6, 0.1, 0.05, 0.8])
    response = np.zeros((1, 1, 4, 7))
    response[0, 0, :, :4] = np.stack([1 - fees, fees, 1 - meets, meets], axis=1)
    response[0, 0, :, 4:] = 1 / 3
    prevalence = np.full((1, 1, 4), 0.25)
    texts = ["lapsed is where P(meets) is lowest", "managed is where P(fees) is highest"]
    # lapsed: position 2; managed: 1 (0.9); the others keep their order: informal 0, other 3
    assert named(texts, response, prevalence).tolist() == [[1, 0, 2, 3]]
    # in the other order 'managed' takes position 1 first; lapsed is still position 2
    assert named(texts[::-1], response, prevalence).tolist() == [[1, 0, 2, 3]]
    texts = [
        "informal is where P(fees) is highest",
        "other is where P(meets) is lowest",
        "managed is where P(fees=no) is highest",
    ]
    assert named(texts, response, prevalence).tolist() == [[0, 1, 3, 2]]


def test_the_order_of_rules_counts_where_two_want_one_class():
    response, prevalence = draws(1)
    response[0, 0, :, 1] = [0.9, 0.5, 0.2, 0.1]
    response[0, 0, :, 3] = [0.9, 0.1, 0.6, 0.2]
    fees, meets = "managed is where P(fees) is highest", "informal is where P(meets) is highest"
    assert named([fees, meets], response, prevalence)[0, :2].tolist() == [0, 2]
    assert named([meets, fees], response, prevalence)[0, :2].tolist() == [1, 0]


@pytest.mark.parametrize(
    ("answer", "columns"),
    [("fees", [1]), ("fees=no", [0]), ("trust>=middle", [5, 6]), ("trust in {low, high}", [4, 6])],
)
@pytest.mark.parametrize("extreme", ["highest", "lowest"])
def test_the_named_class_is_the_extreme_one(answer, columns, extreme):
    response, prevalence = draws(200)
    permutation = named([f"informal is where P({answer}) is {extreme}"], response, prevalence)
    score = response[:, 0][..., columns].sum(axis=-1)
    chosen = np.take_along_axis(score, permutation, axis=1)[:, 1]
    expected = score.max(axis=1) if extreme == "highest" else score.min(axis=1)
    assert np.array_equal(chosen, expected)


def test_a_rule_on_the_prevalence():
    response, prevalence = draws(100)
    permutation = named(["other is where prevalence is lowest"], response, prevalence)
    assert np.array_equal(permutation[:, 3], prevalence[:, 0].argmin(axis=1))


def test_groups_are_weighted_by_their_shares():
    response, prevalence = draws(1, n_groups=2)
    prevalence[0] = [[0.7, 0.1, 0.1, 0.1], [0.1, 0.1, 0.1, 0.7]]
    rule = ["managed is where prevalence is highest"]
    many_north = named(rule, response, prevalence, group_share=np.array([0.9, 0.1]))
    many_south = named(rule, response, prevalence, group_share=np.array([0.1, 0.9]))
    assert (many_north[0, 0], many_south[0, 0]) == (0, 3)


RULES = [
    "managed is where P(fees) is highest",
    "lapsed is where P(meets) is lowest",
    "other is where prevalence is lowest",
    "informal is where P(trust=low) is highest",
]


@settings(max_examples=60, deadline=None)
@given(st.permutations(RULES), st.integers(0, 4), st.integers(0, 10_000))
def test_the_result_is_a_permutation_that_a_second_naming_leaves_alone(order, n_rules, seed):
    texts = order[:n_rules]
    response, prevalence = draws(20, seed=seed)
    permutation = named(texts, response, prevalence)
    assert np.array_equal(np.sort(permutation, axis=1), np.tile(np.arange(4), (20, 1)))
    moved = np.take_along_axis(response, permutation[:, None, :, None], axis=2)
    moved_prevalence = np.take_along_axis(prevalence, permutation[:, None, :], axis=2)
    again = named(texts, moved, moved_prevalence)
    assert np.array_equal(again, np.tile(np.arange(4), (20, 1)))
    free = [k for k in range(4) if CLASSES[k] not in {text.split()[0] for text in texts}]
    assert np.all(np.diff(permutation[:, free], axis=1) > 0)


def test_with_every_class_named_the_labelling_of_the_draw_does_not_matter():
    response, prevalence = draws(1)
    results = set()
    for labels in permutations(range(4)):
        shuffled = response[:, :, labels], prevalence[:, :, labels]
        permutation = named(RULES[:3], *shuffled)[0]
        results.add(tuple(np.array(labels)[permutation].tolist()))
    assert len(results) == 1


def test_which_classes_are_named():
    assert classes_named((), 4) == frozenset()
    assert classes_named(rules(RULES[0]), 4) == {0}
    assert classes_named(rules(*RULES[:2]), 4) == {0, 2}
    assert classes_named(rules(*RULES[:3]), 4) == {0, 1, 2, 3}
    assert classes_named((), 1) == {0}


@pytest.mark.parametrize(
    ("first", "second", "message"),
    [
        (RULES[0], "managed is where P(meets) is highest", "'managed' already has a naming rule"),
        (RULES[0], "managed is where P(fees) is highest", "'managed' already has a naming rule"),
        (RULES[0], "lapsed is where P(fees=yes) is highest", "names 'lapsed' and 'managed' alike"),
        (RULES[0], "lapsed is where P(fees=no) is lowest", "names 'lapsed' and 'managed' alike"),
        (
            "lapsed is where P(trust<high) is lowest",
            "managed is where P(trust=high) is highest",
            "names 'managed' and 'lapsed' alike",
        ),
        (RULES[2], "lapsed is where prevalence is lowest", "names 'lapsed' and 'other' alike"),
    ],
)
def test_rules_that_cannot_all_hold_are_refused(first, second, message):
    with pytest.raises(StatementError, match=message) as caught:
        rules(first, second)
    assert first in caught.value.problem
    assert caught.value.statement == second


def test_opposite_extremes_name_two_classes():
    assert len(rules(RULES[0], "lapsed is where P(fees) is lowest")) == 2
    assert len(rules(RULES[0], "lapsed is where P(meets) is highest")) == 2
