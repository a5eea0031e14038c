"""Naming rules where all response probabilities differ by group: they hold in each group."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.prior_draws import draw_prior
from bayeslca.model.simulate import Parameters
from bayeslca.model.symmetry import element_map
from bayeslca.responses.item import Groups, Item

ITEMS = tuple(Item(name, ("no", "yes"), yes="yes") for name in ("blood", "milk", "faeces"))
HERDS = Groups("herd", ("hill", "lake"))
RULE = "infected is where P(blood=yes) is highest"


def model_with(*free: str) -> LatentClassModel:
    return LatentClassModel(
        ITEMS, ("infected", "healthy"), (RULE,), groups=HERDS, free_by_group=free
    )


def truth(model: LatentClassModel) -> Parameters:
    return model.simulate(4, seed=3).parameters


def named(model: LatentClassModel, elements: np.ndarray, prevalence: np.ndarray) -> np.ndarray:
    group = model.symmetry.prior_group
    found = permutations_by_rules(
        model.table, elements[None], prevalence[None], model.naming_rules, group
    )
    return np.asarray(found[0])


def test_groups_that_share_nothing_are_sets_of_their_own() -> None:
    assert model_with("blood", "milk", "faeces").symmetry.prior_group.group_sets == ((0,), (1,))
    assert model_with("blood").symmetry.prior_group.group_sets == ((0, 1),)
    assert model_with().symmetry.prior_group.group_sets == ((0, 1),)


@pytest.mark.parametrize("swapped", list(product([False, True], repeat=2)))
def test_classes_that_changed_places_in_one_group_get_their_names_back(
    swapped: tuple[bool, bool],
) -> None:
    # All four labellings of one set of parameters must come to the same one.
    model = model_with("blood", "milk", "faeces")
    one = truth(model)
    permutation = np.array([[1, 0] if swap else [0, 1] for swap in swapped])
    elements = one.elements[element_map(model.table, permutation)]
    prevalence = np.take_along_axis(one.prevalence, permutation, axis=1)
    back = named(model, elements, prevalence)
    again = elements[element_map(model.table, back)]
    first = named(model, one.elements, one.prevalence)
    np.testing.assert_array_equal(again, one.elements[element_map(model.table, first)])


def test_the_prior_keeps_the_rule_in_each_group() -> None:
    model = model_with("blood", "milk", "faeces")
    draws = draw_prior(model, 500, np.random.default_rng(1))
    yes = model.table.response_row[:, 1]
    for row in yes:
        high, low = (model.table.direct_element[row, k] for k in (0, 1))
        assert (draws.elements[:, high] > draws.elements[:, low]).all()


def test_groups_that_share_an_item_are_named_together() -> None:
    model = model_with("blood")
    one = truth(model)
    found = named(model, one.elements, one.prevalence)
    np.testing.assert_array_equal(found[0], found[1])
