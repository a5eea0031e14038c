"""Observed information and standard errors of a maximum likelihood solution.

The gradient is written out; its derivatives are taken by complex steps, exact to the last digits
because probabilities are polynomials of the parameters.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.model.table import UnitTable

STEP = 1e-30
SINGULAR = 1e-9
"""An eigenvalue of the scaled information below this share of the largest is taken to be 0."""

Numbers = NDArray[Any]
"""Floats, or complex numbers."""


@dataclass(frozen=True, eq=False)
class Score:
    """Log likelihood by unit as a function of all elements, with its gradient."""

    blocks: AllBlocks
    units: UnitTable
    cell_elements: Ints  # (cell, most): elements of each cell, E where there are fewer
    cell_row: Ints  # (cell,): row * K + class

    @classmethod
    def of(cls, blocks: AllBlocks, units: UnitTable) -> Score:
        """Lay out the cells of a model so that all can be computed at once."""
        table = blocks.model.table
        sizes = np.diff(table.cell_element_start)
        elements = np.full((sizes.size, int(sizes.max(initial=1))), blocks.n_elements)
        elements[np.arange(elements.shape[1]) < sizes[:, None]] = table.cell_element
        row = np.repeat(np.arange(table.cell_start.size - 1), np.diff(table.cell_start))
        return cls(blocks, units, elements, row)

    def rows(self, elements: Numbers) -> tuple[Numbers, Numbers]:
        """Return P(row | class) (R * K,), and its derivatives by the elements (R * K, E)."""
        table, n = self.blocks.model.table, self.blocks.n_elements
        factor = np.append(elements, 1.0)[self.cell_elements]
        value = np.zeros(table.cell_start.size - 1, dtype=elements.dtype)
        slope = np.zeros((value.size, n + 1), dtype=elements.dtype)
        np.add.at(value, self.cell_row, table.cell_constant * factor.prod(axis=1))
        for i in range(factor.shape[1]):
            others = np.delete(factor, i, axis=1).prod(axis=1) * table.cell_constant
            np.add.at(slope, (self.cell_row, self.cell_elements[:, i]), others)
        return value, slope[:, :n]

    def by_unit(self, elements: Numbers) -> tuple[Numbers, Numbers]:
        """Return p(unit) (U,) and its derivatives by the elements (U, E)."""
        table, units, blocks = self.blocks.model.table, self.units, self.blocks
        n_classes = table.n_classes
        value, slope = self.rows(elements)
        sizes = np.diff(units.row_start)
        at = np.full((units.n_units, int(sizes.max(initial=1))), table.n_rows)
        at[np.arange(at.shape[1]) < sizes[:, None]] = units.row
        probability = np.vstack([value.reshape(-1, n_classes), np.ones((1, n_classes))])[at]
        before = np.cumprod(probability, axis=1)
        after = np.cumprod(probability[:, ::-1], axis=1)[:, ::-1]
        one = np.ones_like(probability[:, :1])
        others = np.concatenate([one, before[:, :-1]], axis=1)
        others = others * np.concatenate([after[:, 1:], one], axis=1)
        weight = np.exp(units.log_weight) if units.log_weight.size else 1.0
        given = before[:, -1] * weight  # (U, K)
        prevalence = blocks.prevalence(elements)[units.prevalence_row]
        by_row = np.zeros((units.n_units, table.n_rows + 1, n_classes), dtype=elements.dtype)
        joint = (prevalence * weight)[:, None, :] * others
        np.add.at(by_row, (np.arange(units.n_units)[:, None], at), joint)
        out = by_row[:, :-1].reshape(units.n_units, -1) @ slope
        for k in range(n_classes):
            element = blocks.prevalence_element[units.prevalence_row, k]
            known = element < 0
            share = blocks.prevalence_share[units.prevalence_row, k]
            here = np.flatnonzero(~known)
            out[here, element[here]] += share[here] * given[here, k]
        return (given * prevalence).sum(axis=1), out

    def gradient(self, elements: Numbers) -> Numbers:
        """Return the derivatives (E,) of the log likelihood."""
        value, slope = self.by_unit(elements)
        return np.asarray((self.units.count / value) @ slope)

    def information(self, elements: Floats, directions: Floats) -> Floats:
        """Return the observed information (free, free) along directions (E, free)."""
        out = np.empty((directions.shape[1],) * 2)
        for i, direction in enumerate(directions.T):
            moved = self.gradient(elements + 1j * STEP * direction)
            out[i] = -(moved.imag / STEP) @ directions
        return np.asarray((out + out.T) / 2.0)


@dataclass(frozen=True, eq=False)
class Covariance:
    """Covariance of the estimates.

    Attributes
    ----------
    directions : ndarray, shape (E, free)
        In which interior elements can move.
    free : ndarray, shape (free, free) or None
        Covariance along them; None when the information is singular.
    """

    directions: Floats
    free: Floats | None

    def standard_errors(self, jacobian: Floats) -> Floats:
        """Return the standard errors (n,) of quantities with a jacobian (n, E)."""
        if self.free is None:
            return np.full(len(jacobian), np.nan)
        at = jacobian @ self.directions
        variance = np.einsum("ni,ij,nj->n", at, self.free, at)
        return np.asarray(np.sqrt(np.maximum(variance, 0.0)))


def interior_directions(blocks: AllBlocks, elements: Floats, fixed: Bools) -> Floats:
    """Return the directions (E, free) in which elements not held fixed can move.

    In each block the largest of these elements takes up the difference.
    """
    columns = []
    for b in blocks.used:
        inside = np.arange(blocks.blocks.block_start[b], blocks.blocks.block_start[b + 1])
        inside = inside[~fixed[inside]]
        if inside.size < 2:
            continue
        reference = inside[np.argmax(elements[inside])]
        for e in inside[inside != reference]:
            column = np.zeros(blocks.n_elements)
            column[e], column[reference] = 1.0, -1.0
            columns.append(column)
    return np.stack(columns, axis=1) if columns else np.zeros((blocks.n_elements, 0))


def covariance(score: Score, elements: Floats, fixed: Bools) -> Covariance:
    """Return the covariance of the estimates, with some elements held fixed."""
    directions = interior_directions(score.blocks, elements, fixed)
    information = score.information(elements, directions)
    diagonal = np.diag(information)
    if not diagonal.size:
        return Covariance(directions, np.zeros((0, 0)))
    if np.any(diagonal <= 0.0) or not np.all(np.isfinite(information)):
        return Covariance(directions, None)
    scale = 1.0 / np.sqrt(diagonal)
    values, vectors = np.linalg.eigh(information * scale[:, None] * scale)
    if values[0] < SINGULAR * values[-1]:
        return Covariance(directions, None)
    inverse = (vectors / values) @ vectors.T
    return Covariance(directions, np.asarray(inverse * scale[:, None] * scale))
