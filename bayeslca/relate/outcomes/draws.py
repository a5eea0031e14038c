"""Draws of an outcome's parameters, whichever way they were come by."""

from __future__ import annotations

from dataclasses import dataclass

from bayeslca._typing import Floats

MOST_FOR_MEMBERSHIP = 1000
"""Draws over which memberships given the outcome are averaged."""


@dataclass(frozen=True, eq=False)
class OutcomeDraws:
    """Draws of an outcome's parameters. N cases, K classes.

    Attributes
    ----------
    by_class : ndarray of float64, shape (chain, draw, K, M)
    shared : ndarray of float64, shape (chain, draw, S)
    elements : ndarray of float64, shape (chain, draw, E)
        Elements of the compiled table that go with them.
    prevalence : ndarray of float64, shape (chain, draw, G, K)
    membership : ndarray of float64, shape (N, K)
        Posterior mean of P(class | answers, outcome).
    sweeps : int
        Of each chain in the joint way; of the inner chain at each draw in the cut.
    limit_reached : bool
        True when sampling ended before its rule was met.
    seconds : float
    """

    by_class: Floats
    shared: Floats
    elements: Floats
    prevalence: Floats
    membership: Floats
    sweeps: int = 0
    limit_reached: bool = False
    seconds: float = 0.0


def flattened(drawn: OutcomeDraws, most: int) -> OutcomeDraws:
    """Return draws of all chains end to end, at most so many, without a chain axis."""
    n = drawn.by_class.shape[0] * drawn.by_class.shape[1]
    step = max(1, n // most)

    def flat(values: Floats) -> Floats:
        return values.reshape(n, *values.shape[2:])[::step]

    return OutcomeDraws(
        flat(drawn.by_class),
        flat(drawn.shared),
        flat(drawn.elements),
        flat(drawn.prevalence),
        drawn.membership,
    )
