"""Identifiability: whether the answers determine the parameters.

The rank of the derivatives of all observable pattern probabilities with respect to the free
parameters, at random points and, when there is one, at an estimate (Goodman 1974, Biometrika 61,
215-231; McHugh 1956, Psychometrika 21, 331-347).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import sqrt

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.pattern_derivatives import free_directions, n_other_cells, scaled_derivatives
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.simulate import Parameters
from bayeslca.model.table import Table
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.responses.units import MISSING, Units

RELATIVE_ZERO = 1e-9
"""A singular value below this share of the largest is a zero of the rank."""
UNIFORM_SD = 1 / sqrt(12)
"""Standard deviation of a uniform prior on a probability: data with a larger standard error
say less than it does."""
N_POINTS = 3
MOST_UNITS = 8
"""Of more pooled units only those with most cases are looked at."""


@dataclass(frozen=True)
class Identifiability:
    """Whether the answers determine the parameters.

    Attributes
    ----------
    n_free : int
        Free parameters: known ones left out, shared ones counted once.
    n_cells : int
        Independent observable pattern probabilities over all groups (patterns less one each).
    rank : int
        How many independent things the answers determine, at random points.
    identified : bool
        True when the rank is the number of free parameters.
    not_identified : tuple of str
        Parameters that can change without changing any observable probability.
    weak : bool or None
        True when, at the estimate, the cases say less about some combination of parameters than
        a uniform prior would (empty or twin classes); None when no estimate was given.
    weak_parameters : tuple of str
        The parameters in those combinations.
    message : str
        The same in words.
    """

    n_free: int
    n_cells: int
    rank: int
    identified: bool
    not_identified: tuple[str, ...]
    weak: bool | None
    weak_parameters: tuple[str, ...]
    message: str


def identifiability(
    table: Table,
    names: tuple[Sequence[str], Sequence[Sequence[str]]],
    *,
    units: Units | None = None,
    seed: int = 0,
    estimate: Parameters | None = None,
    source: PrevalenceSource | None = None,
) -> Identifiability:
    """Check the rank of the model at random points and at an estimate.

    Parameters
    ----------
    table : Table
    names : pair
        Names of the elements (E,) and of the prevalences (groups, K).
    units : Units, optional
        What was observed; all items are taken to be answered when left out.
    seed : int
        For the random points.
    estimate : Parameters, optional
        A posterior mean; needs ``units``.
    source : PrevalenceSource, optional
        Needed where prevalences are known or equal.
    """
    rng = np.random.default_rng(seed)
    masks = _observed_masks(table, units)
    left_out = 0
    many = table.n_prevalence_rows > MOST_UNITS and table.n_response_groups == 1
    if isinstance(source, PooledPrevalence) and many:
        # What some units determine of the classes, they determine for all; each of the others
        # adds its own prevalences, which follow from the classes.
        rows = _largest_units(table, units)
        left_out = (table.n_prevalence_rows - rows.size) * (table.n_classes - 1)
        masks = [masks[g] for g in rows]
        names = (names[0], [names[1][g] for g in rows])
        table = replace(table, response_group=table.response_group[rows])
        if estimate is not None:
            estimate = Parameters(estimate.elements, estimate.prevalence[rows])
    n_cells = sum(n_other_cells(table, mask) for group in masks for mask in group)
    free = free_directions(table, source)
    free_names = _free_names(free, names)
    n_free = free.shape[1]
    best: tuple[int, Floats] = (-1, np.zeros((0, n_free)))
    for _ in range(N_POINTS):
        point = _interior_point(table, source, rng)
        values, vectors = _decomposed(scaled_derivatives(table, masks, point, free, rng), n_free)
        rank = int(np.sum(values > RELATIVE_ZERO * values.max(initial=0.0)))
        if rank > best[0]:
            best = rank, vectors[rank:]
        if rank == n_free:
            break
    rank, null = best
    not_identified = _named(free_names, null)
    weak: bool | None = None
    weak_names: tuple[str, ...] = ()
    if estimate is not None and units is not None:
        derivatives = scaled_derivatives(table, masks, estimate, free, rng)
        values, vectors = _decomposed(derivatives, n_free)
        n_cases = units.n_cases
        small = values * sqrt(n_cases) < 1 / UNIFORM_SD
        weak, weak_names = bool(small.any()), _named(free_names, vectors[small], share=0.1)
    n_free, rank = n_free + left_out, rank + left_out
    return Identifiability(
        n_free=n_free,
        n_cells=n_cells,
        rank=rank,
        identified=rank == n_free,
        not_identified=not_identified,
        weak=weak,
        weak_parameters=weak_names,
        message=_message(n_free, n_cells, rank, not_identified, weak, weak_names),
    )


def _largest_units(table: Table, units: Units | None) -> Ints:
    """Return the pooled units with most cases, in their order."""
    n = table.n_prevalence_rows
    if units is None:
        return np.arange(MOST_UNITS)
    cases = np.bincount(units.group, weights=units.count, minlength=n)
    return np.sort(np.argsort(-cases, kind="stable")[:MOST_UNITS])


def count_free(table: Table, source: PrevalenceSource | None = None) -> int:
    """Count the free parameters: known ones left out, shared ones once."""
    return int(free_directions(table, source).shape[1])


def _observed_masks(table: Table, units: Units | None) -> list[list[Bools]]:
    """Return, per group, the largest sets of items that some case answered."""
    everything = [np.ones(table.n_items, dtype=bool)]
    if units is None:
        return [everything for _ in range(table.n_prevalence_rows)]
    out: list[list[Bools]] = []
    for g in range(table.n_prevalence_rows):
        answered = np.unique(units.pattern[units.group == g] != MISSING, axis=0)
        largest = [
            m for m in answered if not any((m <= o).all() and (m < o).any() for o in answered)
        ]
        out.append(largest)
    return out


def _free_names(
    directions: Floats, names: tuple[Sequence[str], Sequence[Sequence[str]]]
) -> tuple[str, ...]:
    everything = [*names[0], *(name for group in names[1] for name in group)]
    return tuple(everything[int(np.argmax(column))] for column in directions.T)


def _interior_point(
    table: Table, source: PrevalenceSource | None, rng: np.random.Generator
) -> Parameters:
    """Draw a point away from the edges; the rank is the same at almost all of them."""
    elements = np.ones(table.n_elements)
    for start, end in zip(table.block_start[:-1], table.block_start[1:], strict=True):
        elements[start:end] = rng.dirichlet(np.full(end - start, 3.0))
    if isinstance(source, ConstrainedPrevalence):
        free = BlockArrays.without_bounds(source.blocks, prior=5.0)
        return Parameters(elements, source.prevalence(draw_inside(free, 1, rng)[0]))
    shares = rng.dirichlet(np.full(table.n_classes, 5.0), size=table.n_prevalence_rows)
    return Parameters(elements, shares)


def _decomposed(derivatives: Floats, n_free: int) -> tuple[Floats, Floats]:
    """Return n_free singular values, falling, and their directions (n_free, n_free)."""
    padded = np.vstack([derivatives, np.zeros((n_free, n_free))])
    _, values, vectors = np.linalg.svd(padded, full_matrices=False)
    return values, vectors


def _named(names: Sequence[str], directions: Floats, share: float = 1e-6) -> tuple[str, ...]:
    """Return the names of the parameters that take part in some of the directions."""
    if not len(directions):
        return ()
    part = np.sqrt(np.sum(directions**2, axis=0))
    return tuple(name for name, p in zip(names, part, strict=True) if p > share)


def _message(
    n_free: int,
    n_cells: int,
    rank: int,
    not_identified: Sequence[str],
    weak: bool | None,
    weak_names: Sequence[str],
) -> str:
    if rank < n_free:
        counts = f"the model has {n_free} free parameters, and the answers determine {rank} "
        counts += "combinations of them"
        why = f" (there are {n_cells:,} observable pattern probabilities)"
        alike = _listed(not_identified)
        return (
            f"Not identified: {counts}{why}. The answers alone do not settle {alike}; what the "
            "posterior says of these rests on the priors."
        )
    found = f"The answers determine all {n_free} free parameters"
    if weak:
        return (
            f"{found} in principle, but weakly here: the cases say less about some combination "
            f"of {_listed(weak_names)} than a uniform prior does (an empty class, or two that "
            "are nearly the same)."
        )
    return f"{found} (up to the order of exchangeable classes)."


def _listed(names: Sequence[str], most: int = 6) -> str:
    shown = ", ".join(names[:most])
    return f"{shown} and {len(names) - most} more" if len(names) > most else shown
