"""Naming rules that are kept as orders, and those that cannot be."""

from __future__ import annotations

import pytest

from bayeslca.exceptions import StatementError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.places import Link, Place, PrevalenceVector, ResponseVector
from bayeslca.responses.item import Groups, Item

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("trust", ("low", "middle", "high"), ordered=True),
)
ABC = ("a", "b", "c")
PRIOR = "P(fees=yes | a) ~ Beta(3, 1)"


def links(*statements: str, **options: object) -> tuple[Link, ...]:
    return LatentClassModel(ITEMS, ABC, statements, **options).links


def fees(k: int, category: int = 1) -> Place:
    return Place(ResponseVector(0, 0, k), category)


def trust(k: int, category: int) -> Place:
    return Place(ResponseVector(0, 1, k), category)


def test_a_rule_leaves_out_what_earlier_rules_named() -> None:
    first, second = "a is where P(fees=yes) is highest", "c is where P(trust=low) is lowest"
    assert links(PRIOR, first, second) == (
        Link(fees(0), ">", fees(1), first),
        Link(fees(0), ">", fees(2), first),
        Link(trust(1, 0), ">", trust(2, 0), second),
    )


def test_several_answers_are_turned_into_the_one_left_out() -> None:
    rule = "a is where P(trust>=middle) is highest"
    other = "b is where P(fees=yes) is lowest"
    assert links(PRIOR, rule, other)[0] == Link(trust(1, 0), ">", trust(0, 0), rule)


def test_a_rule_on_prevalence() -> None:
    rule = "b is where prevalence is highest"
    vector = PrevalenceVector(0)
    assert links(PRIOR, rule)[0] == Link(Place(vector, 1), ">", Place(vector, 0), rule)


def test_exchangeable_classes_keep_their_rules_as_names() -> None:
    rules = ("a is where P(fees=yes) is highest", "b is where P(trust=low) is highest")
    assert links(*rules) == ()
    assert links(*rules, "P(fees=yes | .) ~ Beta(2, 2)", "P(a, b, c) ~ Dirichlet(2, 2, 2)") == ()
    assert links(*rules, "P(a, b, c) ~ Dirichlet(1, 2, 2)") != ()
    assert links(*rules, "P(fees=yes | a) > 0.2")[1:] != ()


@pytest.mark.parametrize(
    ("rule", "options", "because"),
    [
        ("b is where prevalence is highest", {"groups": Groups("site", ("x", "y"))}, "every group"),
        (
            "b is where P(fees=yes) is highest",
            {"groups": Groups("site", ("x", "y")), "free_by_group": True},
            "other probabilities in each group",
        ),
    ],
)
def test_what_cannot_be_ordered_is_refused(rule: str, options: dict, because: str) -> None:
    prior = "P(a, b, c) ~ Dirichlet(1, 2, 3)"
    with pytest.raises(StatementError, match=because):
        _ = links(prior, rule, **options)
