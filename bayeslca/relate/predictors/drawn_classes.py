"""Drawn classes that know the covariates: plausible values given a regression of class.

A class is drawn with P(class | answers, covariates) at one draw of response probabilities and
coefficients, so that relations of class with these covariates are kept (Mislevy 1991).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.special import softmax

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.probabilities import membership
from bayeslca.model.simulate import draw_categories
from bayeslca.relate.plausible_values import classes_from_answers
from bayeslca.relate.predictors.ways import regression

if TYPE_CHECKING:
    from bayeslca.relate.predictors.class_predictors import ClassPredictors


def made_with(found: ClassPredictors) -> str:
    """Return from what the classes are drawn, in words."""
    words = f"made with the predictors {found.design.formula.text}"
    left = int(found.posterior.responses.counts[~found.design.used].sum())
    if left:
        words += f"; {left} without them from the answers alone"
    return words


def draw_classes(found: ClassPredictors, number: int, rng: np.random.Generator) -> Ints:
    """Draw the class of every case, shape (number, cases).

    Parameters
    ----------
    found : ClassPredictors
        With a joint fit or a cut; the cut is taken where there are both, since its classes are
        those of the measurement model.
    number : int
    rng : numpy.random.Generator

    Raises
    ------
    ModelError
        When there is neither a cut nor a joint fit.
    """
    way = next((way for way in ("cut", "joint") if way in found.draws), None)
    if way is None:
        msg = (
            "classes are drawn from the posterior of a regression, and this one was made in three "
            "steps only. Add the way 'cut' or 'joint'."
        )
        raise ModelError(msg)
    posterior = found.posterior
    relation = regression(posterior, found.design, found.prior_sd)
    out = classes_from_answers(posterior, number, rng)
    counts = np.asarray(posterior.responses.counts)
    used = np.repeat(found.design.used, counts)
    unit = np.repeat(relation.cases.unit_of_case, counts)[used]
    elements, coefficients = _flat(found, way)
    chosen = np.linspace(0, len(elements) - 1, number).round().astype(int)
    for i, s in enumerate(chosen):
        prevalence = softmax(relation.rows @ coefficients[s].T, axis=1)
        shares = membership(posterior.table, relation.cases.units, elements[s], prevalence)
        out[i, used] = draw_categories(shares[unit], rng)
    return out


def _flat(found: ClassPredictors, way: str) -> tuple[Floats, Floats]:
    """Return elements (draw, E) and coefficients (draw, K, P), all chains end to end."""
    drawn = found.draws[way]
    return np.concatenate(drawn.draws.elements), np.concatenate(drawn.coefficients)
