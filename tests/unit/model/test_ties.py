"""Blocks of equal and known probabilities: their elements and priors (rules 8 and 13)."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.places import Link, Place, ResponseVector
from bayeslca.model.ties import VectorPrior, tie

A, B, C = (ResponseVector(0, j, 0) for j in range(3))


def equal(one, two, text="equal"):
    return Link(one, "=", two, text)


def tied(priors, *links):
    vectors = dict(zip((A, B, C), (VectorPrior(*prior) for prior in priors), strict=False))
    return tie(vectors, links)


def probabilities(made, rng):
    """Values of all places at random elements, by vector."""
    elements = np.concatenate([rng.dirichlet(np.ones(len(block))) for block in made.blocks])
    out = {}
    for place, form in sorted(made.forms.items()):
        value = form.constant * np.prod(elements[list(form.elements)])
        out.setdefault(place.vector, []).append(float(value))
    return out


def test_vectors_without_ties_keep_their_own_blocks():
    made = tied([((1, 2),), ((3, 4, 5),)])
    assert made.blocks == ((1, 2), (3, 4, 5))
    assert made.reasons == ((), ())
    assert all(form.constant == 1.0 and len(form.elements) == 1 for form in made.forms.values())


def test_two_binary_vectors_share_a_block_with_the_conditional_prior():
    made = tied([((2, 3),), ((4, 5),)], equal(Place(A, 1), Place(B, 1)))
    assert made.blocks == ((5, 7),)
    turned = tied([((2, 3),), ((4, 5),)], equal(Place(A, 1), Place(B, 0)))
    assert turned.blocks == ((2 + 5 - 1, 3 + 4 - 1),)


def test_three_uniform_ones_stay_uniform():
    links = [equal(Place(A, 0), Place(B, 0)), equal(Place(B, 0), Place(C, 0))]
    assert tied([((1, 1),)] * 3, *links).blocks == ((1, 1),)


def test_a_single_category_is_tied_by_splitting_it_from_the_rest():
    made = tied([((2, 3, 4),), ((5, 6),)], equal(Place(A, 1), Place(B, 1)))
    # tied: 3 + 6 - 1; any other: (2 + 4) + 5 - 1; the rest of the three has its own block.
    assert made.blocks == ((8, 10), (2, 4))
    values = probabilities(made, np.random.default_rng(1))
    assert values[A][1] == values[B][1]
    assert sum(values[A]) == pytest.approx(1.0)
    assert sum(values[B]) == pytest.approx(1.0)


def test_two_of_four_categories_tied_leave_each_its_own_rest():
    links = [equal(Place(A, 0), Place(B, 0)), equal(Place(A, 1), Place(B, 2))]
    made = tied([((1, 1, 1, 1),), ((1, 1, 1, 1),)], *links)
    assert made.blocks == ((1, 1, 3), (1, 1), (1, 1))
    values = probabilities(made, np.random.default_rng(2))
    assert values[A][:2] == [values[B][0], values[B][2]]


def test_all_but_one_category_tied_ties_the_last():
    links = [equal(Place(A, 0), Place(B, 1)), equal(Place(A, 1), Place(B, 2))]
    made = tied([((2, 2, 2),), ((3, 3, 3),)], *links)
    assert made.blocks == ((4, 4, 4),)
    values = probabilities(made, np.random.default_rng(3))
    assert values[A][2] == values[B][0]


def test_equal_categories_of_one_vector_halve_an_element():
    made = tied([((2, 3, 4),)], equal(Place(A, 0), Place(A, 1)))
    assert made.blocks == ((4, 4),)
    values = probabilities(made, np.random.default_rng(4))
    assert values[A][0] == values[A][1]
    assert tied([((1, 1),)], equal(Place(A, 0), Place(A, 1))).blocks == ()


def test_a_known_category_leaves_the_rest_the_other_parameters():
    made = tied([((2, 3, 4),)], Link(Place(A, 1), "=", 0.25, "known"))
    assert made.blocks == ((2, 4),)
    values = probabilities(made, np.random.default_rng(5))
    assert values[A][1] == 0.25
    assert sum(values[A]) == pytest.approx(1.0)


def test_known_values_spread_over_ties_and_to_the_last_category():
    links = [
        Link(Place(A, 0), "=", 0.2, "known"),
        equal(Place(B, 0), Place(A, 0)),
        Link(Place(C, 0), "=", 1.0, "certain"),
    ]
    made = tied([((1, 1),), ((1, 1),), ((1, 1, 1),)], *links)
    assert made.blocks == ()
    assert made.forms[Place(B, 1)].constant == pytest.approx(0.8)
    assert [made.forms[Place(C, c)].constant for c in range(3)] == [1.0, 0.0, 0.0]


def test_one_stated_prior_is_the_shared_ones():
    made = tied([((9, 2), "stated"), ((1, 1),)], equal(Place(A, 1), Place(B, 1)))
    assert made.blocks == ((9, 2),)
    twice = tied([((9, 2), "one"), ((9, 2), "two")], equal(Place(A, 1), Place(B, 1)))
    assert twice.blocks == ((9, 2),)


@pytest.mark.parametrize(
    ("priors", "links", "message"),
    [
        (
            [((9, 2), "first"), ((3, 3), "second")],
            [equal(Place(A, 1), Place(B, 1))],
            "two different priors are stated .*: first and second",
        ),
        # Two Jeffreys priors: 1/2 + 1/2 - 1 = 0.
        ([((0.5, 0.5),)] * 2, [equal(Place(A, 1), Place(B, 1))], "not proper"),
        (
            [((1, 1), "stated")],
            [Link(Place(A, 1), "=", 0.0, "known")],
            "contradict each other: stated; known",
        ),
        # a of one vector is tied to one vector, b to another: rule 14.
        (
            [((1, 1, 1),), ((1, 1, 1),), ((1, 1, 1),)],
            [equal(Place(A, 0), Place(B, 0)), equal(Place(A, 1), Place(C, 1))],
            "do not nest",
        ),
        (
            [((1, 1, 1),), ((1, 1, 1),)],
            [equal(Place(A, 0), Place(B, 0)), Link(Place(A, 1), "=", 0.25, "known")],
            "do not nest",
        ),
    ],
)
def test_what_has_no_exact_block_is_refused_by_name(priors, links, message):
    with pytest.raises(ModelError, match=message):
        tied(priors, *links)
