"""Responses that are not the ones a model is about are refused with the remedy."""

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.agreement import check_agreement
from bayeslca.model.compile import compile_units, pool_groups, verified_log_weight
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.support import impossible_units
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units

FEES = Item("fees", ("no", "yes"))
MEETS = Item("meets", ("never", "often"))
DISTRICTS = Groups("district", ("north", "south"))


def responses_of(items, groups=None):
    return Responses(
        items=items,
        codes=np.zeros((2, len(items)), dtype=np.int16),
        counts=np.ones(2, dtype=np.int64),
        groups=groups,
        group_codes=np.zeros(2, dtype=np.int32),
    )


@pytest.mark.parametrize(
    ("items", "message"),
    [
        ((FEES,), "has the item 'meets', which the responses do not have"),
        ((FEES, Item("meet", ("never", "often"))), r"near names: 'meet'"),
        ((FEES, MEETS, Item("walks", ("a", "b"))), r"'walks'.*with_items\(\['fees', 'meets'\]\)"),
        ((MEETS, FEES), r"in another order \(meets, fees\)"),
        ((FEES, Item("meets", ("often", "never"))), "categories never, often in the model, but"),
    ],
)
def test_items_must_be_the_models(items, message):
    with pytest.raises(ModelError, match=message):
        check_agreement(LatentClassModel((FEES, MEETS), 2), responses_of(items))


def test_labels_may_differ():
    labelled = Item("meets", ("never", "often"), label="How often do you meet?")
    check_agreement(LatentClassModel((FEES, MEETS), 2), responses_of((FEES, labelled)))


@pytest.mark.parametrize(
    ("groups", "message"),
    [
        (None, "no group column. Read them with group='district'"),
        (Groups("region", ("north", "south")), "responses have region: north, south"),
        (Groups("district", ("south", "north")), "responses have district: south, north"),
    ],
)
def test_groups_must_be_the_models(groups, message):
    model = LatentClassModel((FEES,), 2, groups=DISTRICTS)
    with pytest.raises(ModelError, match=message):
        check_agreement(model, responses_of((FEES,), groups))


def test_a_model_without_groups_takes_responses_with_groups():
    check_agreement(LatentClassModel((FEES,), 2), responses_of((FEES,), DISTRICTS))


def test_pooling_joins_equal_patterns_of_different_groups():
    units = Units(
        pattern=np.array([[0, 1], [1, 1], [0, 1]], dtype=np.int16),
        group=np.array([0, 0, 1], dtype=np.int32),
        count=np.array([3, 1, 2]),
        unit_of_row=np.array([2, 0, -1, 1]),
    )
    pooled = pool_groups(units)
    assert pooled.n_units == 2
    assert pooled.group.tolist() == [0, 0]
    joined = pooled.unit_of_row[0]
    assert pooled.unit_of_row.tolist() == [joined, joined, -1, 1 - joined]
    assert pooled.count[joined] == 5
    assert pooled.pattern[joined].tolist() == [0, 1]
    assert pooled.n_cases == units.n_cases


def test_impossibility_is_of_patterns_not_of_answers():
    """Class 0 forbids yes to the first item, class 1 yes to the second."""
    builder = TableBuilder([2, 2], 2)
    for k in range(2):
        builder.set_known(0, k, k, {1: 0.0})
        builder.set_item(0, 1 - k, k, builder.block((1.0, 1.0)))
    table = builder.build()
    pattern = np.array([(1, 1), (1, 0), (0, 1), (1, -1)], dtype=np.int16)
    units = Units(pattern, np.zeros(4, dtype=int), np.ones(4, dtype=int), np.arange(4))
    assert impossible_units(table, compile_units(table, units)).tolist() == [0]
    # (1, 0) comes from class 1 only: verified as class 0 it is impossible too
    weight = verified_log_weight(np.array([-1, 0, 0, 1]), 2)
    assert impossible_units(table, compile_units(table, units, weight)).tolist() == [0, 1]
