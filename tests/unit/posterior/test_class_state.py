"""Empty classes and twins."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.class_state import ClassState, class_state
from bayeslca.responses.item import Item
from bayeslca.responses.units import collapse
from bayeslca.sampling.draws import Draws

MODEL = LatentClassModel([Item(f"q{j}", ("no", "yes")) for j in range(4)], 3)
CODES = np.repeat([[1, 1, 1, 1], [0, 0, 0, 0], [1, 1, 0, 0]], 20, axis=0).astype(np.int16)
UNITS = compile_units(
    MODEL.table, collapse(CODES, np.zeros(60, np.int32), np.ones(60, np.int64), (2,) * 4)
)


def draws_at(yes: np.ndarray, prevalence: np.ndarray) -> Draws:
    """Return the same parameters in every draw: yes (K, item)."""
    table = MODEL.table
    elements = np.empty(table.n_elements)
    for j in range(4):
        no_row, yes_row = table.response_row[0, 2 * j : 2 * j + 2]
        elements[table.direct_element[yes_row]] = yes[:, j]
        elements[table.direct_element[no_row]] = 1 - yes[:, j]
    size = (2, 10)
    return Draws(
        np.broadcast_to(elements, (*size, elements.size)),
        np.broadcast_to(prevalence, (*size, 1, 3)),
        np.zeros(size),
        np.zeros(size),
    )


CLEAR = np.array([[0.9] * 4, [0.1] * 4, [0.9, 0.9, 0.1, 0.1]])


@pytest.mark.parametrize(
    ("yes", "prevalence", "expected"),
    [
        (CLEAR, [0.34, 0.33, 0.33], ClassState()),
        (CLEAR, [0.5, 0.499, 0.001], ClassState(empty=(2,))),
        (CLEAR[[0, 1, 1]], [0.4, 0.4, 0.2], ClassState(twins=((1, 2),))),
        (CLEAR[[1, 1, 1]], [0.4, 0.4, 0.2], ClassState(twins=((0, 1), (0, 2), (1, 2)))),
    ],
)
def test_states(yes: np.ndarray, prevalence: list[float], expected: ClassState) -> None:
    if expected.empty:
        yes = np.vstack([yes[:2], [[0.5, 0.5, 0.5, 0.5]]])
    found = class_state(MODEL.table, UNITS, draws_at(yes, np.array(prevalence)))
    assert found == expected


def test_unsteady_classes_are_all_of_them() -> None:
    assert ClassState(empty=(0,), twins=((1, 3),)).unsteady == {0, 1, 3}
