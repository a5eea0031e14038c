"""All free parameters of a model as one list of blocks, and what they are given the classes.

Given which case is in which class, unbounded blocks are independent Dirichlets: their parameters
are the prior's plus counts. Classes are drawn afresh from kept draws, in plain NumPy: what is
computed from them does not lean on the sampling kernel.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.sparse import csr_array
from scipy.special import gammaln

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import Table, UnitTable

Source = DirichletPrevalence | ConstrainedPrevalence
SMALLEST = 1e-300
"""No drawn probability is smaller: its logarithm stays finite."""


@dataclass(frozen=True, eq=False)
class FreeParameters:
    """The elements of a model's blocks: E of the table, then those of the prevalences.

    Attributes
    ----------
    table : Table
    source : DirichletPrevalence or ConstrainedPrevalence
    """

    table: Table
    source: Source

    @cached_property
    def block_start(self) -> Ints:
        """Where each block starts, shape (B + 1,)."""
        if isinstance(self.source, ConstrainedPrevalence):
            theirs = self.source.blocks.block_start
        else:
            theirs = np.arange(self.source.n_rows + 1) * self.source.n_classes
        return np.concatenate([self.table.block_start[:-1], self.table.n_elements + theirs])

    @cached_property
    def prior(self) -> Floats:
        """Dirichlet parameter of every element, shape (F,)."""
        if isinstance(self.source, ConstrainedPrevalence):
            theirs = self.source.blocks.element_prior
        else:
            theirs = self.source.concentration.ravel()
        return np.concatenate([self.table.element_prior, theirs])

    @property
    def is_bounded(self) -> bool:
        """True when a bound or an order holds anywhere."""
        if self.table.is_bounded:
            return True
        if not isinstance(self.source, ConstrainedPrevalence):
            return False
        b = self.source.blocks
        return bool(np.any(b.element_lower > 0) or np.any(b.element_upper < 1)) or bool(
            b.order_above.size
        )

    def joined(self, elements: Floats, prevalence: Floats) -> Floats:
        """Lay elements (..., E) and prevalences (..., row, K) end to end, (..., F)."""
        if isinstance(self.source, ConstrainedPrevalence):
            theirs = self.source.elements(prevalence)
        else:
            theirs = prevalence.reshape(*prevalence.shape[:-2], -1)
        return np.concatenate([elements, theirs], axis=-1)

    def apart(self, values: Floats) -> tuple[Floats, Floats]:
        """Turn parameters (..., F) into elements (..., E) and prevalences (..., row, K)."""
        n = self.table.n_elements
        theirs = values[..., n:]
        if isinstance(self.source, ConstrainedPrevalence):
            return values[..., :n], self.source.prevalence(theirs)
        shape = (*values.shape[:-1], self.source.n_rows, self.source.n_classes)
        return values[..., :n], theirs.reshape(shape)

    def moved_by(self, permutation: Ints) -> Ints:
        """Return where each parameter comes from, (F,), under a permutation (row, K)."""
        if isinstance(self.source, ConstrainedPrevalence):
            theirs = self.source.element_map(permutation)
            if theirs is None:
                msg = "the permutation changes prevalences that are known or equal"
                raise ModelError(msg)
        else:
            starts = np.arange(self.source.n_rows)[:, None] * self.source.n_classes
            theirs = (starts + np.asarray(permutation)).ravel()
        ours = element_map(self.table, permutation)
        return np.concatenate([ours, self.table.n_elements + theirs])

    def log_norms(self, parameters: Floats) -> Floats:
        """Return the log normalising constant (...) of Dirichlets with parameters (..., F)."""
        sums = np.add.reduceat(parameters, self.block_start[:-1], axis=-1)
        return np.asarray(gammaln(sums).sum(axis=-1) - gammaln(parameters).sum(axis=-1))

    def draw(self, parameters: Floats, rng: np.random.Generator) -> Floats:
        """Draw (..., F) from Dirichlets with parameters (..., F)."""
        # In logs, G(a) = G(a + 1) U^(1/a): gammas of small parameters underflow.
        logs = np.log(rng.standard_gamma(parameters + 1.0))
        logs += np.log1p(-rng.random(parameters.shape)) / parameters
        starts, sizes = self.block_start[:-1], np.diff(self.block_start)
        logs -= np.repeat(np.maximum.reduceat(logs, starts, axis=-1), sizes, axis=-1)
        gammas = np.exp(logs)
        gammas /= np.repeat(np.add.reduceat(gammas, starts, axis=-1), sizes, axis=-1)
        return np.maximum(gammas, SMALLEST)


def conditional_parameters(
    free: FreeParameters,
    units: UnitTable,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> Floats:
    """Draw every case's class given parameters, and return the Dirichlets given the classes.

    Parameters
    ----------
    free : FreeParameters
    units : UnitTable
    elements : ndarray, shape (S, E)
    prevalence : ndarray, shape (S, row, K)
    rng : numpy.random.Generator

    Returns
    -------
    ndarray, shape (S, F)
        Prior parameters plus counts.
    """
    table = free.table
    n_rows, n_classes = table.n_rows, table.n_classes
    holds = csr_array(
        (np.ones(units.row.size), units.row, units.row_start), shape=(units.n_units, n_rows)
    )
    out = np.tile(free.prior, (elements.shape[0], 1))
    rows, classes = np.nonzero(table.direct_element >= 0)
    in_element = _indicator(table.direct_element[rows, classes], table.n_elements)
    in_prevalence_row = _indicator(units.prevalence_row, free.source.n_rows)
    for draws, joint in log_joint(table, units, elements, prevalence):
        size = joint.shape[2]
        shares = class_shares(joint).transpose(2, 1, 0)
        numbers = rng.multinomial(units.count, shares).astype(np.float64)  # (s, U, K)
        by_unit = numbers.transpose(1, 0, 2).reshape(units.n_units, -1)
        by_row = np.asarray(holds.T @ by_unit).reshape(n_rows, size, n_classes)
        counts = np.zeros((size, free.prior.size))
        counts[:, : table.n_elements] = (in_element @ by_row[rows, :, classes]).T
        _add_cells(table, elements[draws], by_row, counts, rng)
        by_class = np.asarray(in_prevalence_row @ by_unit).reshape(-1, size, n_classes)
        _add_classes(free, by_class.transpose(1, 0, 2), counts)
        out[draws] += counts
    return out


def log_evidence_of_one_class(free: FreeParameters, units: UnitTable) -> float | None:
    """Return the exact log evidence where the class of every case is known and cells are single.

    None where it has no closed form: two classes or more, bounds, answers that are sums of cells
    (one answer of a set that is answered together).
    """
    table = free.table
    if table.n_classes > 1 or free.is_bounded:
        return None
    if np.any(np.diff(table.cell_start)[np.unique(units.row)] > 1):
        return None
    total = 0.0
    counts = np.zeros_like(free.prior)
    cases_of_row = np.zeros(table.n_rows)
    np.add.at(cases_of_row, units.row, np.repeat(units.count, np.diff(units.row_start)))
    for row in np.flatnonzero(cases_of_row):
        cells = table.cells(int(row), 0)
        if not cells:
            return None
        constant, elements = cells[0]
        total += float(cases_of_row[row]) * float(np.log(constant))
        for element in elements:
            counts[element] += cases_of_row[row]
    if units.log_weight.size:
        total += float(units.count @ units.log_weight[:, 0])
    posterior = free.prior + counts
    return total + float(free.log_norms(free.prior) - free.log_norms(posterior))


def _indicator(of: Ints, n: int) -> csr_array:
    """Return the sparse matrix (n, len(of)) that adds up what belongs together."""
    size = len(of)
    return csr_array((np.ones(size), (np.asarray(of), np.arange(size))), shape=(n, size))


def _add_cells(
    table: Table, elements: Floats, by_row: Floats, counts: Floats, rng: np.random.Generator
) -> None:
    """Split the counts of rows that are not one element alone over their cells."""
    for r, k in np.argwhere(table.direct_element < 0):
        cells = table.cells(int(r), int(k))
        if not cells:
            continue
        weight = np.stack(
            [c * np.prod(elements[:, list(e)], axis=1) for c, e in cells], axis=1
        )  # (s, cells)
        total = weight.sum(axis=1, keepdims=True)
        share = np.where(total > 0, weight / np.where(total > 0, total, 1.0), 1.0 / len(cells))
        numbers = rng.multinomial(by_row[r, :, k].astype(np.int64), share)
        for cell, (_, multiplied) in enumerate(cells):
            for element in multiplied:
                counts[:, element] += numbers[:, cell]


def _add_classes(free: FreeParameters, by_class: Floats, counts: Floats) -> None:
    """Add the cases of each prevalence row and class, (s, row, K), to their elements."""
    n = free.table.n_elements
    source = free.source
    if not isinstance(source, ConstrainedPrevalence):
        counts[:, n:] += by_class.reshape(by_class.shape[0], -1)
        return
    for g, k in np.argwhere(source.element >= 0):
        counts[:, n + source.element[g, k]] += by_class[:, g, k]
