"""Which places are equal and which are known, worked out to the end.

Equal places are merged; what follows is merged too: the last answers of two vectors whose other
answers are equal (for binary items: "no" with "no"), and the value of an answer when all others
are known.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from bayeslca.model.places import Link, Place, Vector

DIGITS = 12
"""Probabilities that agree to so many digits are the same."""


class Merged:
    """Places merged by links; ``root`` stands for all places that are equal to it.

    Parameters
    ----------
    links : sequence of Link
        Only those with "=" are used; they are known to be free of contradictions.
    sizes : mapping from Vector to int
        Number of categories of each vector.
    """

    def __init__(self, links: Sequence[Link], sizes: Mapping[Vector, int]) -> None:
        self._parent: dict[Place, Place] = {}
        self._value: dict[Place, float] = {}
        self._texts: dict[Place, list[str]] = {}
        self._sizes = sizes
        for link in links:
            if link.sign == "=":
                self._add(link)
        while self._follow():
            pass

    def root(self, place: Place) -> Place:
        """Return the place that stands for all those equal to this one."""
        while self._parent.get(place, place) != place:
            place = self._parent[place]
        return place

    def value(self, place: Place) -> float | None:
        """Return the probability of a place where it is known."""
        return self._value.get(self.root(place))

    def texts(self, place: Place) -> tuple[str, ...]:
        """Return the statements that made a place equal to others, or known."""
        return tuple(dict.fromkeys(self._texts.get(self.root(place), ())))

    def places(self, vector: Vector) -> tuple[Place, ...]:
        """Return the places of a vector."""
        return tuple(Place(vector, c) for c in range(self._sizes[vector]))

    def mass(self, vector: Vector) -> float:
        """Return what the known places of a vector leave to the others."""
        known = [self.value(place) for place in self.places(vector)]
        return round(1.0 - sum(value for value in known if value is not None), DIGITS)

    def _add(self, link: Link) -> None:
        if isinstance(link.left, Place) and isinstance(link.right, Place):
            self._merge(link.left, link.right, [link.text])
        elif isinstance(link.left, Place) and isinstance(link.right, float):
            self._know(link.left, link.right, [link.text])
        elif isinstance(link.right, Place) and isinstance(link.left, float):
            self._know(link.right, link.left, [link.text])

    def _merge(self, one: Place, two: Place, texts: Sequence[str]) -> None:
        first, second = sorted((self.root(one), self.root(two)))
        every = [*self._texts.get(first, []), *self._texts.pop(second, []), *texts]
        if first != second:
            self._parent[second] = first
            if second in self._value:
                self._value.setdefault(first, self._value.pop(second))
        self._parent.setdefault(first, first)
        self._texts[first] = every

    def _know(self, place: Place, value: float, texts: Sequence[str]) -> None:
        root = self.root(place)
        self._parent.setdefault(root, root)
        self._value.setdefault(root, round(min(max(value, 0.0), 1.0), DIGITS))
        self._texts.setdefault(root, []).extend(texts)

    def _follow(self) -> bool:
        """Draw one round of conclusions; False when there was nothing new."""
        changed = False
        vectors = sorted({place.vector for place in self._parent})
        alike: dict[tuple[float, tuple[Place, ...]], Place] = {}
        for vector in vectors:
            left = [place for place in self.places(vector) if self.value(place) is None]
            roots = [self.root(place) for place in left]
            if left and (len(set(roots)) == 1 or self.mass(vector) <= 0.0):
                share = max(self.mass(vector), 0.0) / len(left)
                for place in left:
                    self._know(place, share, self._reasons(vector))
                changed = True
                continue
            for at, place in enumerate(left if len(left) > 1 else ()):
                others = tuple(sorted(roots[:at] + roots[at + 1 :]))
                twin = alike.setdefault((self.mass(vector), others), place)
                if self.root(twin) != self.root(place):
                    texts = [*self._reasons(vector), *self._reasons(twin.vector)]
                    self._merge(twin, place, texts)
                    return True
        return changed

    def _reasons(self, vector: Vector) -> list[str]:
        return [text for place in self.places(vector) for text in self.texts(place)]
