"""Joining estimates of log evidences and of steps between them: weighted least squares."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc

from bayeslca._typing import Floats
from bayeslca.assess.evidence.model_evidence import Estimate

LEAST_ERROR = 1e-4
"""Errors are taken to be no smaller: exact values still get a finite weight."""
VAGUE = 0.2
"""A bridge with a larger error may be left out for one step of the ladder that contradicts it."""
DISAGREEMENT = 0.01
"""Estimates disagree when so large a chi-square has at most this probability."""


@dataclass(frozen=True, eq=False)
class Joined:
    """Log evidences that agree best with all estimates.

    Attributes
    ----------
    counts : tuple of int
        Numbers of classes that some usable estimate reaches.
    value : ndarray, shape (counts,)
    covariance : ndarray, shape (counts, counts)
    chi_square, degrees : float, int
        Disagreement of the estimates, and how many there are beyond what is needed.
    left_out : tuple of str
        Estimates that were not used, and why.
    """

    counts: tuple[int, ...]
    value: Floats
    covariance: Floats
    chi_square: float
    degrees: int
    left_out: tuple[str, ...]

    @property
    def probability(self) -> float:
        """Probability of so much disagreement if all errors are right; 1 with none beyond."""
        return float(chdtrc(self.degrees, self.chi_square)) if self.degrees else 1.0

    @property
    def agrees(self) -> bool:
        """Whether the estimates agree within their errors."""
        return self.probability >= DISAGREEMENT


@dataclass(frozen=True, slots=True)
class _Equation:
    """ln Z[upper] - ln Z[lower] is the estimate; lower None for a log evidence itself."""

    upper: int
    lower: int | None
    estimate: Estimate


def join(nodes: Mapping[int, Sequence[Estimate]], steps: Mapping[int, Estimate]) -> Joined:
    """Join estimates of log evidences with those of the steps between neighbours.

    Parameters
    ----------
    nodes : mapping from int to sequence of Estimate
        By number of classes.
    steps : mapping from int to Estimate
        ``steps[K]`` is of ln Z[K + 1] - ln Z[K].

    Notes
    -----
    Estimates that are not usable are left out. Where the others disagree, the least precise
    bridge whose removal restores agreement is left out as well: with more classes than the data
    need, a bridge can miss a part of the posterior and not know it, and the ladder is at its best.
    Without others to side with it, a single step only outweighs a bridge whose error is above .2.
    """
    given = [_Equation(k, None, one) for k, several in nodes.items() for one in several]
    given += [_Equation(k + 1, k, one) for k, one in steps.items()]
    left_out = [_said(one, one.estimate.why_not) for one in given if one.estimate.why_not]
    used = [one for one in given if one.estimate.is_usable]
    found = _solved(used)
    while not found.agrees:
        better = _without_one(used, found)
        if better is None:
            break
        dropped, used, found = better
        left_out.append(_said(dropped, "it disagrees with estimates that are more precise"))
    return Joined(
        found.counts,
        found.value,
        found.covariance,
        found.chi_square,
        found.degrees,
        tuple(left_out),
    )


def _solved(used: Sequence[_Equation]) -> Joined:
    anchored = {one.upper for one in used if one.lower is None}
    links = [(one.lower, one.upper) for one in used if one.lower is not None]
    reached = set(anchored)
    while True:
        more = {b for a, b in links if a in reached} | {a for a, b in links if b in reached}
        if more <= reached:
            break
        reached |= more
    counts = tuple(sorted(reached))
    rows = [one for one in used if one.upper in reached]
    if not counts:
        return Joined((), np.zeros(0), np.zeros((0, 0)), 0.0, 0, ())
    design = np.zeros((len(rows), len(counts)))
    for i, one in enumerate(rows):
        design[i, counts.index(one.upper)] = 1.0
        if one.lower is not None:
            design[i, counts.index(one.lower)] = -1.0
    weight = 1.0 / np.array([max(one.estimate.mcse, LEAST_ERROR) for one in rows]) ** 2
    target = np.array([one.estimate.value for one in rows])
    # About the first value: log evidences are large, their differences are not.
    origin = next(one.estimate.value for one in rows if one.lower is None)
    target = target - np.array([origin if one.lower is None else 0.0 for one in rows])
    covariance: Floats = np.asarray(np.linalg.inv(design.T @ (weight[:, None] * design)))
    value: Floats = np.asarray(covariance @ (design.T @ (weight * target)))
    residual = target - design @ value
    chi_square = float(np.sum(weight * residual**2))
    return Joined(counts, value + origin, covariance, chi_square, len(rows) - len(counts), ())


def _without_one(
    used: Sequence[_Equation], now: Joined
) -> tuple[_Equation, list[_Equation], Joined] | None:
    """Leave out the least precise bridge that others can do without; None when none helps."""
    bridges = [one for one in used if one.lower is None and one.estimate.kind != "exact"]
    for one in sorted(bridges, key=lambda equation: -equation.estimate.mcse):
        rest = [other for other in used if other is not one]
        found = _solved(rest)
        enough = found.degrees > 0 or one.estimate.mcse > VAGUE
        if found.counts == now.counts and enough and found.agrees:
            return one, rest, found
    return None


def _said(one: _Equation, why: str) -> str:
    where = f"{one.upper} classes" if one.lower is None else f"{one.lower} to {one.upper} classes"
    return f"{one.estimate.kind} of {where}: {why}"
