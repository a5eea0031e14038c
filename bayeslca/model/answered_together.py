"""Items that are answered together within a class: sets whose joint answers are one thing.

Within a class answers are taken to be independent. Where two items ask nearly the same, or two
tests look for the same antibody, they are not: they still go together among cases of one class
(Vacek 1985, Biometrics 41, 959-968; Dendukuri & Joseph 2001, Biometrics 57, 158-167). A set of
such items has one probability for each of its joint answers, in all classes or in some.

The joint answers are made of the first item's own probabilities and, given each of its answers,
those of the others' joint answers. With Dirichlet priors this is the same as one Dirichlet over
all joint answers wherever the parameters add up, and a statement on the first item holds exactly.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from math import prod
from typing import Any

import numpy as np

from bayeslca.exceptions import ModelError, near_names
from bayeslca.responses.item import Item

MOST_JOINT_ANSWERS = 64
"""A set with more joint answers is refused: no sample that this is for could fill them."""


@dataclass(frozen=True)
class AnsweredTogether:
    """Items that may go together within a class.

    Give the same items again for other classes where their prior differs from class to class.

    Parameters
    ----------
    items : tuple of str
        Two items or more. Statements on the first one's probabilities are kept exactly.
    classes : tuple of str, optional
        In which classes; all when left out.
    prior : float or tuple of float, optional
        Dirichlet parameter of every joint answer: one for all, or one for each, the last item's
        answer changing fastest. The default keeps each item's own probabilities as near to
        uniform as one number can: 1/2 for two yes/no items, which makes both uniform. 1 instead
        makes every way in which two tests can go together equally likely given their own
        probabilities, and pulls these towards the middle, Beta(2, 2). Numbers for each joint
        answer carry what is known of both items: their sums are each item's Beta.

    Examples
    --------
    >>> AnsweredTogether(["fees", "accounts"], classes=["managed"])
    AnsweredTogether(items=('fees', 'accounts'), classes=('managed',), prior=None)
    """

    items: tuple[str, ...]
    classes: tuple[str, ...] | None = None
    prior: float | tuple[float, ...] | None = None

    def __post_init__(self) -> None:
        # Lists are welcome where tuples are kept; a frozen dataclass is set through object.
        object.__setattr__(self, "items", _names(self.items, "items"))
        if self.classes is not None:
            object.__setattr__(self, "classes", _names(self.classes, "classes"))
        if isinstance(self.prior, list):
            object.__setattr__(self, "prior", tuple(self.prior))
        numbers = self.prior if isinstance(self.prior, tuple) else (self.prior,)
        if self.prior is not None and not all(_is_positive(number) for number in numbers):
            msg = (
                f"answered_together {_listed(self.items)}: prior is {self.prior!r}; a Dirichlet "
                "parameter is a number above 0. Give one, or one for each joint answer; or leave "
                "it out for the default."
            )
            raise ModelError(msg)

    def as_dict(self) -> dict[str, Any]:
        """Return plain values, for saving."""
        classes = None if self.classes is None else list(self.classes)
        prior = list(self.prior) if isinstance(self.prior, tuple) else self.prior
        return {"items": list(self.items), "classes": classes, "prior": prior}


@dataclass(frozen=True, slots=True)
class ItemSet:
    """A set with its names looked up in a model.

    Attributes
    ----------
    items : tuple of int
        The first one's probabilities are its own; the others' are sums.
    sizes : tuple of int
        Categories of each item.
    priors : mapping from int to tuple of float
        Dirichlet parameters of the joint answers in each class where the items are answered
        together, the last item's category changing fastest; elsewhere they are independent.
    stated : frozenset of int
        Classes in which these were given and are not the default.
    """

    items: tuple[int, ...]
    sizes: tuple[int, ...]
    priors: Mapping[int, tuple[float, ...]]
    stated: frozenset[int] = frozenset()

    @property
    def classes(self) -> frozenset[int]:
        """Where the items are answered together."""
        return frozenset(self.priors)

    @property
    def first(self) -> int:
        """The item whose probabilities are its own."""
        return self.items[0]

    @property
    def others(self) -> tuple[int, ...]:
        """The items whose probabilities are sums."""
        return self.items[1:]

    @property
    def n_joint(self) -> int:
        """Number of joint answers."""
        return prod(self.sizes)

    @property
    def rest(self) -> tuple[tuple[int, ...], ...]:
        """The joint answers of the other items, the last one's category changing fastest."""
        return tuple(product(*(range(size) for size in self.sizes[1:])))

    def weight(self, latent_class: int) -> float:
        """Return the cases that the prior of a class counts for."""
        return sum(self.priors[latent_class])

    def given(self, latent_class: int, answer: int) -> tuple[float, ...]:
        """Return the prior of the others' joint answers, given an answer to the first."""
        n = len(self.rest)
        return self.priors[latent_class][answer * n : (answer + 1) * n]

    def margin(self, item: int, latent_class: int) -> tuple[float, ...]:
        """Return the Dirichlet parameters that the prior of a class gives an item alone."""
        at = self.items.index(item)
        joint = np.reshape(self.priors[latent_class], self.sizes)
        others = tuple(axis for axis in range(len(self.sizes)) if axis != at)
        return tuple(joint.sum(axis=others).tolist())


def default_concentration(sizes: Sequence[int]) -> float:
    """Return the Dirichlet parameter of joint answers that keeps items near uniform.

    Item j's own prior is then Dirichlet(g / R_j, ...) with g the geometric mean of the items'
    numbers of categories R: uniform for all where these are equal, and the same for any part of
    the set.
    """
    n = prod(sizes)
    return float(n ** (1.0 / len(sizes)) / n)


def checked_together(given: object) -> tuple[AnsweredTogether, ...]:
    """Return sets as given, or refuse what is no list of sets."""
    if isinstance(given, str | AnsweredTogether | Mapping) or not isinstance(given, Sequence):
        msg = (
            f"answered_together must be a list of sets of items; got {given!r}. Write "
            "answered_together=[['fees', 'accounts']]."
        )
        raise ModelError(msg)
    out = []
    for one in given:
        if isinstance(one, AnsweredTogether):
            out.append(one)
        elif isinstance(one, str) or not isinstance(one, Sequence):
            msg = (
                f"answered_together holds {one!r}, which is no set of items. Write each set in "
                "brackets of its own, [['fees', 'accounts']], or as AnsweredTogether(...)."
            )
            raise ModelError(msg)
        else:
            out.append(AnsweredTogether(tuple(one)))
    return tuple(out)


def item_sets(
    together: Sequence[AnsweredTogether],
    items: Sequence[Item],
    classes: Sequence[str],
    *,
    exploratory: bool,
    free_items: Collection[int] = (),
) -> tuple[ItemSet, ...]:
    """Look up the names of sets; the same items given for several classes are one set.

    Raises
    ------
    ModelError
        When a name is unknown, an item is in two sets, a set has fewer than two items or too
        many joint answers, or only some of its items are free by group.
    """
    names = [item.name for item in items]
    taken: dict[str, AnsweredTogether] = {}
    found: dict[tuple[int, ...], ItemSet] = {}
    for one in together:
        _check_items(one, names, taken)
        at = tuple(names.index(name) for name in one.items)
        sizes = tuple(items[j].n_categories for j in at)
        _check_sizes(one, sizes)
        free = [name for name, j in zip(one.items, at, strict=True) if j in free_items]
        if free and len(free) < len(at):
            msg = (
                f"answered_together {_listed(one.items)}: {_listed(free)} may differ by group "
                "(free_by_group) and the others may not. Let all of them differ, or none."
            )
            raise ModelError(msg)
        before = found.get(at, ItemSet(at, sizes, {}))
        mine = _classes(one, classes, exploratory=exploratory)
        if before.classes & mine:
            msg = (
                f"answered_together {_listed(one.items)} is given twice for class "
                f"'{classes[min(before.classes & mine)]}'. Leave one of them out."
            )
            raise ModelError(msg)
        prior = one.prior or default_concentration(sizes)
        numbers = prior if isinstance(prior, tuple) else (prior,) * prod(sizes)
        stated = before.stated | (mine if one.prior is not None else frozenset())
        found[at] = ItemSet(
            at, sizes, {**before.priors, **dict.fromkeys(mine, tuple(map(float, numbers)))}, stated
        )
    return tuple(found.values())


def _check_sizes(one: AnsweredTogether, sizes: Sequence[int]) -> None:
    n = prod(sizes)
    if n > MOST_JOINT_ANSWERS:
        msg = (
            f"answered_together {_listed(one.items)}: these have {n:,} joint answers, more than "
            f"the {MOST_JOINT_ANSWERS} that a set may have. Take fewer items, or merge rare "
            "answers."
        )
        raise ModelError(msg)
    if isinstance(one.prior, tuple) and len(one.prior) != n:
        msg = (
            f"answered_together {_listed(one.items)}: prior has {len(one.prior)} numbers, and "
            f"there are {n} joint answers. Give one for each, the answer to '{one.items[-1]}' "
            "changing fastest; or one number for all."
        )
        raise ModelError(msg)


def margin_priors(sets: Sequence[ItemSet]) -> dict[tuple[int, int], tuple[float, ...]]:
    """Return the Dirichlet parameters of items (item, class) that their set's prior gives them."""
    return {(j, k): one.margin(j, k) for one in sets for j in one.items for k in one.classes}


def _check_items(
    one: AnsweredTogether, names: Sequence[str], taken: dict[str, AnsweredTogether]
) -> None:
    if len(one.items) < 2:
        msg = (
            f"answered_together {_listed(one.items)}: a set has two items or more. Name the items "
            "that go together, or leave the set out."
        )
        raise ModelError(msg)
    for at, name in enumerate(one.items):
        if name not in names:
            msg = (
                f"answered_together names '{name}', which is no item{near_names(name, names)}. "
                f"The items are {', '.join(names)}."
            )
            raise ModelError(msg)
        if name in one.items[:at]:
            msg = f"answered_together {_listed(one.items)}: '{name}' is listed twice. List it once."
            raise ModelError(msg)
        if name in taken and taken[name].items != one.items:
            both = dict.fromkeys((*taken[name].items, *one.items))
            msg = (
                f"answered_together: '{name}' stands in two sets, {_listed(taken[name].items)} "
                f"and {_listed(one.items)}; an item can be in one. Join them into one set, "
                f"[{', '.join(repr(item) for item in both)}], or leave one out."
            )
            raise ModelError(msg)
    taken.update(dict.fromkeys(one.items, one))


def _classes(one: AnsweredTogether, classes: Sequence[str], *, exploratory: bool) -> frozenset[int]:
    if one.classes is None:
        return frozenset(range(len(classes)))
    where = f"answered_together {_listed(one.items)}"
    if exploratory:
        msg = (
            f"{where}: the model gives a number of classes, and a number names none, so a set "
            "cannot be for some of them only. Give the classes names, or leave classes out."
        )
        raise ModelError(msg)
    if not one.classes:
        msg = f"{where}: classes is an empty list. Name the classes, or leave it out for all."
        raise ModelError(msg)
    for name in one.classes:
        if name not in classes:
            msg = (
                f"{where}: there is no class '{name}'{near_names(name, classes)}. The classes "
                f"are {', '.join(classes)}."
            )
            raise ModelError(msg)
    return frozenset(classes.index(name) for name in one.classes)


def _names(given: object, what: str) -> tuple[str, ...]:
    if isinstance(given, str) or not isinstance(given, Sequence):
        msg = f"the {what} of AnsweredTogether must be a list of names; got {given!r}."
        raise ModelError(msg)
    for name in given:
        if not isinstance(name, str):
            msg = f"the {what} of AnsweredTogether hold {name!r}, which is no name in quotes."
            raise ModelError(msg)
    return tuple(given)


def _is_positive(value: object) -> bool:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return 0.0 < value < float("inf")


def _listed(names: Sequence[str]) -> str:
    return f"[{', '.join(names)}]"
