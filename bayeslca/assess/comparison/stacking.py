"""Stacking: the mixture of several models' predictions that would have predicted best."""

from __future__ import annotations

import numpy as np
from scipy.optimize import LinearConstraint, minimize

from bayeslca._typing import Floats, Ints


def stacking_weights(pointwise: Floats, counts: Ints) -> Floats:
    """Return the weights, summing to 1, that maximise the mixture's leave-one-out score.

    Parameters
    ----------
    pointwise : ndarray, shape (model, U)
        Leave-one-out log predictive density of one case of each unit.
    counts : ndarray of int, shape (U,)

    Notes
    -----
    Maximises sum_u c_u log sum_m w_m exp(elpd_mu) over the simplex, which is concave (Yao,
    Vehtari, Simpson & Gelman 2018, Bayesian Analysis 13, 917-1007, equation 6).
    """
    n_models = pointwise.shape[0]
    if n_models == 1:
        return np.ones(1)
    # Each case's densities relative to its best model: no underflow, the same maximum.
    density = np.exp(pointwise - pointwise.max(axis=0))
    share = counts / counts.sum()

    def loss(w: Floats) -> float:
        return -float(share @ np.log(w @ density))

    def slope(w: Floats) -> Floats:
        return np.asarray(-(density @ (share / (w @ density))))

    found = minimize(
        loss,
        np.full(n_models, 1.0 / n_models),
        jac=slope,
        method="SLSQP",
        bounds=[(0.0, 1.0)] * n_models,
        constraints=LinearConstraint(np.ones((1, n_models)), 1.0, 1.0),
        options={"ftol": 1e-12, "maxiter": 1000},
    )
    weights = np.clip(found.x, 0.0, 1.0)
    return np.asarray(weights / weights.sum())
