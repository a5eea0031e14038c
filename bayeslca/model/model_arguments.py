"""What may be given to a model: its arguments, checked one by one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.exceptions import ModelError, near_names
from bayeslca.responses.item import Groups, Item

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def checked_classes(classes: object) -> int | tuple[str, ...]:
    """Return the classes as a number or as names, or refuse them."""
    if isinstance(classes, np.integer):
        classes = int(classes)
    if isinstance(classes, bool) or not isinstance(classes, int | Sequence):
        msg = f"classes must be a number or a list of names; got {classes!r}."
        raise ModelError(msg)
    if isinstance(classes, int):
        if classes < 1:
            msg = f"classes is {classes}; a model has at least 1 class."
            raise ModelError(msg)
        return classes
    if isinstance(classes, str):
        msg = f"classes is the text {classes!r}. Give a list of names: classes=[{classes!r}, ...]."
        raise ModelError(msg)
    for name in classes:
        if not isinstance(name, str) or not name.strip():
            msg = f"{name!r} cannot be the name of a class. Give each class a name in words."
            raise ModelError(msg)
    if not classes:
        msg = "classes is an empty list. Give the names of the classes, or their number."
        raise ModelError(msg)
    refuse_repeated(classes, "class")
    return tuple(classes)


def checked_statements(statements: object) -> tuple[str, ...]:
    """Return the statements, or refuse what is no list of texts."""
    if isinstance(statements, str) or not isinstance(statements, Sequence):
        msg = f"statements must be a list of texts; got {statements!r}. Put it in brackets."
        raise ModelError(msg)
    for statement in statements:
        if not isinstance(statement, str):
            msg = f"the statement {statement!r} is not a text. Write it in quotes."
            raise ModelError(msg)
    return tuple(statements)


def check_items(items: tuple[Item, ...]) -> None:
    """Refuse what are no items, or have one name."""
    for item in items:
        if not isinstance(item, Item):
            msg = f"{item!r} is not an Item. Give Item(name, categories), or responses.items."
            raise ModelError(msg)
    if not items:
        msg = "the model has no items. Give at least one, usually responses.items."
        raise ModelError(msg)
    refuse_repeated([item.name for item in items], "item")


def checked_free(
    free: object, items: Sequence[Item], groups: Groups | None
) -> bool | tuple[str, ...]:
    """Return which items are free by group, in the order of the items, or refuse them."""
    if free is False or free in ((), []):
        return False
    if groups is None:
        msg = (
            f"free_by_group is {free!r}, but the model has no groups. Give groups, usually "
            "responses.groups."
        )
        raise ModelError(msg)
    if free is True:
        return True
    names = [item.name for item in items]
    if isinstance(free, str) or not isinstance(free, Sequence):
        msg = f"free_by_group must be True, False or a list of items; got {free!r}."
        raise ModelError(msg)
    for name in free:
        if name not in names:
            msg = (
                f"free_by_group names '{name}', which is no item{near_names(str(name), names)}. "
                f"The items are {', '.join(names)}."
            )
            raise ModelError(msg)
    return tuple(name for name in names if name in free)


def checked_spread(prior: object) -> tuple[float, float]:
    """Return the Beta parameters of the spread between units, or refuse them."""
    found = tuple(prior) if isinstance(prior, Sequence) else ()
    numbers = [float(a) for a in found if isinstance(a, int | float) and not isinstance(a, bool)]
    if len(found) != 2 or len(numbers) != 2 or not all(0.0 < a < np.inf for a in numbers):
        msg = (
            f"spread_prior is {prior!r}; it takes the two parameters of a Beta, both above 0, such "
            "as (1, 1), which is uniform, or (1, 4), which holds units to be rather alike."
        )
        raise ModelError(msg)
    return numbers[0], numbers[1]


def check_pooled(model: LatentClassModel) -> None:
    """Refuse pooled units where there are none, or where nothing can be pooled."""
    if not isinstance(model.pooled, bool | np.bool_):
        msg = f"pooled is {model.pooled!r}; it is True or False."
        raise ModelError(msg)
    if not model.pooled:
        if model.spread_prior != (1.0, 1.0):
            msg = "spread_prior is about pooled units. Give pooled=True, or leave it out."
            raise ModelError(msg)
        return
    if model.groups is None or len(model.groups.levels) < 2:
        msg = (
            "pooled=True takes the prevalences of two or more units together, and the model has "
            "no groups. Give groups, usually responses.groups (the column of the units)."
        )
        raise ModelError(msg)
    if model.n_classes == 1:
        msg = "with one class there is no prevalence to pool. Leave out pooled=True."
        raise ModelError(msg)
    if len(model.free_items) == len(model.items):
        msg = (
            "pooled=True needs classes that mean the same in every unit, and free_by_group lets "
            "all response probabilities differ. Let the units share some items."
        )
        raise ModelError(msg)


def check_sources(sources: Mapping[str, str], statements: Sequence[str]) -> None:
    """Refuse sources of statements that the model does not have."""
    for text in sources:
        if text not in statements:
            msg = (
                f"statement_sources speaks of {text!r}, which is not a statement of the model"
                f"{near_names(text, statements)}. Write the statement in both places alike."
            )
            raise ModelError(msg)


def refuse_repeated(names: Sequence[str], what: str) -> None:
    """Refuse a name that is given twice."""
    repeated = [name for name in dict.fromkeys(names) if list(names).count(name) > 1]
    if repeated:
        msg = f"the {what} '{repeated[0]}' is given twice. Give each {what} a name of its own."
        raise ModelError(msg)


def refuse_mixed_classes(model: LatentClassModel) -> None:
    """Refuse names that nothing stated gives a meaning.

    Raises
    ------
    ModelError
        Naming classes that nothing tells apart, with what could.
    """
    mixed = model.symmetry.named_group.mixed_classes()
    if not mixed:
        return
    names = [model.class_names[k] for k in mixed[0]]
    item = model.items[0]
    example = f"{item.name}={item.yes or item.categories[-1]}"
    msg = (
        f"nothing in the study tells {names[0]} from {' or '.join(names[1:])}. Add a naming "
        f"rule, such as '{names[0]} is where P({example}) is highest', or a prior, such as "
        f"'P({example} | {names[0]}) ~ Beta(9, 2)'; or give the number of classes "
        f"instead of names (classes={model.n_classes})."
    )
    raise ModelError(msg)
