"""The table of priors: every position has one, stated or default."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.exceptions import StatementError
from bayeslca.model.priors import DEFAULT, prior_table
from bayeslca.model.statements.resolve import read_statements
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import Groups, Item

ITEMS = (Item("fees", ("no", "yes"), yes="yes"), Item("type", ("a", "b", "c")))
NAMED = Vocabulary(ITEMS, ("managed", "lapsed"), Groups("district", ("north", "south", "east")))
NUMBERED = Vocabulary(ITEMS, ("1", "2", "3"), exploratory=True)


def table(*texts, vocabulary=NAMED, **options):
    return prior_table(read_statements(texts, vocabulary).priors, vocabulary, **options)


def test_nothing_stated_is_uniform_everywhere():
    found = table(vocabulary=NUMBERED)
    assert np.array_equal(found.prevalence, np.ones((1, 3)))
    assert [[p.tolist() for p in item] for item in found.response[0]] == [
        [[1, 1]] * 3,
        [[1, 1, 1]] * 3,
    ]
    assert found.prevalence_origin == (DEFAULT,)
    assert found.response_origin == (((DEFAULT,) * 3, (DEFAULT,) * 3),)


def test_another_default():
    found = table(default=0.5)
    assert np.all(found.prevalence == 0.5)
    assert all(np.all(p == 0.5) for item in found.response[0] for p in item)


def test_one_group_has_its_own_prevalences():
    text = "P(lapsed, managed | district=south) ~ Dirichlet(2, 5)"
    found = table(text)
    assert found.prevalence.tolist() == [[1, 1], [5, 2], [1, 1]]
    assert found.prevalence_origin == (DEFAULT, text, DEFAULT)


def test_without_a_group_every_group_is_meant():
    found = table("P(managed) ~ Beta(3, 4)")
    assert found.prevalence.tolist() == [[3, 4]] * 3
    assert set(found.prevalence_origin) == {"P(managed) ~ Beta(3, 4)"}


def test_a_prior_on_one_class_leaves_the_others():
    text = "P(fees=yes | lapsed) ~ Beta(1, 9)"
    found = table(text)
    assert found.response[0][0][0].tolist() == [1, 1]
    assert found.response[0][0][1].tolist() == [9, 1]
    assert found.response_origin[0] == ((DEFAULT, text), (DEFAULT, DEFAULT))


def test_the_dot_means_every_class():
    found = table("P(type=c, b, a | .) ~ Dirichlet(4, 2, 1)", vocabulary=NUMBERED)
    assert [p.tolist() for p in found.response[0][1]] == [[1, 2, 4]] * 3
    assert [p.tolist() for p in found.response[0][0]] == [[1, 1]] * 3


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ("P(fees=yes | managed) ~ Beta(9, 2)", "P(fees=yes | managed) ~ Beta(2, 9)"),
        ("P(fees=yes | .) ~ Beta(9, 2)", "P(fees=yes | lapsed) ~ Beta(2, 9)"),
        ("P(fees=yes | lapsed) ~ Beta(2, 9)", "P(fees=yes | .) ~ Beta(9, 2)"),
        ("P(fees=yes | managed) ~ Beta(9, 2)", "P(fees=no | managed) ~ Beta(9, 2)"),
        ("P(.) ~ Dirichlet(1)", "P(managed | district=east) ~ Beta(2, 1)"),
        ("P(managed | district=east) ~ Beta(2, 1)", "P(lapsed) ~ Beta(2, 1)"),
    ],
)
def test_two_priors_on_one_position_are_refused(first, second):
    with pytest.raises(StatementError) as caught:
        table(first, second)
    assert caught.value.statement == second
    assert first in caught.value.problem
    assert "Keep one" in caught.value.remedy


def test_saying_the_same_twice_is_allowed():
    found = table(
        "P(fees=yes | .) ~ Beta(9, 2)",
        "P(fees=no | lapsed) ~ Beta(2, 9)",
        "P(fees=yes, no | lapsed) ~ Dirichlet(9, 2)",
    )
    assert [p.tolist() for p in found.response[0][0]] == [[2, 9]] * 2
    assert set(found.response_origin[0][0]) == {"P(fees=yes | .) ~ Beta(9, 2)"}


def test_shared_response_probabilities_have_no_prior_by_group():
    with pytest.raises(StatementError, match="share the response probabilities") as caught:
        table("P(fees=yes | managed, district=north) ~ Beta(9, 2)")
    assert caught.value.remedy == (
        "Leave out district=north, or let the item differ: free_by_group=['fees']."
    )
