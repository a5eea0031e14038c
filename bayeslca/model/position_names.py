"""What the blocks and elements of a model's table are called, in the notation of statements."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.model.joint_names import conditional_block_names, conditional_element_names
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.syntax import Event, Name, Probability

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def prevalence_names(model: LatentClassModel) -> tuple[tuple[str, ...], ...]:
    """Return a name like ``P(managed | district=north)`` per group and class."""
    names = [Event(Name(name)) for name in model.class_names]
    if model.groups is None:
        return (tuple(to_text(Probability((name,))) for name in names),)
    column = Name(model.groups.name)
    return tuple(
        tuple(
            to_text(Probability((name,), (Event(column, "=", (Name(level),)),))) for name in names
        )
        for level in model.groups.levels
    )


def element_names(model: LatentClassModel) -> tuple[str, ...]:
    """Return a name like ``P(fees=yes | managed)`` per element.

    An element that stands in several places has the name of the first; one that is only a part
    of a response probability is called so.
    """
    table = model.table
    given = conditional_element_names(model)
    names = [given.get(e, "") for e in range(table.n_elements)]
    for j, item in enumerate(model.items):
        for c, category in enumerate(item.categories):
            for k in range(table.n_classes):
                for g in range(table.n_response_groups):
                    row = int(table.response_row[g, table.item_start[j] + c])
                    event = Event(Name(item.name), "=", (Name(category),))
                    condition = [Event(Name(model.class_names[k])), *_condition(model, row)]
                    text = to_text(Probability((event,), tuple(condition)))
                    direct = table.direct_element[row, k] >= 0
                    for _, elements in table.cells(row, k):
                        for e in elements:
                            names[e] = names[e] or (text if direct else f"part of {text}")
    return tuple(name or f"element {e} (in no row)" for e, name in enumerate(names))


def block_names(model: LatentClassModel) -> tuple[str, ...]:
    """Return a name like ``P(fees=no, yes | managed)`` per block, after its first element."""
    table = model.table
    first_use = conditional_block_names(model)
    block = table.element_block
    for j, item in enumerate(model.items):
        categories = tuple(Event(Name(category)) for category in item.categories[1:])
        first = Event(Name(item.name), "=", (Name(item.categories[0]),))
        for k in range(table.n_classes):
            for g in range(table.n_response_groups):
                row = int(table.response_row[g, table.item_start[j]])
                given = [Event(Name(model.class_names[k])), *_condition(model, row)]
                text = to_text(Probability((first, *categories), tuple(given)))
                columns = slice(table.item_start[j], table.item_start[j + 1])
                for r in table.response_row[g, columns].tolist():
                    for _, elements in table.cells(r, k):
                        for e in elements:
                            first_use.setdefault(int(block[e]), text)
    return tuple(first_use.get(b, f"block {b} (in no row)") for b in range(table.n_blocks))


def _condition(model: LatentClassModel, row: int) -> list[Event]:
    """Return the group in which a row is used; none when it is used in several."""
    table = model.table
    if model.groups is None:
        return []
    uses = np.flatnonzero((table.response_row == row).any(axis=1)[table.response_group])
    if uses.size != 1:
        return []
    return [Event(Name(model.groups.name), "=", (Name(model.groups.levels[uses[0]]),))]
