"""Places: the single probabilities that constraints speak of, before blocks are made of them.

A *vector* is a set of probabilities that sum to 1: the prevalences of a group, or an item's
answers in a class (of a response group), or the joint answers of a set given its first item's
answer. A *place* is one probability of a vector.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, NamedTuple, TypeAlias


class PrevalenceVector(NamedTuple):
    """The prevalences of a group; their categories are the classes."""

    group: int


class ResponseVector(NamedTuple):
    """The answers to an item in a class of a response group."""

    response_group: int
    item: int
    latent_class: int


class ConditionalVector(NamedTuple):
    """The joint answers to a set's other items, given the answer to its first, in a class."""

    response_group: int
    item_set: int
    latent_class: int
    given: int


Vector: TypeAlias = "PrevalenceVector | ResponseVector | ConditionalVector"


class Place(NamedTuple):
    """One probability: a category of a vector."""

    vector: Vector
    category: int


Side: TypeAlias = "Place | float"
LinkSign: TypeAlias = Literal[">", ">=", "="]


@dataclass(frozen=True, slots=True)
class Link:
    """One comparison: ``left sign right``; at least one side is a place.

    Attributes
    ----------
    left, right : Place or float
    sign : {">", ">=", "="}
    text : str
        The statement as written.
    """

    left: Side
    sign: LinkSign
    right: Side
    text: str

    @property
    def places(self) -> tuple[Place, ...]:
        """The places that are compared."""
        return tuple(side for side in (self.left, self.right) if isinstance(side, Place))

    @property
    def on_prevalences(self) -> bool:
        """True when the comparison is of prevalences."""
        return any(isinstance(place.vector, PrevalenceVector) for place in self.places)
