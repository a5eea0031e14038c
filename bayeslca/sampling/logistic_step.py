"""Multinomial logistic prevalences as a step of the joint sweep.

References
----------
Holmes, C. C. & Held, L. (2006). Bayesian auxiliary variable models for binary and multinomial
regression. Bayesian Analysis 1, 145-168.
Polson, N. G., Scott, J. G. & Windle, J. (2013). Bayesian inference for logistic models using
Polya-Gamma latent variables. Journal of the American Statistical Association 108, 1339-1349.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.layout import Layout, Workspace

NAME = "coefficients"
"""Name of the parameter in draws; shape (K, P), a vector for each class."""


class LogisticStep:
    """Prevalences (row, K) = softmax of design (row, P) times coefficients (P, K).

    Every class has coefficients of its own, normal around 0 with the same standard deviations:
    no class is the reference, so that results do not depend on one.

    Parameters
    ----------
    design : ndarray of float64, shape (row, P)
    prior_sd : ndarray of float64, shape (P,)
    n_classes : int
    rng : numpy.random.Generator
        Draws the values to begin with, close to 0.
    """

    def __init__(
        self, design: Floats, prior_sd: Floats, n_classes: int, rng: np.random.Generator
    ) -> None:
        self.design = np.ascontiguousarray(design, dtype=np.float64)
        self.prior_sd = np.ascontiguousarray(prior_sd, dtype=np.float64)
        n_rows, n_columns = self.design.shape
        self.coefficients = 0.1 * rng.standard_normal((n_classes, n_columns)) * self.prior_sd
        self._predictor = np.empty((n_rows, n_classes))
        self._scratch = np.empty((n_columns, n_columns)), np.empty(n_columns)

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """The coefficients (K, P)."""
        return {NAME: self.coefficients}

    def prevalence(self, out: Floats) -> None:
        """Write the prevalences (row, K) of the current coefficients."""
        from bayeslca.sampling.logistic_kernel import prevalences

        prevalences(self.design, self.coefficients, self._predictor, out)

    def draw(self, class_count: Ints, prevalence: Floats, rng: np.random.Generator) -> None:
        """Draw the coefficients given the cases (row, K) in each class."""
        from bayeslca.sampling.logistic_kernel import draw_coefficients

        draw_coefficients(
            self.design,
            class_count,
            self.prior_sd,
            self.coefficients,
            self._predictor,
            prevalence,
            *self._scratch,
            rng,
        )

    def sweeps(
        self,
        layout: Layout,
        work: Workspace,
        bounds: Bounded,
        is_held: bool,
        elements: Floats,
        prevalence: Floats,
        n: int,
        rng: np.random.Generator,
    ) -> float:
        """Do n whole sweeps in compiled code; see `bayeslca.sampling.steps.WholeSweeps`."""
        from bayeslca.sampling.logistic_kernel import logistic_sweeps

        found: float = logistic_sweeps(
            layout,
            work,
            bounds,
            is_held,
            self.design,
            self.prior_sd,
            self.coefficients,
            self._predictor,
            *self._scratch,
            elements,
            prevalence,
            n,
            rng,
        )
        return found

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        self.coefficients = np.ascontiguousarray(self.coefficients[permutation])
        self._predictor = np.ascontiguousarray(self._predictor[:, permutation])

    def log_prior(self) -> float:
        """Return the log density of the current coefficients."""
        scaled = self.coefficients / self.prior_sd
        norm = np.log(self.prior_sd).sum() + 0.5 * self.prior_sd.size * np.log(2.0 * np.pi)
        return float(-0.5 * np.sum(scaled**2) - self.coefficients.shape[0] * norm)
