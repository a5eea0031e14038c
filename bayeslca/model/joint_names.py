"""What the blocks of items that are answered together are called, in the notation's words.

``P(accounts=yes | managed, fees=yes)``: the others' answers given the first item's, in a class.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import product
from typing import TYPE_CHECKING

from bayeslca.model.places import ConditionalVector, Place
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.syntax import Event, Name, Probability

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def conditional_vectors(model: LatentClassModel) -> Iterator[ConditionalVector]:
    """Go through the conditional answers of all sets, in the order of their blocks."""
    for s, one in enumerate(model.item_sets):
        for g in range(model.n_response_groups if one.first in model.free_items else 1):
            for k, a in product(sorted(one.classes), range(one.sizes[0])):
                yield ConditionalVector(g, s, k, a)


def conditional_block(model: LatentClassModel, vector: ConditionalVector) -> int | None:
    """Return the block of conditional answers; None where all are known."""
    table, forms = model.table, model.response_assumptions.tied.forms
    one = model.item_sets[vector.item_set]
    for at in range(len(one.rest)):
        for element in forms[Place(vector, at)].elements:
            return int(table.element_block[element])
    return None


def conditional_element_names(model: LatentClassModel) -> dict[int, str]:
    """Return names like ``P(accounts=yes | managed, fees=yes)`` by element."""
    forms = model.response_assumptions.tied.forms
    out: dict[int, str] = {}
    for vector in conditional_vectors(model):
        one = model.item_sets[vector.item_set]
        for at, codes in enumerate(one.rest):
            events = tuple(
                _event(model, j, code) for j, code in zip(one.others, codes, strict=True)
            )
            for element in forms[Place(vector, at)].elements:
                out[element] = to_text(Probability(events, _given(model, vector)))
    return out


def conditional_block_names(model: LatentClassModel) -> dict[int, str]:
    """Return names like ``P(accounts=no, yes | managed, fees=yes)`` by block."""
    out: dict[int, str] = {}
    for vector in conditional_vectors(model):
        block = conditional_block(model, vector)
        if block is None:
            continue
        others = model.item_sets[vector.item_set].others
        events = tuple(Event(Name(model.items[j].name)) for j in others)
        if len(others) == 1:
            categories = model.items[others[0]].categories[1:]
            events = (_event(model, others[0], 0), *(Event(Name(c)) for c in categories))
        out[block] = to_text(Probability(events, _given(model, vector)))
    return out


def _given(model: LatentClassModel, vector: ConditionalVector) -> tuple[Event, ...]:
    one = model.item_sets[vector.item_set]
    out = [Event(Name(model.class_names[vector.latent_class]))]
    out.append(_event(model, one.first, vector.given))
    if model.groups is not None and one.first in model.free_items:
        level = Name(model.groups.levels[vector.response_group])
        out.append(Event(Name(model.groups.name), "=", (level,)))
    return tuple(out)


def _event(model: LatentClassModel, item: int, category: int) -> Event:
    spec = model.items[item]
    return Event(Name(spec.name), "=", (Name(spec.categories[category]),))
