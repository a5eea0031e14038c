"""The adjusted likelihood ratio test of Lo, Mendell & Rubin for the number of classes.

Under the smaller model the statistic is taken to be distributed as a weighted sum of chi-squares
with 1 degree of freedom (Vuong 1989), after division by an ad hoc factor. Jeffries (2003) showed
that the proof fails: the conditions exclude the very case of one class fewer. The test is offered
because reviewers ask for it; the bootstrap does not rest on that proof.

References
----------
Lo, Y., Mendell, N. R. & Rubin, D. B. (2001), Biometrika 88, 767-778. Vuong, Q. H. (1989),
Econometrica 57, 307-333. Jeffries, N. O. (2003), Biometrika 90, 991-994. Imhof, J. P. (1961),
Biometrika 48, 419-426. Formulas from memory: the matrix of weights (Vuong, theorem 3.3), the
factor 1 + 1 / ((p - q) ln n) (Lo et al., p. 771).
"""

from __future__ import annotations

from math import log, nan

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.estimates import fixed_elements
from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood
from bayeslca.assess.likelihood.observed_information import Score, interior_directions
from bayeslca.model.compile import compile_units

NEGLIGIBLE = 1e-9
"""Weights below this share of the largest are left out."""
PIECES, MOST_PIECES = 128, 262_144
SMALL_HEIGHT = 1e-9
"""Pieces of the integral at a time and in all, and where it ends."""


def adjusted_test(smaller: MaximumLikelihood, larger: MaximumLikelihood) -> tuple[float, float]:
    """Return the adjusted statistic and its p-value.

    Parameters
    ----------
    smaller, larger : MaximumLikelihood
        Of the same responses.

    Returns
    -------
    float
        Twice the difference of the log likelihoods, over the factor.
    float
        nan where an information matrix has no inverse.

    Notes
    -----
    Estimates at 0 or 1 are taken as known, as they are for standard errors.
    """
    statistic = 2.0 * (larger.log_likelihood - smaller.log_likelihood)
    extra = larger.n_parameters - smaller.n_parameters
    adjusted = statistic / (1.0 + 1.0 / (extra * log(larger.n_cases)))
    weights = chi_square_weights(smaller, larger)
    return adjusted, nan if weights is None else weighted_chi_square_tail(adjusted, weights)


def chi_square_weights(smaller: MaximumLikelihood, larger: MaximumLikelihood) -> Floats | None:
    """Return the weights of the chi-squares; None where an information has no inverse."""
    scores_f, information_f, count = _scores(larger)
    scores_g, information_g, _ = _scores(smaller)
    both = np.concatenate([scores_f, scores_g], axis=1)
    cross = (both * count[:, None]).T @ both
    n_f = scores_f.shape[1]
    inverse = np.zeros_like(cross)
    try:
        inverse[:n_f, :n_f] = np.linalg.inv(information_f)
        inverse[n_f:, n_f:] = -np.linalg.inv(information_g)
    except np.linalg.LinAlgError:
        return None
    if max(np.linalg.cond(information_f), np.linalg.cond(information_g)) > 1e12:
        return None
    weights = np.linalg.eigvals(cross @ inverse).real
    return np.asarray(weights[np.abs(weights) > NEGLIGIBLE * np.abs(weights).max()])


def _scores(fit: MaximumLikelihood) -> tuple[Floats, Floats, Floats]:
    """Return scores (U, free) of a case of each unit, the information, and the cases (U,)."""
    blocks = AllBlocks.of(fit.model)
    units = compile_units(fit.model.table, fit.model.units(fit.responses))
    score = Score.of(blocks, units)
    elements = blocks.elements(fit.parameters)
    directions = interior_directions(blocks, elements, fixed_elements(blocks, elements))
    value, slope = score.by_unit(elements)
    by_unit = (slope / value[:, None]) @ directions
    return by_unit, score.information(elements, directions), units.count.astype(np.float64)


def weighted_chi_square_tail(value: float, weights: Floats) -> float:
    """Return P(sum of weights x chi-squares with 1 df > value), by Imhof's inversion.

    The integral goes in pieces over which the angle turns by less than a full circle, until what
    is integrated is negligible.
    """
    node, node_weight = np.polynomial.legendre.leggauss(32)
    width = 4.0 * np.pi / (abs(value) + float(np.abs(weights).sum()))
    total = 0.0
    for first in range(0, MOST_PIECES, PIECES):
        start = width * np.arange(first, first + PIECES)
        u = (start[:, None] + 0.5 * width * (node + 1.0)).ravel()
        angle = 0.5 * np.arctan(u[:, None] * weights).sum(axis=1) - 0.5 * value * u
        height = np.exp(-0.25 * np.log1p((u[:, None] * weights) ** 2).sum(axis=1)) / u
        pieces = (np.sin(angle) * height).reshape(PIECES, -1) @ node_weight
        total += 0.5 * width * float(pieces.sum())
        if height[-1] < SMALL_HEIGHT:
            break
    return float(np.clip(0.5 + total / np.pi, 0.0, 1.0))
