"""Placing cases in classes by a rule with costs: a case is placed only where that is cheap enough.

Placing a case of one class in another costs something; leaving it unassigned costs a fixed sum.
A case goes where the expected cost is lowest, and nowhere when that is above the sum: with all
costs 1, a case is placed when its most probable class has a probability of at least 1 less the sum.

References
----------
Chow, C. K. (1970), On optimum recognition error and reject tradeoff, IEEE Transactions on
Information Theory 16, 41-46 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from math import isfinite
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import ModelError, near_names
from bayeslca.model.compile import compile_units
from bayeslca.posterior.membership import group_of_row, membership_draws

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses

UNASSIGNED = "unassigned"
Costs = Mapping[str, Mapping[str, float]]
"""By the class that a case is in, what it costs to place it in each other class."""


@dataclass(frozen=True)
class PlacingRule:
    """When a case is placed in a class.

    Attributes
    ----------
    at_most : float
        A case is placed when the expected cost of that is at most this.
    costs : mapping from class to mapping from class to float
        ``costs["infected"]["free"]`` is what it costs to place an infected case among the free
        ones. What is not named costs 1; the right class costs nothing.
    """

    at_most: float = 0.2
    costs: Costs = field(default_factory=dict)

    def matrix(self, class_names: tuple[str, ...]) -> Floats:
        """Return the costs (K true, K placed).

        Raises
        ------
        ModelError
            When a cost is of no class, is no number from 0 up, or the bound is not.
        """
        if not (isfinite(self.at_most) and self.at_most >= 0):
            msg = f"at_most={self.at_most!r}: give the highest cost to accept, a number from 0 up."
            raise ModelError(msg)
        out = 1.0 - np.eye(len(class_names))
        for truth, row in self.costs.items():
            for placed, cost in row.items():
                self._check(truth, placed, cost, class_names)
                out[class_names.index(truth), class_names.index(placed)] = cost
        return out

    def _check(self, truth: str, placed: str, cost: float, names: tuple[str, ...]) -> None:
        for name in (truth, placed):
            if name not in names:
                msg = (
                    f"costs name the class {name!r}, which the model does not have"
                    f"{near_names(name, names)}. Its classes are {', '.join(names)}."
                )
                raise ModelError(msg)
        if truth == placed and cost != 0:
            msg = f"costs give {cost!r} for {truth!r} placed in {truth!r}: the right class costs 0."
            raise ModelError(msg)
        if not (isfinite(cost) and cost >= 0):
            msg = f"costs give {cost!r} for {truth!r} placed in {placed!r}: a cost is 0 or more."
            raise ModelError(msg)


def place_cases(
    posterior: Posterior,
    responses: Responses | None = None,
    *,
    at_most: float = 0.2,
    costs: Costs | None = None,
) -> pd.DataFrame:
    """Place each case in the class where that costs least, or leave it unassigned.

    Placing describes cases; it does not make class an observed variable. Where it decides about
    people or animals, the costs are for those who answer for the decision to set, local rules and
    licensed practice come first, and the model must have been checked on cases like these.

    Parameters
    ----------
    posterior : Posterior
    responses : Responses, optional
        New cases; those of the fit when left out.
    at_most : float
        Highest expected cost of placing a case; above it the case is left unassigned.
    costs : mapping from class to mapping from class to float, optional
        See `PlacingRule`; every wrong class costs 1 when left out.

    Returns
    -------
    DataFrame
        A row per case: ``case``, ``placed_in`` (a class or "unassigned"), ``expected_cost`` of the
        cheapest class (of being wrong, averaged over the posterior), and ``steady``: the share of
        posterior draws in which the rule would say the same. Cases whose answers no class allows
        are unassigned, with nan for both.

    Raises
    ------
    ModelError
        When the costs or the bound are wrong, or the responses are not of the model's items.
    """
    import pandas as pd

    names = posterior.model.class_names
    rule = PlacingRule(at_most, costs or {})
    at = posterior.responses if responses is None else responses
    placed, cost, steady = _place(posterior, at, rule.matrix(names), at_most)
    words = np.asarray([*names, UNASSIGNED], dtype=object)
    return pd.DataFrame(
        {
            "case": list(at.row_names),
            "placed_in": words[placed],
            "expected_cost": cost,
            "steady": steady,
        }
    )


def _place(
    posterior: Posterior, responses: Responses, matrix: Floats, at_most: float
) -> tuple[Ints, Floats, Floats]:
    """Return for each row the class (K: unassigned), the expected cost and how steady it is."""
    units = posterior.model.units(responses)
    at = np.where(
        units.unit_of_row >= 0,
        units.unit_of_row,
        units.n_units + group_of_row(posterior, responses),
    )
    placed = np.empty(units.n_units + posterior.model.n_groups, dtype=np.int64)
    cost, steady = np.empty(placed.size), np.empty(placed.size)
    for which, draws in _pieces(posterior, responses):
        expected = draws.mean(axis=0) @ matrix
        placed[which], possible = _cheapest(expected, at_most)
        cost[which] = np.where(possible, expected.min(axis=-1), np.nan)
        by_draw, _ = _cheapest(draws @ matrix, at_most)
        steady[which] = np.where(possible, (by_draw == placed[which]).mean(axis=0), np.nan)
    return placed[at], cost[at], steady[at]


def _pieces(posterior: Posterior, responses: Responses) -> Iterator[tuple[Ints, Floats]]:
    """Yield the memberships of units, then of each group's cases without an answer."""
    units = posterior.model.units(responses)
    yield from membership_draws(posterior, compile_units(posterior.table, units))
    draws = posterior.draws.prevalence
    prevalence = draws.reshape(-1, *draws.shape[2:])
    yield units.n_units + np.arange(prevalence.shape[1]), prevalence


def _cheapest(expected: Floats, at_most: float) -> tuple[Ints, Bools]:
    """Return the class with the lowest expected cost, K where it is too high; and if it is known.

    A cost that is above the bound by rounding alone counts as at the bound.
    """
    possible = np.asarray(np.isfinite(expected).all(axis=-1))
    safe = np.where(possible[..., None], expected, np.inf)
    lowest = safe.min(axis=-1)
    inside = lowest <= at_most + 1e-12
    return np.where(inside, safe.argmin(axis=-1), expected.shape[-1]), possible
