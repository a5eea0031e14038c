"""Resolved statements: names have become indices.

Indices follow the model: classes in the order of its names, items in the order of its items,
categories in the order of the item's, groups in the order of their levels.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal, TypeAlias

from bayeslca.model.statements.syntax import Expression, Extreme, Probability, Relation

GroupIndex: TypeAlias = "int | Literal['every', 'overall']"
"""One group, every group alike (also where there are none), or groups weighted by their sizes."""
Answer: TypeAlias = "tuple[int, tuple[int, ...]]"
"""An item and the categories, in rising order, one of which was answered."""


@dataclass(frozen=True, slots=True)
class PrevalenceTerm:
    """The prevalence of a class (None: of every class, each on its own)."""

    latent_class: int | None
    group: GroupIndex = "every"


@dataclass(frozen=True, slots=True)
class ResponseTerm:
    """The probability of answers given a class (None: every class, each on its own).

    Attributes
    ----------
    answers : tuple of Answer
        One, or several that are given together (a joint probability).
    """

    answers: tuple[Answer, ...]
    latent_class: int | None
    group: GroupIndex = "every"


@dataclass(frozen=True, slots=True)
class MembershipTerm:
    """The probability of a class given answers (a predictive value)."""

    latent_class: int
    answers: tuple[Answer, ...]
    group: GroupIndex = "every"


Term: TypeAlias = "PrevalenceTerm | ResponseTerm | MembershipTerm"


@dataclass(frozen=True, slots=True)
class PrevalencePrior:
    """A Dirichlet prior on the prevalences.

    Attributes
    ----------
    concentration : tuple of float
        One per class, in the model's order.
    group : int or None
        None: every group.
    text : str
        The statement as written.
    """

    concentration: tuple[float, ...]
    group: int | None
    text: str


@dataclass(frozen=True, slots=True)
class ResponsePrior:
    """A Dirichlet prior on an item's answers in a class.

    Attributes
    ----------
    item : int
    latent_class : int or None
        None: every class.
    concentration : tuple of float
        One per category, in the item's order.
    group : int or None
        None: every group.
    text : str
        The statement as written.
    """

    item: int
    latent_class: int | None
    concentration: tuple[float, ...]
    group: int | None
    text: str


@dataclass(frozen=True, slots=True)
class ResolvedNamingRule:
    """A class is the one where a probability is highest or lowest.

    Attributes
    ----------
    latent_class : int
    answer : Answer or None
        None: the prevalence is compared.
    extreme : {"highest", "lowest"}
    text : str
        The statement as written.
    """

    latent_class: int
    answer: Answer | None
    extreme: Extreme
    text: str


@dataclass(frozen=True)
class ResolvedRelations:
    """Relations, all of which are meant: a constraint or a hypothesis.

    Attributes
    ----------
    relations : tuple of Relation
    terms : mapping from Probability to Term
        What each ``P(...)`` in them stands for.
    text : str
        The statement as written.
    """

    relations: tuple[Relation, ...]
    terms: Mapping[Probability, Term]
    text: str


@dataclass(frozen=True)
class ResolvedQuantity:
    """An expression to be computed; fields as in ``ResolvedRelations``."""

    expression: Expression
    terms: Mapping[Probability, Term]
    text: str


Resolved: TypeAlias = (
    "PrevalencePrior | ResponsePrior | ResolvedNamingRule | ResolvedRelations | ResolvedQuantity"
)
