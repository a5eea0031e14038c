"""Statements that cannot all hold: found by a linear program, and named.

Whether some probabilities keep all links is a question of linear inequalities. Where none do,
statements are left out one by one as long as the rest is still contradictory; those that remain
contradict each other, and none of them could be spared (Chinneck and Dravnieks 1991, ORSA
Journal on Computing 3, 157-168, deletion filter).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError
from bayeslca.model.places import Link, Place, Vector

Feasible = Callable[[Sequence[str]], bool]

LEAST_SLACK = 1e-9
"""Inequalities that leave less room than this leave none."""


def refuse_contradictions(links: Sequence[Link], sizes: Mapping[Vector, int]) -> None:
    """Refuse links that no probabilities keep.

    Parameters
    ----------
    links : sequence of Link
    sizes : mapping from Vector to int
        Number of categories of each vector.

    Raises
    ------
    ModelError
        Naming the fewest statements that contradict each other.
    """
    if not links or _feasible(links, sizes):
        return
    texts = guilty_statements(
        [link.text for link in links], lambda kept: _feasible(_of(links, kept), sizes)
    )
    raise ModelError(contradiction(texts))


def contradiction(texts: Sequence[str]) -> str:
    """Return the message that names statements which contradict each other."""
    if len(texts) == 1:
        return (
            f"no probabilities keep this statement: {texts[0]}. Probabilities lie between 0 and "
            "1 and those of one item, or of all classes, sum to 1; correct the statement."
        )
    listed = "; ".join(texts)
    return (
        f"these statements contradict each other: {listed}. Without any one of them the others "
        "can hold; correct one or leave one out."
    )


def _of(links: Sequence[Link], texts: Sequence[str]) -> list[Link]:
    return [link for link in links if link.text in texts]


def guilty_statements(texts: Sequence[str], feasible: Feasible) -> list[str]:
    """Leave out statements as long as the others still contradict each other."""
    kept = list(dict.fromkeys(texts))
    for text in list(kept):
        fewer = [other for other in kept if other != text]
        if not feasible(fewer):
            kept = fewer
    return kept


def _feasible(links: Sequence[Link], sizes: Mapping[Vector, int]) -> bool:
    """Whether some probabilities keep the links, the strict ones with room to spare."""
    vectors = list(dict.fromkeys(place.vector for link in links for place in link.places))
    at: dict[Place, int] = {}
    for vector in vectors:
        for category in range(sizes[vector]):
            at[Place(vector, category)] = len(at)
    program = LinearProgram(len(at))
    for vector in vectors:
        program.equal({at[Place(vector, c)]: 1.0 for c in range(sizes[vector])}, 1.0)
    for link in links:
        coefficients: dict[int, float] = {}
        constant = 0.0
        for side, factor in ((link.left, 1.0), (link.right, -1.0)):
            if isinstance(side, Place):
                coefficients[at[side]] = coefficients.get(at[side], 0.0) + factor
            else:
                constant += factor * side
        if link.sign == "=":
            program.equal(coefficients, -constant)
        else:
            program.above(coefficients, -constant, strict=link.sign == ">")
    return program.solve() is not None


class LinearProgram:
    """Look for a point in [0, 1]^n that keeps linear relations, as far inside as possible.

    Parameters
    ----------
    n : int
        Number of variables.
    """

    def __init__(self, n: int) -> None:
        self.n = n
        self._equal: list[Floats] = []
        self._equal_to: list[float] = []
        self._above: list[Floats] = []
        self._above_than: list[float] = []

    def equal(self, coefficients: Mapping[int, float], value: float) -> None:
        """Ask that a sum equals a value."""
        self._equal.append(self._row(coefficients))
        self._equal_to.append(value)

    def above(self, coefficients: Mapping[int, float], value: float, strict: bool = True) -> None:
        """Ask that a sum is above a value; when strict, by the slack that is made largest."""
        row = self._row(coefficients)
        row[-1] = -1.0 if strict else 0.0
        self._above.append(row)
        self._above_than.append(value)

    def solve(self) -> Floats | None:
        """Return the point (n,) with the largest slack; None when there is none with any."""
        from scipy.optimize import linprog

        cost = np.zeros(self.n + 1)
        cost[-1] = -1.0
        result = linprog(
            cost,
            A_ub=-np.array(self._above) if self._above else None,
            b_ub=-np.array(self._above_than) if self._above else None,
            A_eq=np.array(self._equal) if self._equal else None,
            b_eq=np.array(self._equal_to) if self._equal else None,
            bounds=[(0.0, 1.0)] * (self.n + 1),
            method="highs",
        )
        if result.status != 0 or result.x is None or result.x[-1] < LEAST_SLACK:
            return None
        return np.asarray(result.x[:-1])

    def _row(self, coefficients: Mapping[int, float]) -> Floats:
        row = np.zeros(self.n + 1)
        for variable, factor in coefficients.items():
            row[variable] = factor
        return row
