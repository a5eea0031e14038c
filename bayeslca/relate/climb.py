"""Newton's method for small smooth functions, with derivatives by differences."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayeslca._typing import Floats

STEP, CURVE_STEP = 1e-5, 1e-4
MOST_ROUNDS, NEWTON_ROUNDS = 200, 4
FURTHEST_MOVE, SHORTEST = 3.0, 1e-6
ENOUGH = 1e-7
"""A round that promises less than this many nats ends the climb."""
NOT_DEFINITE = -1e-4
"""A scaled curvature below this is one of a saddle, not rounding."""
FLAT = 1e-7
"""A scaled curvature below this share of the largest is taken to be 0: nothing moves that way."""

ByCase = Callable[[Floats], Floats]
"""What each case (N,) adds to a function of free numbers (P,)."""


@dataclass(frozen=True, eq=False)
class Top:
    """Where a climb ended.

    Attributes
    ----------
    free : ndarray, shape (P,)
    curvature : ndarray, shape (P, P)
        Minus the second derivatives of the sum over cases.
    is_definite : bool
        False at a saddle: no maximum.
    """

    free: Floats
    curvature: Floats
    is_definite: bool

    def inverse(self) -> Floats:
        """Return the inverse of the curvature, 0 in directions in which nothing moves."""
        scale, values, vectors = _scaled(self.curvature)
        kept = values > FLAT * max(float(values.max(initial=0.0)), 1e-300)
        middle = np.where(kept, 1.0 / np.where(kept, values, 1.0), 0.0)
        return np.asarray(((vectors * middle) @ vectors.T) * scale[:, None] * scale)


def _scaled(curvature: Floats) -> tuple[Floats, Floats, Floats]:
    diagonal = np.abs(np.diag(curvature))
    scale = 1.0 / np.sqrt(np.maximum(diagonal, 1e-8 * max(float(diagonal.max(initial=0)), 1e-8)))
    values, vectors = np.linalg.eigh(curvature * scale[:, None] * scale)
    return scale, values, vectors


def scores(by_case: ByCase, free: Floats) -> Floats:
    """Return the derivatives (N, P) of what each case adds."""
    columns = []
    for j in range(free.size):
        move = np.zeros(free.size)
        move[j] = STEP * (1.0 + abs(free[j]))
        columns.append((by_case(free + move) - by_case(free - move)) / (2.0 * move[j]))
    return np.stack(columns, axis=1)


def curvature(by_case: ByCase, free: Floats) -> Floats:
    """Return minus the second derivatives (P, P) of the sum."""
    rows = []
    for j in range(free.size):
        move = np.zeros(free.size)
        move[j] = CURVE_STEP * (1.0 + abs(free[j]))
        above, below = scores(by_case, free + move), scores(by_case, free - move)
        rows.append(-(above.sum(axis=0) - below.sum(axis=0)) / (2.0 * move[j]))
    out = np.stack(rows)
    return np.asarray((out + out.T) / 2.0)


def climb(by_case: ByCase, start: Floats) -> Top:
    """Climb to a maximum of the sum over cases.

    By BFGS, begun with the curvature at the start, and ended with Newton's steps. Directions in
    which the function curves upwards are climbed too, so that a climb that ends at a saddle has
    found no maximum near its start.
    """
    from scipy.optimize import minimize

    free = np.array(start, dtype=np.float64)
    begun = _upright_inverse(curvature(by_case, free))
    search: Any = minimize  # its stubs know no hess_inv0
    options = {"hess_inv0": begun, "gtol": 1e-5, "maxiter": MOST_ROUNDS}
    found = search(
        lambda x: -float(by_case(x).sum()),
        free,
        jac=lambda x: -scores(by_case, x).sum(axis=0),
        method="BFGS",
        options=options,
    )
    free = np.asarray(found.x, dtype=np.float64)
    value = float(by_case(free).sum())
    curved = curvature(by_case, free)
    for _ in range(NEWTON_ROUNDS):
        slope = scores(by_case, free).sum(axis=0)
        move = _upright_inverse(curved) @ slope
        if float(slope @ move) < ENOUGH:
            break
        move *= min(1.0, FURTHEST_MOVE / max(float(np.abs(move).max()), 1e-300))
        share = 1.0
        while share > SHORTEST:
            tried = float(by_case(free + share * move).sum())
            if tried > value:
                break
            share /= 2.0
        else:
            break
        free, value = free + share * move, tried
        curved = curvature(by_case, free)
    return Top(free, curved, bool(_scaled(curved)[1].min(initial=0.0) > NOT_DEFINITE))


def _upright_inverse(curved: Floats) -> Floats:
    """Return the inverse of a curvature, all its directions made to curve downwards."""
    scale, values, vectors = _scaled(curved)
    size = np.maximum(np.abs(values), 1e-4 * max(float(np.abs(values).max(initial=0.0)), 1e-300))
    out = ((vectors / size) @ vectors.T) * scale[:, None] * scale
    return np.asarray((out + out.T) / 2.0)


def derivatives(function: Callable[[Floats], Floats], free: Floats) -> Floats:
    """Return the derivatives (Q, P) of some quantities (Q,) of free numbers."""
    return np.asarray(scores(function, free))
