"""Prevalence sources: where the class probabilities of each prevalence row come from.

Engines know a source only through this interface, so that a regression on covariates or a
hierarchical prior can take the place of a Dirichlet per group without touching the kernel.
"""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from scipy.special import gammaln, xlogy

from bayeslca._typing import Floats, Ints


class PrevalenceSource(Protocol):
    """What an engine may ask of a source; a prevalence row is a group (or distinct covariates)."""

    @property
    def n_rows(self) -> int:
        """Number of prevalence rows."""
        ...

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        ...

    def draw(self, rng: np.random.Generator, class_counts: Floats) -> Floats:
        """Draw prevalences (row, K) given the cases in each class (row, K)."""
        ...

    def simulate(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) from the prior."""
        ...

    def log_density(self, prevalence: Floats) -> Floats:
        """Return the normalised log prior density (...) of prevalences (..., row, K)."""
        ...

    def predict(self, prevalence: Floats, row: int) -> Floats:
        """Return the prevalences (..., K) of a new case in a prevalence row."""
        ...

    def class_key(self, row: int, latent_class: int) -> Hashable:
        """Return what must be equal for two classes of a row to be exchangeable in the prior."""
        ...

    def is_invariant(self, permutation: Ints) -> bool:
        """Tell whether the prior is unchanged by a permutation (row, K) of the classes."""
        ...

    def to_pymc(self, name: str, dims: tuple[str, ...]) -> Any:
        """Add the prevalences to the PyMC model in whose context it is called."""
        ...


@dataclass(frozen=True, eq=False)
class DirichletPrevalence:
    """A Dirichlet prior of its own for each prevalence row.

    Attributes
    ----------
    concentration : ndarray of float64, shape (row, K)
        Dirichlet parameters, all positive; 1 is uniform.
    """

    concentration: Floats

    @property
    def n_rows(self) -> int:
        """Number of prevalence rows."""
        return int(self.concentration.shape[0])

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        return int(self.concentration.shape[1])

    @property
    def density_parameter(self) -> Floats:
        """Parameters (row, K) whose product of powers is the density: the concentration."""
        return self.concentration

    def keeps_ties(self, permutation: Ints) -> bool:
        """Tell whether a permutation (row, K) keeps known and equal prevalences: none are."""
        return True

    def draw(self, rng: np.random.Generator, class_counts: Floats) -> Floats:
        """Draw prevalences (row, K) given the cases in each class (row, K)."""
        return np.stack([rng.dirichlet(a) for a in self.concentration + class_counts])

    def simulate(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) from the prior."""
        return self.draw(rng, np.zeros_like(self.concentration))

    def scatter(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) evenly over all possible ones."""
        return rng.dirichlet(np.ones(self.n_classes), size=self.n_rows)

    def log_density(self, prevalence: Floats) -> Floats:
        """Return the normalised log prior density (...) of prevalences (..., row, K)."""
        a = self.concentration
        norm = gammaln(a.sum(axis=-1)) - gammaln(a).sum(axis=-1)
        return np.asarray(np.sum(norm + xlogy(a - 1.0, prevalence).sum(axis=-1), axis=-1))

    def predict(self, prevalence: Floats, row: int) -> Floats:
        """Return the prevalences (..., K) of a new case in a prevalence row."""
        return prevalence[..., row, :]

    def class_key(self, row: int, latent_class: int) -> Hashable:
        """Return what must be equal for two classes of a row to be exchangeable in the prior."""
        return float(self.concentration[row, latent_class])

    def is_invariant(self, permutation: Ints) -> bool:
        """Tell whether the prior is unchanged by a permutation (row, K) of the classes."""
        moved = np.take_along_axis(self.concentration, np.asarray(permutation), axis=1)
        return bool(np.array_equal(moved, self.concentration))

    def to_pymc(self, name: str, dims: tuple[str, ...]) -> Any:
        """Add the prevalences to the PyMC model in whose context it is called.

        Parameters
        ----------
        name : str
            Name of the random variable.
        dims : tuple of str
            ``("latent_class",)`` or ``("group", "latent_class")``.
        """
        import pymc as pm
        import pytensor.tensor as pt

        a = self.concentration[0] if len(dims) == 1 else self.concentration
        if self.n_classes == 1:  # a simplex of one: nothing to sample
            return pm.Deterministic(name, pt.as_tensor_variable(np.ones_like(a)), dims=dims)
        return pm.Dirichlet(name, a=a, dims=dims)
