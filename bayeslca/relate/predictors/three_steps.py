"""Three steps: fit the classes, place the cases, regress on the placed class and undo its error.

The third step is maximum likelihood. Both published corrections are here; the standard errors
include that of the first step.

References
----------
Bolck, A., Croon, M. & Hagenaars, J. (2004). Estimating latent structure models with categorical
variables: one-step versus three-step estimators. Political Analysis 12, 3-27.
Vermunt, J. K. (2010). Latent class modeling with covariates: two improved three-step approaches.
Political Analysis 18, 450-469.
Bakk, Z., Oberski, D. L. & Vermunt, J. K. (2014). Relating latent class assignments to external
variables: standard errors for correct inference. Political Analysis 22, 520-540 (the sum of both
steps' variances; from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import minimize
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.relate.error_matrix import ErrorMatrix

Correction = Literal["fixed_error_likelihood", "inverse_error_matrix"]
CORRECTIONS: tuple[Correction, ...] = ("fixed_error_likelihood", "inverse_error_matrix")

TOO_LARGE = 12.0
"""A coefficient of a standardised covariate beyond this has no finite maximum in practice."""
FLAT = 1e-6
"""Information below this, per case, is none: the maximum lies at infinity."""


@dataclass(frozen=True, eq=False)
class ThreeStepRegression:
    """Coefficients of class on covariates by three steps. K classes, P columns.

    Attributes
    ----------
    coefficients : ndarray, shape (K, P)
        They sum to 0 over the classes: contrasts are what is estimated.
    covariance : ndarray, shape (K * P, K * P)
        Of both steps.
    first_step_share : float
        Share of the variances (their trace) that comes from the first step.
    correction : {"fixed_error_likelihood", "inverse_error_matrix"}
    """

    coefficients: Floats
    covariance: Floats
    first_step_share: float
    correction: Correction

    def draws(self, n: int, rng: np.random.Generator) -> Floats:
        """Draw coefficients (1, n, K, P) from the normal approximation of their sampling."""
        flat = rng.multivariate_normal(
            self.coefficients.ravel(), self.covariance, size=n, method="eigh"
        )
        return np.asarray(flat.reshape(1, n, *self.coefficients.shape))


def three_step_regression(
    design: Floats,
    errors: ErrorMatrix,
    counts: Floats | Ints,
    *,
    correction: Correction = "fixed_error_likelihood",
    redrawn: Iterator[ErrorMatrix] | None = None,
) -> ThreeStepRegression:
    """Regress the placed class on covariates and undo the error of placement.

    Parameters
    ----------
    design : ndarray, shape (n, P)
    errors : ErrorMatrix
        Of the n cases.
    counts : ndarray, shape (n,)
        Cases per row.
    correction : {"fixed_error_likelihood", "inverse_error_matrix"}
        Hold the error of placement fixed in the likelihood of the placed class (Vermunt 2010), or
        weigh each case by the inverse of the error matrix (Bolck, Croon & Hagenaars 2004).
    redrawn : iterator of ErrorMatrix, optional
        Of the same placement under draws of the first step's posterior. Left out, the first step
        is taken as known.

    Raises
    ------
    ModelError
        When the correction is unknown, or the likelihood has no maximum.

    Notes
    -----
    The first step's part of the variance is H^-1 V H^-1, with H the information of the third step
    and V the covariance of its score at the estimate over draws of the first step, which is the
    delta method without its derivative. The third step's own part is H^-1 for the fixed-error
    likelihood, and the sandwich of the cases' scores for the inverse-error weights, which are no
    likelihood.
    """
    if correction not in CORRECTIONS:
        msg = f"correction={correction!r}: known are {' and '.join(CORRECTIONS)}."
        raise ModelError(msg)
    problem = _Problem(design, np.asarray(counts, dtype=np.float64), correction)
    target = problem.target(errors)
    n_free = (target.shape[1] - 1) * design.shape[1]

    def objective(free: Floats) -> tuple[float, Floats]:
        slope = -problem.scores(free, target).sum(axis=0)
        return problem.minus_log_likelihood(free, target), slope

    found = minimize(
        objective,
        np.zeros(n_free),
        jac=True,
        method="BFGS",
        options={"maxiter": 500, "gtol": 1e-6 * problem.counts.sum()},
    )
    free: Floats = np.asarray(found.x)
    information = problem.information(free, target)
    smallest = float(np.linalg.eigvalsh(information)[0])
    if not np.all(np.abs(free) < TOO_LARGE) or smallest < FLAT * problem.counts.sum():
        why = (
            "the inverse weights, of which some are negative, leave it without one"
            if correction == "inverse_error_matrix" and np.any(target < 0)
            else "a covariate separates the classes, or would if cases were placed without error"
        )
        msg = (
            f"the third step has no finite maximum: {why}. Use the joint or the cut way, whose "
            "priors keep coefficients finite."
        )
        raise ModelError(msg)
    inverse = np.linalg.inv(information)
    own = inverse
    if correction == "inverse_error_matrix":
        scores = problem.scores(free, target)
        own = inverse @ (scores.T @ (scores / problem.counts[:, None])) @ inverse
    first = np.zeros_like(own)
    if redrawn is not None:
        totals = [problem.scores(free, problem.target(one)).sum(axis=0) for one in redrawn]
        first = inverse @ np.cov(np.asarray(totals).T).reshape(own.shape) @ inverse
    n_classes = target.shape[1]
    spread = _sum_to_zero(n_classes, design.shape[1])
    return ThreeStepRegression(
        (spread @ free).reshape(n_classes, -1),
        spread @ (own + first) @ spread.T,
        float(np.trace(first) / np.trace(own + first)),
        correction,
    )


def _sum_to_zero(n_classes: int, n_columns: int) -> Floats:
    """Return the matrix from coefficients against class 1 to ones that sum to 0."""
    free = np.vstack([np.zeros(n_classes - 1), np.eye(n_classes - 1)])
    return np.kron(free - free.mean(axis=0), np.eye(n_columns))


@dataclass(frozen=True, eq=False)
class _Problem:
    """The third step's likelihood; free coefficients (K - 1) x P are against class 1."""

    design: Floats
    counts: Floats
    correction: Correction

    def target(self, errors: ErrorMatrix) -> Floats:
        """Return what the likelihood holds fixed, (n, K): weights, or log P(placed | class)."""
        if self.correction == "inverse_error_matrix":
            return errors.inverse_weights
        return errors.log_likelihood

    def _log_shares(self, free: Floats, n_classes: int) -> Floats:
        against = free.reshape(n_classes - 1, -1)
        predictor = np.column_stack([np.zeros(len(self.design)), self.design @ against.T])
        return np.asarray(predictor - logsumexp(predictor, axis=1, keepdims=True))

    def minus_log_likelihood(self, free: Floats, target: Floats) -> float:
        log_shares = self._log_shares(free, target.shape[1])
        if self.correction == "inverse_error_matrix":
            return -float(self.counts @ (target * log_shares).sum(axis=1))
        return -float(self.counts @ logsumexp(log_shares + target, axis=1))

    def _expected(self, log_shares: Floats, target: Floats) -> Floats:
        """Return what stands where the known class stands in ordinary regression, (n, K)."""
        if self.correction == "inverse_error_matrix":
            return target
        joint = log_shares + target
        return np.asarray(np.exp(joint - logsumexp(joint, axis=1, keepdims=True)))

    def scores(self, free: Floats, target: Floats) -> Floats:
        """Return each row's score (n, free), its cases counted."""
        log_shares = self._log_shares(free, target.shape[1])
        left = (self._expected(log_shares, target) - np.exp(log_shares))[:, 1:]
        by_row = left[:, :, None] * self.design[:, None, :] * self.counts[:, None, None]
        return np.asarray(by_row.reshape(len(self.design), -1))

    def information(self, free: Floats, target: Floats) -> Floats:
        """Return minus the second derivatives of the log likelihood."""
        log_shares = self._log_shares(free, target.shape[1])
        spread = _spread(np.exp(log_shares)[:, 1:])
        if self.correction == "fixed_error_likelihood":
            spread = spread - _spread(self._expected(log_shares, target)[:, 1:])
        n_free = free.size
        summed = np.einsum("n,nab,np,nq->apbq", self.counts, spread, self.design, self.design)
        return np.asarray(summed.reshape(n_free, n_free))


def _spread(shares: Floats) -> Floats:
    """Return the covariance (n, K, K) of class indicators with these shares."""
    return np.asarray(
        np.einsum("na,ab->nab", shares, np.eye(shares.shape[1]))
        - shares[:, :, None] * shares[:, None, :]
    )
