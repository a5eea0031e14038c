"""Tables of maximum likelihood estimates: standard errors, and what lies at a boundary."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.observed_information import Covariance, Score, covariance
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.table import UnitTable

if TYPE_CHECKING:
    import pandas as pd

EDGE = 1e-5
"""An estimate so near to 0 or 1 lies there."""
TOUCHES = 1e-7
"""So does one so near to its bound, or to the one above or below it in an order."""


@dataclass(frozen=True, eq=False)
class Estimates:
    """What is shown of a solution; see `MaximumLikelihood`.

    Attributes
    ----------
    prevalence, response_probability : DataFrame
    boundary, active : tuple of str
    singular : bool
        True when the information matrix has no inverse.
    """

    prevalence: pd.DataFrame
    response_probability: pd.DataFrame
    boundary: tuple[str, ...]
    active: tuple[str, ...]
    singular: bool


def estimates(blocks: AllBlocks, units: UnitTable, elements: Floats) -> Estimates:
    """Return the tables of a solution.

    Elements at 0 or 1, on a bound or held by an order are taken as known, and the standard
    errors of all others are given these.
    """
    fixed = fixed_elements(blocks, elements)
    score = Score.of(blocks, units)
    return estimates_with(score, elements, fixed, covariance(score, elements, fixed))


def estimates_with(score: Score, elements: Floats, fixed: Bools, found: Covariance) -> Estimates:
    """Return the tables of a solution, with standard errors from a covariance of its own."""
    blocks = score.blocks
    prevalence = _prevalences(blocks, elements, fixed, found)
    probability = _response_probabilities(score, elements, fixed, found)
    return Estimates(
        prevalence=prevalence,
        response_probability=probability,
        boundary=_boundary(blocks.model, prevalence, probability),
        active=tuple(blocks.names[e] for e in np.flatnonzero(_held(blocks, elements))),
        singular=found.free is None,
    )


def fixed_elements(blocks: AllBlocks, elements: Floats) -> Bools:
    """Tell which elements (E,) are taken as known: at 0 or 1, on a bound, held by an order."""
    fixed = (elements < EDGE) | (elements > 1.0 - EDGE) | _held(blocks, elements)
    for first, last in pairwise(blocks.blocks.block_start.tolist()):
        if np.sum(~fixed[first:last]) == 1:  # what is left to 1 is known, too
            fixed[first:last] = True
    return np.asarray(fixed)


def _held(blocks: AllBlocks, elements: Floats) -> Bools:
    """Tell which elements lie on a bound of their own or are held by an order."""
    chains, out = blocks.chains, np.zeros(elements.size, dtype=bool)
    for first, last in pairwise(chains.start.tolist()):
        chain = chains.element[first:last]
        value = elements[chain]
        out[chain] = (value - chains.lower[first:last] < TOUCHES) & (chains.lower[first:last] > 0)
        out[chain] |= (chains.upper[first:last] - value < TOUCHES) & (chains.upper[first:last] < 1)
        together = np.diff(value) < TOUCHES
        out[chain[:-1]] |= together
        out[chain[1:]] |= together
    return out


def _prevalences(
    blocks: AllBlocks, elements: Floats, fixed: Bools, found: Covariance
) -> pd.DataFrame:
    import pandas as pd

    model, value = blocks.model, blocks.prevalence(elements)
    jacobian = np.zeros((value.size, elements.size))
    element, share = blocks.prevalence_element.ravel(), blocks.prevalence_share.ravel()
    free = np.flatnonzero(element >= 0)
    jacobian[free, element[free]] = share[free]
    stuck = np.zeros(value.size, dtype=bool)
    stuck[free] = fixed[element[free]]
    errors = found.standard_errors(jacobian)
    if model.n_classes == 1:  # 1 by definition, not by estimation
        stuck[:], errors[:] = False, np.nan
    keys: dict[str, Any] = {}
    if model.groups is not None:
        keys["group"] = np.repeat(model.groups.levels, model.n_classes)
    keys["latent_class"] = np.tile(model.class_names, model.n_groups)
    frame = pd.DataFrame(keys)
    return _with_errors(frame, value.ravel(), errors, stuck)


def _response_probabilities(
    score: Score, elements: Floats, fixed: Bools, found: Covariance
) -> pd.DataFrame:
    import pandas as pd

    blocks = score.blocks
    model, table = blocks.model, blocks.model.table
    value, slope = score.rows(elements)
    touched = (slope != 0.0) | _in_cell(score)
    moves = (touched & ~fixed).any(axis=1)
    stuck = touched.any(axis=1) & ~moves
    errors = found.standard_errors(slope)
    rows, at = [], []
    for k, name in enumerate(model.class_names):
        for j, item in enumerate(model.items):
            for c, category in enumerate(item.categories):
                for g in range(table.n_response_groups):
                    key = {"latent_class": name, "item": item.name, "category": category}
                    if model.groups is not None and table.n_response_groups > 1:
                        key["group"] = model.groups.levels[g]
                    rows.append(key)
                    row = int(table.response_row[g, table.item_start[j] + c])
                    at.append(row * table.n_classes + k)
    which = np.asarray(at)
    frame = pd.DataFrame(rows)
    edge = (value[which] < EDGE) | (value[which] > 1.0 - EDGE)
    edge &= touched[which].any(axis=1)  # a known probability is no estimate
    return _with_errors(frame, value[which], errors[which], stuck[which] | edge)


def _in_cell(score: Score) -> Bools:
    out = np.zeros((score.blocks.model.table.cell_start.size - 1, score.blocks.n_elements + 1))
    for column in score.cell_elements.T:
        out[score.cell_row, column] = 1.0
    return np.asarray(out[:, :-1] > 0.0)


def _with_errors(frame: pd.DataFrame, value: Floats, errors: Floats, stuck: Bools) -> pd.DataFrame:
    frame["estimate"] = value
    frame["standard_error"] = np.where(stuck, np.nan, errors)
    frame["at_boundary"] = stuck
    return frame


def _boundary(
    model: LatentClassModel, prevalence: pd.DataFrame, probability: pd.DataFrame
) -> tuple[str, ...]:
    """Name the estimates at 0 or 1, each once."""
    names = []
    for row in prevalence[prevalence["at_boundary"]].to_dict("records"):
        if row["estimate"] < EDGE or row["estimate"] > 1 - EDGE:
            group = f" | {row['group']}" if "group" in row else ""
            names.append(f"P({row['latent_class']}{group}) = {row['estimate']:.0f}")
    n_categories = {item.name: item.n_categories for item in model.items}
    last = {item.name: item.categories[-1] for item in model.items}
    for row in probability[probability["at_boundary"]].to_dict("records"):
        binary = n_categories[row["item"]] == 2
        if EDGE < row["estimate"] < 1 - EDGE or (binary and row["category"] != last[row["item"]]):
            continue
        group = f", {row['group']}" if "group" in row else ""
        event = f"{row['item']}={row['category']}"
        names.append(f"P({event} | {row['latent_class']}{group}) = {row['estimate']:.0f}")
    return tuple(names)
