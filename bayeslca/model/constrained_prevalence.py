"""Prevalences that are known, equal, bounded or ordered.

Each prevalence is a share of an element of a Dirichlet block (or a known value), as response
probabilities are; bounds and orders are between elements.
"""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.blocks import BlockArrays, inside_blocks, log_block_densities
from bayeslca.model.bounds_probability import log_bounds_probability
from bayeslca.model.truncated_prior import draw_inside

ROUNDING = 1e-9
"""Prevalences that should be equal, or known, may differ by so much."""


@dataclass(frozen=True, eq=False)
class ConstrainedPrevalence:
    """A prior of prevalences under constraints.

    Attributes
    ----------
    concentration : ndarray of float64, shape (row, K)
        The stated Dirichlet parameters, constraints aside.
    element : ndarray of int64, shape (row, K)
        Element that each prevalence is a share of; -1 where it is known.
    share : ndarray of float64, shape (row, K)
        The share; the prevalence itself where it is known.
    blocks : BlockArrays
        Blocks of elements with their parameters, bounds and orders.
    """

    concentration: Floats
    element: Ints
    share: Floats
    blocks: BlockArrays

    @property
    def n_rows(self) -> int:
        """Number of prevalence rows."""
        return int(self.concentration.shape[0])

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        return int(self.concentration.shape[1])

    @property
    def n_free(self) -> int:
        """Number of free parameters."""
        return int(self.blocks.element_prior.size - (self.blocks.block_start.size - 1))

    @cached_property
    def first_place(self) -> Ints:
        """Row and class of the first prevalence that each element makes, shape (E, 2)."""
        out = np.zeros((self.blocks.element_prior.size, 2), dtype=np.int64)
        for g, k in reversed(list(np.ndindex(*self.element.shape))):
            if self.element[g, k] >= 0:
                out[self.element[g, k]] = g, k
        return out

    @cached_property
    def density_parameter(self) -> Floats:
        """Parameters (row, K) whose product of powers is the density, each element once."""
        out = np.ones_like(self.concentration)
        rows, classes = self.first_place.T
        out[rows, classes] = self.blocks.element_prior
        return out

    def elements(self, prevalence: Floats) -> Floats:
        """Return the elements (..., E) that make prevalences (..., row, K)."""
        rows, classes = self.first_place.T
        return np.asarray(prevalence[..., rows, classes] / self.share[rows, classes])

    def prevalence(self, elements: Floats) -> Floats:
        """Return the prevalences (..., row, K) that elements (..., E) make."""
        with_one = np.concatenate([elements, np.ones((*elements.shape[:-1], 1))], axis=-1)
        return np.asarray(with_one[..., self.element] * self.share)

    def is_inside(self, prevalence: Floats) -> Bools:
        """Tell which prevalences (..., row, K) keep all constraints."""
        elements = self.elements(prevalence)
        tied = np.abs(self.prevalence(elements) - prevalence) <= ROUNDING
        return np.asarray(tied.all(axis=(-1, -2)) & inside_blocks(self.blocks, elements))

    def draw(self, rng: np.random.Generator, class_counts: Floats) -> Floats:
        """Draw prevalences (row, K) given the cases in each class (row, K), from scratch."""
        counts = np.zeros(self.blocks.element_prior.size)
        known = self.element < 0
        np.add.at(counts, self.element[~known], np.asarray(class_counts)[~known])
        prior = self.blocks.element_prior + counts
        return self.prevalence(draw_inside(self.blocks.with_prior(prior), 1, rng)[0])

    def simulate(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) from the prior."""
        return self.prevalence(draw_inside(self.blocks, 1, rng)[0])

    def log_density(self, prevalence: Floats) -> Floats:
        """Return the normalised log prior density (...) of prevalences (..., row, K)."""
        total = log_block_densities(self.blocks, self.elements(prevalence)).sum(axis=-1)
        total = total - log_bounds_probability(self.blocks).value
        return np.asarray(np.where(self.is_inside(prevalence), total, -np.inf))

    def predict(self, prevalence: Floats, row: int) -> Floats:
        """Return the prevalences (..., K) of a new case in a prevalence row."""
        return prevalence[..., row, :]

    def class_key(self, row: int, latent_class: int) -> Hashable:
        """Return what must be equal for two classes of a row to be exchangeable in the prior."""
        element, share = int(self.element[row, latent_class]), float(self.share[row, latent_class])
        if element < 0:
            return share
        b = self.blocks
        return (
            share,
            float(b.element_prior[element]),
            float(b.element_lower[element]),
            float(b.element_upper[element]),
            int(np.sum(b.order_above == element)),
            int(np.sum(b.order_below == element)),
        )

    def is_invariant(self, permutation: Ints) -> bool:
        """Tell whether the prior is unchanged by a permutation (row, K) of the classes."""
        mapped = self.element_map(permutation)
        if mapped is None:
            return False
        b = self.blocks
        orders = set(zip(b.order_above.tolist(), b.order_below.tolist(), strict=True))
        moved = {(int(mapped[a]), int(mapped[c])) for a, c in orders}
        same = (np.array_equal(x[mapped], x) for x in (b.element_prior, b.element_lower))
        return (
            all(same)
            and np.array_equal(b.element_upper[mapped], b.element_upper)
            and (moved == orders)
        )

    def keeps_ties(self, permutation: Ints) -> bool:
        """Tell whether a permutation (row, K) keeps known and equal prevalences."""
        return self.element_map(permutation) is not None

    def element_map(self, permutation: Ints) -> Ints | None:
        """Return where each element comes from; None when known or equal ones would change."""
        element = np.take_along_axis(self.element, np.asarray(permutation), axis=1)
        share = np.take_along_axis(self.share, np.asarray(permutation), axis=1)
        if not np.array_equal(share, self.share):
            return None
        mapped = np.full(self.blocks.element_prior.size, -1, dtype=np.int64)
        mapped[self.element[self.element >= 0]] = element[self.element >= 0]
        same = np.append(mapped, -1)[self.element]
        return mapped if np.array_equal(same, element) else None

    def scatter(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) evenly over what the constraints allow."""
        even = np.ones_like(self.blocks.element_prior)
        return self.prevalence(draw_inside(self.blocks.with_prior(even), 1, rng)[0])

    def to_pymc(self, name: str, dims: tuple[str, ...]) -> Any:
        """Add the prevalences to the PyMC model in whose context it is called.

        Raises
        ------
        ModelError
            Where the constraints have no form on the real line.
        """
        from bayeslca.model.pymc.prevalence import add_constrained_prevalence

        return add_constrained_prevalence(self, name, dims)
