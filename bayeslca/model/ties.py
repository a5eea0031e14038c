"""From equal and known probabilities to blocks: which elements each probability is made of.

Vectors without equal or known places have a block of their own. Known places are constants, and
the others share what is left. Vectors that share some places share a block of these and of "any
other answer", and what "any other" is made of has a block of its own in each vector. The prior of
shared places is the conditional prior given that they are equal (rule 8): a = sum a_i - (m - 1).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from bayeslca.exceptions import ModelError
from bayeslca.model.merging import Merged
from bayeslca.model.places import Link, Place, Vector


@dataclass(frozen=True, slots=True)
class VectorPrior:
    """The Dirichlet parameters of a vector, and the statement that gave them (None: default)."""

    concentration: tuple[float, ...]
    stated: str | None = None


@dataclass(frozen=True, slots=True)
class Form:
    """What a place is made of: a constant times the product of some elements."""

    constant: float
    elements: tuple[int, ...]


@dataclass(frozen=True)
class Tied:
    """Blocks, and what each place is made of.

    Attributes
    ----------
    blocks : tuple of tuple of float
        Dirichlet parameters of each block; its elements are numbered on from the block before.
    forms : mapping from Place to Form
        Of every place of every vector.
    reasons : tuple of tuple of str
        The statements that made each block shared or reduced; empty for a vector's own.
    """

    blocks: tuple[tuple[float, ...], ...]
    forms: Mapping[Place, Form]
    reasons: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class _Reduced:
    """The free part of a vector: its distinct roots with what they weigh."""

    vector: Vector
    roots: tuple[Place, ...]
    times: dict[Place, int]  # how many of the vector's places are equal to the root
    weight: dict[Place, float]  # Dirichlet parameters of their sums
    mass: float
    stated: str | None


def tie(priors: Mapping[Vector, VectorPrior], links: Sequence[Link]) -> Tied:
    """Make blocks of vectors whose places may be equal or known.

    Parameters
    ----------
    priors : mapping from Vector to VectorPrior
        All vectors, in the order in which their blocks shall stand.
    links : sequence of Link
        Free of contradictions; only those with "=" are used.

    Raises
    ------
    ModelError
        Where the shared prior is not proper, two different priors were stated for it, a known
        vector has a prior, or the ties do not nest.
    """
    sizes = {vector: len(prior.concentration) for vector, prior in priors.items()}
    maker = _Maker(Merged(links, sizes), priors)
    for vector in priors:
        maker.add(vector)
    return Tied(tuple(maker.blocks), maker.forms, tuple(maker.reasons))


class _Maker:
    """Collects blocks and forms; a component of vectors that share places is made at once."""

    def __init__(self, merged: Merged, priors: Mapping[Vector, VectorPrior]) -> None:
        self.merged = merged
        self.priors = priors
        self.blocks: list[tuple[float, ...]] = []
        self.reasons: list[tuple[str, ...]] = []
        self.forms: dict[Place, Form] = {}
        self._n_elements = 0
        self._reduced = {vector: self._reduce(vector) for vector in priors}
        self._users: dict[Place, list[Vector]] = {}
        for vector, reduced in self._reduced.items():
            for root in reduced.roots:
                self._users.setdefault(root, []).append(vector)

    def add(self, vector: Vector) -> None:
        """Make the blocks of a vector and of all that share places with it."""
        places = self.merged.places(vector)
        if places[0] in self.forms:
            return
        for member in self._component(vector):
            for place in self.merged.places(member):
                value = self.merged.value(place)
                if value is not None:
                    self.forms[place] = Form(value, ())
        members = [self._reduced[member] for member in self._component(vector)]
        if members[0].roots:
            self._make(members)

    def _component(self, vector: Vector) -> list[Vector]:
        found = [vector]
        for member in found:
            for root in self._reduced[member].roots:
                found += [user for user in self._users[root] if user not in found]
        return found

    def _reduce(self, vector: Vector) -> _Reduced:
        prior = self.priors[vector]
        times: dict[Place, int] = {}
        weight: dict[Place, float] = {}
        for place, a in zip(self.merged.places(vector), prior.concentration, strict=True):
            if self.merged.value(place) is None:
                root = self.merged.root(place)
                times[root] = times.get(root, 0) + 1
                weight[root] = weight[root] + a - 1.0 if root in weight else a
        if prior.stated is not None and not times:
            texts = self._texts([vector])
            msg = (
                f"these statements contradict each other: {prior.stated}; {'; '.join(texts)}. "
                "A known probability has no prior; leave one of them out."
            )
            raise ModelError(msg)
        mass = self.merged.mass(vector)
        return _Reduced(vector, tuple(times), times, weight, mass, prior.stated)

    def _make(self, members: Sequence[_Reduced]) -> None:
        shared = [root for root in members[0].roots if len(self._users[root]) > 1]
        texts = self._texts([member.vector for member in members])
        if len(members) > 1:
            self._refuse_not_nested(members, shared, texts)
        own = [[root for root in m.roots if root not in shared] for m in members]
        if not shared:
            one = members[0]
            elements = self._block([one.weight[root] for root in one.roots], texts)
            self._put(one, dict(zip(one.roots, [(e,) for e in elements], strict=True)))
            return
        weights = self._shared_prior(members, shared, own, texts)
        elements = self._block(weights if own[0] else weights[:-1], texts)
        for member, rest in zip(members, own, strict=True):
            made: dict[Place, tuple[int, ...]] = {
                root: (e,) for root, e in zip(shared, elements, strict=False)
            }
            another = elements[-1]
            if len(rest) == 1:
                made[rest[0]] = (another,)
            elif rest:
                inner = self._block([member.weight[root] for root in rest], texts)
                made |= {root: (another, e) for root, e in zip(rest, inner, strict=True)}
            self._put(member, made)

    def _put(self, member: _Reduced, made: Mapping[Place, tuple[int, ...]]) -> None:
        for place in self.merged.places(member.vector):
            root = self.merged.root(place)
            if root in made:
                self.forms[place] = Form(member.mass / member.times[root], made[root])

    def _block(self, prior: Sequence[float], texts: Sequence[str]) -> tuple[int, ...]:
        if min(prior) <= 0.0:
            msg = (
                f"the prior of the probabilities made equal by {_quoted(texts)} is not proper: "
                "the default or stated priors put too much mass at 0 and 1 to agree. State one "
                "prior for one of them; it is then the shared one's."
            )
            raise ModelError(msg)
        first = self._n_elements
        self._n_elements += len(prior)
        self.blocks.append(tuple(float(a) for a in prior))
        self.reasons.append(tuple(texts))
        return tuple(range(first, self._n_elements))

    def _shared_prior(
        self,
        members: Sequence[_Reduced],
        shared: Sequence[Place],
        own: Sequence[Sequence[Place]],
        texts: Sequence[str],
    ) -> list[float]:
        """Return the parameters of the shared places, then of "any other answer"."""
        each = [
            [*(m.weight[root] for root in shared), sum(m.weight[root] for root in rest)]
            for m, rest in zip(members, own, strict=True)
        ]
        stated = [(m.stated, a) for m, a in zip(members, each, strict=True) if m.stated]
        for text, a in stated[1:]:
            if a != stated[0][1]:
                msg = (
                    f"two different priors are stated for probabilities that are equal by "
                    f"{_quoted(texts)}: {stated[0][0]} and {text}. Keep one of them."
                )
                raise ModelError(msg)
        if stated:
            return stated[0][1]
        return [sum(column) - (len(members) - 1) for column in zip(*each, strict=True)]

    def _refuse_not_nested(
        self, members: Sequence[_Reduced], shared: Sequence[Place], texts: Sequence[str]
    ) -> None:
        first = members[0]
        for member in members:
            nested = all(root in member.roots for root in shared)
            nested &= all(len(self._users[r]) == 1 for r in member.roots if r not in shared)
            nested &= member.mass == first.mass
            nested &= all(member.times[r] == first.times[r] for r in shared if r in member.times)
            nested &= (len(member.roots) > len(shared)) == (len(first.roots) > len(shared))
            if not nested:
                msg = (
                    f"the equalities {_quoted(texts)} do not nest, and no exact sampler is "
                    "written for such a model: items tied to each other must share the same "
                    "answers, beside the same known ones. Leave one of these statements out."
                )
                raise ModelError(msg)

    def _texts(self, vectors: Sequence[Vector]) -> tuple[str, ...]:
        places = [place for vector in vectors for place in self.merged.places(vector)]
        return tuple(dict.fromkeys(t for place in places for t in self.merged.texts(place)))


def _quoted(texts: Sequence[str]) -> str:
    return "; ".join(texts)
