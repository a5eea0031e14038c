"""From stated priors and defaults to the Dirichlet parameters of every block."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import StatementError
from bayeslca.model.statements.resolved import PrevalencePrior, ResponsePrior
from bayeslca.model.statements.vocabulary import Vocabulary

_Key = TypeVar("_Key")
_Stated = TypeVar("_Stated", PrevalencePrior, ResponsePrior)

DEFAULT = "default"
"""Origin of a prior that nobody stated."""


@dataclass(frozen=True, eq=False)
class PriorTable:
    """The Dirichlet parameters of all prevalences and response probabilities.

    Attributes
    ----------
    prevalence : ndarray of float64, shape (group, K)
    response : tuple
        ``response[g][j][k]``: parameters (category,) of item j in class k of response group g.
    prevalence_origin : tuple of str, shape (group,)
        ``"default"``, or the text of the statement.
    response_origin : tuple
        ``response_origin[g][j][k]``, likewise.
    """

    prevalence: Floats
    response: tuple[tuple[tuple[Floats, ...], ...], ...]
    prevalence_origin: tuple[str, ...]
    response_origin: tuple[tuple[tuple[str, ...], ...], ...]


def prior_table(
    priors: Sequence[PrevalencePrior | ResponsePrior],
    vocabulary: Vocabulary,
    default: float = 1.0,
    free_items: Collection[int] = (),
    item_defaults: Mapping[tuple[int, int], Sequence[float]] | None = None,
) -> PriorTable:
    """Fill a table with the stated priors, and with a default where nothing was stated.

    Parameters
    ----------
    priors : sequence of PrevalencePrior or ResponsePrior
    vocabulary : Vocabulary
    default : float
        Dirichlet parameter of every class and category without a stated prior; 1 is uniform.
    free_items : collection of int
        Items whose response probabilities are free by group.
    item_defaults : mapping from (item, class) to sequence of float, optional
        Other defaults, of items that are answered together with others.

    Raises
    ------
    StatementError
        When two statements give one position different priors, or a statement gives a group a
        prior on an item that all groups share.
    """
    response_groups = range(vocabulary.n_groups if free_items else 1)
    prevalence: dict[int, PrevalencePrior] = {}
    response: dict[tuple[int, int, int], ResponsePrior] = {}
    for prior in priors:
        if isinstance(prior, PrevalencePrior):
            groups = range(vocabulary.n_groups) if prior.group is None else (prior.group,)
            for g in groups:
                _put(prevalence, g, prior)
        else:
            _refuse_group(prior, vocabulary, free_items)
            every = range(vocabulary.n_classes)
            for g in _groups_of(prior, response_groups):
                for k in every if prior.latent_class is None else (prior.latent_class,):
                    _put(response, (g, prior.item, k), prior)

    others = item_defaults or {}

    def parameters(
        prior: PrevalencePrior | ResponsePrior | None,
        n: int,
        unstated: Sequence[float] | float = default,
    ) -> Floats:
        if prior is not None:
            return np.asarray(prior.concentration, float)
        return np.broadcast_to(np.asarray(unstated, float), (n,)).copy()

    def origin(prior: PrevalencePrior | ResponsePrior | None) -> str:
        return DEFAULT if prior is None else prior.text

    groups, classes = range(vocabulary.n_groups), range(vocabulary.n_classes)
    items = range(len(vocabulary.items))
    return PriorTable(
        prevalence=np.stack([parameters(prevalence.get(g), len(classes)) for g in groups]),
        response=tuple(
            tuple(
                tuple(
                    parameters(
                        response.get((g, j, k)),
                        vocabulary.items[j].n_categories,
                        others.get((j, k), default),
                    )
                    for k in classes
                )
                for j in items
            )
            for g in response_groups
        ),
        prevalence_origin=tuple(origin(prevalence.get(g)) for g in groups),
        response_origin=tuple(
            tuple(tuple(origin(response.get((g, j, k))) for k in classes) for j in items)
            for g in response_groups
        ),
    )


def _groups_of(prior: ResponsePrior, response_groups: range) -> Sequence[int]:
    """Return the response groups that a prior stands on; a shared item's are all alike."""
    return response_groups if prior.group is None else (prior.group,)


def _put(stated: dict[_Key, _Stated], position: _Key, prior: _Stated) -> None:
    """Give a position its prior; a second, different one is refused."""
    first = stated.setdefault(position, prior)
    if not np.array_equal(first.concentration, prior.concentration):
        msg = f"this and an earlier statement give one probability two priors: {first.text}"
        remedy = (
            "Keep one of them. A statement on every class or group leaves none for a second one: "
            "write one statement for each."
        )
        raise StatementError(msg, statement=prior.text, position=0, remedy=remedy)


def _refuse_group(
    prior: ResponsePrior, vocabulary: Vocabulary, free_items: Collection[int]
) -> None:
    if prior.group is None or vocabulary.groups is None or prior.item in free_items:
        return
    name = vocabulary.items[prior.item].name
    msg = (
        f"all groups share the response probabilities of '{name}', so one group cannot have a "
        "prior of its own"
    )
    level = vocabulary.groups.levels[prior.group]
    remedy = (
        f"Leave out {vocabulary.groups.name}={level}, or let the item differ: "
        f"free_by_group=['{name}']."
    )
    raise StatementError(msg, statement=prior.text, position=0, remedy=remedy)
