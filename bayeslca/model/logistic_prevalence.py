"""Prevalences from covariates: multinomial logistic regression as a prevalence source."""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import softmax

from bayeslca._typing import Floats, Ints


@dataclass(frozen=True, eq=False)
class LogisticPrevalence:
    """Prevalences of a row are the softmax of its covariates times each class's coefficients.

    Coefficients of all classes are normal around 0 with the same standard deviations: the prior
    is exchangeable over the classes, and no class is the reference.

    Attributes
    ----------
    design : ndarray of float64, shape (row, P)
    prior_sd : ndarray of float64, shape (P,)
    n_classes : int
    columns : tuple of str
        Names of the P columns.
    """

    design: Floats
    prior_sd: Floats
    n_classes: int
    columns: tuple[str, ...]

    @property
    def n_rows(self) -> int:
        """Number of prevalence rows."""
        return int(self.design.shape[0])

    def prevalence(self, coefficients: Floats) -> Floats:
        """Return prevalences (..., row, K) of coefficients (..., K, P)."""
        predictor = np.einsum("np,...kp->...nk", self.design, coefficients)
        return np.asarray(softmax(predictor, axis=-1))

    def draw_coefficients(self, rng: np.random.Generator) -> Floats:
        """Draw coefficients (K, P) from the prior."""
        return np.asarray(rng.normal(0.0, self.prior_sd, size=(self.n_classes, self.prior_sd.size)))

    def simulate(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) from the prior."""
        return self.prevalence(self.draw_coefficients(rng))

    def draw(self, rng: np.random.Generator, class_counts: Floats) -> Floats:
        """Refuse: the step is `bayeslca.sampling.logistic_step.LogisticStep`, which has a state."""
        msg = "coefficients are drawn by a step of their own, not from class counts alone"
        raise NotImplementedError(msg)

    def log_density(self, prevalence: Floats) -> Floats:
        """Refuse: the prior is of coefficients; rows of prevalences depend on each other."""
        msg = "the prior is of coefficients; prevalences have no density of their own"
        raise NotImplementedError(msg)

    def predict(self, prevalence: Floats, row: int) -> Floats:
        """Return the prevalences (..., K) of a new case with the covariates of a row."""
        return prevalence[..., row, :]

    def class_key(self, row: int, latent_class: int) -> Hashable:
        """Return what must be equal for two classes to be exchangeable: nothing differs."""
        return 0

    def is_invariant(self, permutation: Ints) -> bool:
        """Tell whether the prior is unchanged by a permutation (row, K): the same in all rows."""
        return bool(np.all(np.asarray(permutation) == np.asarray(permutation)[0]))

    def to_pymc(self, name: str, dims: tuple[str, ...]) -> Any:
        """Add ``coefficients`` (latent_class, covariate) and the prevalences that follow."""
        import pymc as pm
        import pytensor.tensor as pt

        model = pm.modelcontext(None)
        model.add_coord("covariate", list(self.columns))
        coefficients = pm.Normal(
            "coefficients", 0.0, self.prior_sd[None, :], dims=("latent_class", "covariate")
        )
        predictor = pt.dot(self.design, coefficients.T)
        return pm.Deterministic(name, pt.special.softmax(predictor, axis=1), dims=dims)
