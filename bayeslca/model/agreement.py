"""Whether responses are the ones that a model is about: items, answers and groups."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from bayeslca.exceptions import ModelError, near_names
from bayeslca.responses.item import Groups, Item

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses


def check_agreement(model: LatentClassModel, responses: Responses) -> None:
    """Check that responses have the model's items, in its order, and its groups.

    A model without groups pools the cases of all groups.

    Raises
    ------
    ModelError
        Saying what differs and what to do.
    """
    _check_items(model.items, responses.items)
    if model.groups is not None:
        _check_groups(model.groups, responses.groups)


def _check_items(expected: Sequence[Item], found: Sequence[Item]) -> None:
    ours, theirs = [item.name for item in expected], [item.name for item in found]
    missing = [name for name in ours if name not in theirs]
    if missing:
        msg = (
            f"the model has the item '{missing[0]}', which the responses do not have"
            f"{near_names(missing[0], theirs)}. Read the responses with all of the model's "
            f"items: {', '.join(ours)}."
        )
        raise ModelError(msg)
    extra = [name for name in theirs if name not in ours]
    if extra:
        msg = (
            f"the responses have the item '{extra[0]}', which the model does not have. "
            f"Use responses.with_items([{', '.join(map(repr, ours))}]), or add it to the model."
        )
        raise ModelError(msg)
    if ours != theirs:
        msg = (
            f"the responses have the model's items in another order ({', '.join(theirs)}). "
            f"Use responses.with_items([{', '.join(map(repr, ours))}])."
        )
        raise ModelError(msg)
    for one, two in zip(expected, found, strict=True):
        if one.categories != two.categories:
            msg = (
                f"item '{one.name}' has the categories {', '.join(one.categories)} in the model, "
                f"but {', '.join(two.categories)} in the responses. Give the responses the "
                "model's categories, in the same order."
            )
            raise ModelError(msg)


def _check_groups(expected: Groups, found: Groups | None) -> None:
    if found is None:
        msg = (
            f"the model has groups by '{expected.name}', but the responses have no group column. "
            f"Read them with group='{expected.name}', or build the model without groups."
        )
        raise ModelError(msg)
    if found.name != expected.name or found.levels != expected.levels:
        msg = (
            f"the model has the groups {expected.name}: {', '.join(expected.levels)}, but the "
            f"responses have {found.name}: {', '.join(found.levels)}. Build the model with "
            "groups=responses.groups, or read the responses with these groups."
        )
        raise ModelError(msg)
