"""Three steps: place the cases, relate the placed class to the outcome, undo the error of placing.

Step one is the measurement model without the outcome. Two published corrections: weights from the
inverse of the classification-error matrix (some of them negative), and the likelihood of the
outcome and the placed class with the error matrix held fixed. Standard errors add to those of step
three (a sandwich) the variance of the estimate over draws of step one's posterior.

References
----------
Bolck, A., Croon, M. & Hagenaars, J. (2004). Political Analysis 12, 3-27.
Vermunt, J. K. (2010). Political Analysis 18, 450-469.
Bakk, Z. & Vermunt, J. K. (2016). Robustness of stepwise latent class modeling with continuous
distal outcomes. Structural Equation Modeling 23, 20-31.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.relate.climb import ByCase, Top, climb, derivatives, scores
from bayeslca.relate.error_matrix import ErrorMatrix, Placement, error_matrix
from bayeslca.relate.outcomes.free import FreeNumbers
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    LOG_NEGATIVE_BINOMIAL,
    LOG_POISSON,
    LOGISTIC,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
)

Correction = Literal["inverse_error_matrix", "fixed_error_likelihood"]
CORRECTIONS: tuple[Correction, ...] = ("inverse_error_matrix", "fixed_error_likelihood")
FURTHEST_STEP = 2.0
FIRST_STEP_DRAWS = 40
"""Draws of step one over which step three is done again."""
CHORDS = 3
"""Newton steps of each, with the curvature of the estimate itself."""


@dataclass(frozen=True, eq=False)
class ThreeSteps:
    """Estimates of a three-step analysis.

    Attributes
    ----------
    correction : {"inverse_error_matrix", "fixed_error_likelihood"}
    model : OutcomeModel
        With the inverse error matrix one variance for all classes, and Poisson counts: standard
        errors do not rest on either.
    free : ndarray, shape (P,)
        Estimates of the outcome's parameters as free numbers.
    covariance : ndarray, shape (P, P)
        Of step three and step one together.
    of_third_step : ndarray, shape (P, P)
        Of step three alone.
    """

    correction: Correction
    model: OutcomeModel
    free: Floats
    covariance: Floats
    of_third_step: Floats

    @property
    def parameters(self) -> tuple[Floats, Floats]:
        """Estimates by class (K, M) and shared (S,)."""
        return FreeNumbers(self.model).parameters(self.free)

    def quantities(
        self, function: Callable[[OutcomeModel, Floats, Floats], Floats]
    ) -> tuple[Floats, Floats]:
        """Return quantities (Q,) of model and parameters, and their standard errors (Q,)."""
        numbers = FreeNumbers(self.model)

        def of_free(free: Floats) -> Floats:
            return np.asarray(function(self.model, *numbers.parameters(free)))

        slope = derivatives(of_free, self.free)
        variance = np.einsum("qi,ij,qj->q", slope, self.covariance, slope)
        return of_free(self.free), np.sqrt(np.maximum(variance, 0.0))


def three_steps(
    model: OutcomeModel,
    membership: Floats,
    *,
    correction: Correction,
    class_names: Sequence[str],
    membership_draws: Floats | None = None,
    by: Placement = "modal",
    group: Ints | None = None,
) -> ThreeSteps:
    """Relate an outcome to class in three steps.

    Parameters
    ----------
    model : OutcomeModel
    membership : ndarray, shape (N, K)
        P(class | answers) of step one.
    correction : {"inverse_error_matrix", "fixed_error_likelihood"}
    class_names : sequence of str
    membership_draws : ndarray, shape (draw, N, K), optional
        The same at draws of step one; standard errors are of step three alone when left out.
    by : {"modal", "proportional"}
        How cases are placed.
    group : ndarray of int, shape (N,), optional
        Groups whose prevalences differ.

    Raises
    ------
    ModelError
        When the correction has no estimate: the error matrix cannot be inverted, or negative
        weights leave no maximum.
    """
    if correction not in CORRECTIONS:
        msg = f"there is no correction {correction!r}; take one of {', '.join(CORRECTIONS)}."
        raise ModelError(msg)
    if correction == "inverse_error_matrix":
        model = _robust(model)
    placed = error_matrix(membership, by=by, group=group)
    objective = _Objective(model, correction)
    start = objective.start(placed, class_names)
    by_case = objective.by_case(placed)
    top = climb(by_case, start)
    if not top.is_definite:
        raise ModelError(_no_maximum(correction))
    inverse = top.inverse()
    per_case = scores(by_case, top.free)
    third = inverse @ (per_case.T @ per_case) @ inverse
    first = np.zeros_like(third)
    if membership_draws is not None:
        first = _between_draws(objective, top, inverse, membership_draws, by, group)
    n = objective.numbers.size
    whole = (third + first)[:n, :n]
    return ThreeSteps(correction, model, top.free[:n], whole, third[:n, :n])


def _robust(model: OutcomeModel) -> OutcomeModel:
    """Leave out what negative weights cannot estimate: variances and sizes of single classes."""
    forms = {NEGATIVE_BINOMIAL: POISSON, LOG_NEGATIVE_BINOMIAL: LOG_POISSON}
    return replace(model, form=forms.get(model.form, model.form), equal_spread=True)


def _no_maximum(correction: Correction) -> str:
    if correction == "inverse_error_matrix":
        return (
            "the inverse error matrix gives negative weights, with which the information is not "
            "positive definite: there is no estimate. Use the fixed error likelihood, the cut or "
            "the joint way."
        )
    return "the fixed error likelihood has no maximum here. Use the cut or the joint way."


def _between_draws(
    objective: _Objective,
    top: Top,
    inverse: Floats,
    membership_draws: Floats,
    by: Placement,
    group: Ints | None,
) -> Floats:
    """Return the covariance of the estimate over draws of step one."""
    found = []
    for membership in membership_draws:
        try:
            by_case = objective.by_case(error_matrix(membership, by=by, group=group))
        except ModelError:  # a draw whose matrix cannot be inverted has no estimate
            continue
        free = top.free
        for _ in range(CHORDS):
            move = inverse @ scores(by_case, free).sum(axis=0)
            free = free + move * min(1.0, FURTHEST_STEP / max(float(np.abs(move).max()), 1e-300))
        found.append(free)
    if len(found) < 2:
        return np.zeros_like(inverse)
    return np.atleast_2d(np.cov(np.stack(found), rowvar=False))


class _Objective:
    """What is maximised in step three, as a function of free numbers."""

    def __init__(self, model: OutcomeModel, correction: Correction) -> None:
        self.model, self.correction = model, correction
        self.numbers = FreeNumbers(model)
        self.data = model.data()

    def density(self, free: Floats) -> Floats:
        """Return the log density (N, K) of each case's outcome in each class."""
        from bayeslca.sampling.outcome_density import fill_log_density

        by_class, shared = self.numbers.parameters(free)
        out = np.empty((self.model.value.size, self.model.n_classes))
        fill_log_density(self.data, np.ascontiguousarray(by_class), shared, out)
        return out

    def by_case(self, placed: ErrorMatrix) -> ByCase:
        """Return what each case adds."""
        if self.correction == "inverse_error_matrix":
            weights = placed.inverse_weights

            def weighted(free: Floats) -> Floats:
                return np.asarray((weights * self.density(free)).sum(axis=1))

            return weighted
        group = placed.group
        n_groups, n_classes = placed.class_share.shape
        n_shares = n_groups * (n_classes - 1)

        def likelihood(free: Floats) -> Floats:
            logits = free[free.size - n_shares :].reshape(n_groups, n_classes - 1)
            whole = np.concatenate([np.zeros((n_groups, 1)), logits], axis=1)
            log_share = whole - _log_sum(whole)[:, None]
            outcome = self.density(free[: free.size - n_shares])
            return placed.mean_log_mixture(log_share[group] + outcome)

        return likelihood

    def start(self, placed: ErrorMatrix, class_names: Sequence[str]) -> Floats:
        """Return where the climb starts: weighted moments of each class."""
        is_inverse = self.correction == "inverse_error_matrix"
        weights = placed.inverse_weights if is_inverse else placed.placed
        free = self.numbers.free(*_moments(self.model, weights, class_names, is_inverse))
        if is_inverse:
            return free
        share = np.maximum(placed.class_share, 1e-6)
        return np.concatenate([free, np.log(share[:, 1:] / share[:, :1]).ravel()])


def _log_sum(values: Floats) -> Floats:
    """Return the log of the sums of exponentials along the last axis."""
    highest = values.max(axis=-1)
    return np.asarray(highest + np.log(np.exp(values - highest[..., None]).sum(axis=-1)))


def _moments(
    model: OutcomeModel, weights: Floats, class_names: Sequence[str], is_inverse: bool
) -> tuple[Floats, Floats]:
    """Return parameters from each class's weighted moments.

    Raises
    ------
    ModelError
        When negative weights make a share, a mean of counts or a variance impossible.
    """
    seen = model.seen
    w, y = weights[seen], model.value[seen]
    total = w.sum(axis=0)
    if np.any(total <= 0.0):
        name = class_names[int(np.argmin(total))]
        msg = f"class {name} holds no case with an outcome once the error of placing is undone."
        raise ModelError(msg + " Use the cut or the joint way.")
    mean = (w * y[:, None]).sum(axis=0) / total
    variance = (w * (y[:, None] - mean) ** 2).sum(axis=0) / total
    by_class = np.empty((model.n_classes, model.columns))
    shared = np.concatenate([np.zeros(model.n_slopes), model.prior.threshold])
    overall = max(float(y.var()), 1e-12)
    if model.form == CATEGORICAL:
        counts = np.stack([w[y == j].sum(axis=0) for j in range(model.n_levels)], axis=1)
        share = counts / total[:, None]
        _refuse(is_inverse & (share < -1e-12), "share of a category", class_names)
        by_class[:] = np.maximum(share, 1e-6) / np.maximum(share, 1e-6).sum(axis=1, keepdims=True)
        return by_class, shared
    if model.form == CUMULATIVE:
        by_class[:, 0] = 0.0
        return by_class, shared
    if model.form == NORMAL:
        if model.equal_spread:
            variance = np.full_like(variance, total @ variance / total.sum())
        _refuse(is_inverse & (variance <= 0.0), "variance", class_names)
        by_class[:, 0] = mean
        by_class[:, 1] = np.maximum(variance, 1e-3 * overall)
        return by_class, shared
    is_binary = model.form in (BERNOULLI, LOGISTIC)
    beyond = (mean < -1e-12) | (is_binary & (mean > 1.0 + 1e-12))
    _refuse(is_inverse & beyond, "share" if is_binary else "mean", class_names)
    if model.form == LOGISTIC:
        inside = np.clip(mean, 0.02, 0.98)
        by_class[:, 0] = np.log(inside / (1.0 - inside))
        return by_class, shared
    if model.form == BERNOULLI:
        by_class[:, 0] = np.clip(mean, 1e-6, 1 - 1e-6)
        return by_class, shared
    positive = np.maximum(mean, 0.02 * max(float(y.mean()), 1e-6))
    is_log = model.form in (LOG_POISSON, LOG_NEGATIVE_BINOMIAL)
    by_class[:, 0] = np.log(positive) if is_log else positive
    if model.form in (NEGATIVE_BINOMIAL, LOG_NEGATIVE_BINOMIAL):
        size = positive**2 / np.maximum(variance - positive, 0.05 * positive)
        by_class[:, 1] = np.clip(size, 0.05, 50.0)
        if model.equal_spread:
            by_class[:, 1] = by_class[:, 1].mean()
    return by_class, shared


def _refuse(wrong: Bools, what: str, class_names: Sequence[str]) -> None:
    """Stop where negative weights make the moments of a class impossible."""
    if np.any(wrong):
        which = np.atleast_2d(wrong.T).any(axis=0)
        name = class_names[int(np.argmax(which))]
        msg = (
            f"the inverse error matrix gives negative weights, which make the {what} in class "
            f"{name} impossible (below 0, or above 1): the information is not positive definite "
            "and there is no estimate. Use the fixed error likelihood, the cut or the joint way."
        )
        raise ModelError(msg)
