"""Maximum likelihood under weights, with standard errors of the sample's design.

What is maximised is the weighted sum of the cases' log likelihoods (pseudo maximum likelihood);
standard errors are linearised: the information's inverse on both sides of the covariance of the
weighted scores' total between clusters within strata.

References
----------
Binder, D. A. (1983). On the variances of asymptotically normal estimators from complex surveys.
International Statistical Review 51, 279-292. Skinner, C. J. (1989), in Skinner, Holt & Smith
(eds), Analysis of Complex Surveys, Wiley, chapter 3. From memory.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.likelihood.em_labels import labelled
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.em_runs import climb_from, scattered
from bayeslca.assess.likelihood.estimates import Estimates, estimates_with, fixed_elements
from bayeslca.assess.likelihood.observed_information import Covariance, Score, covariance
from bayeslca.model.probabilities import membership
from bayeslca.model.simulate import Parameters
from bayeslca.relate.weighted.design_variance import cluster_totals, total_covariance
from bayeslca.relate.weighted.weighted_score import WeightedUnits
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.possible import refuse_impossible
from bayeslca.sampling.relabel_alike import relabel_alike

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses

STARTS = 30


@dataclass(frozen=True, eq=False)
class WeightedMaximumLikelihood:
    """A solution of maximum likelihood under weights.

    Attributes
    ----------
    model : LatentClassModel
    responses : Responses
    parameters : Parameters
    log_pseudo_likelihood : float
        Weighted, weights scaled to the number of cases. Not comparable between models by any
        criterion made for likelihoods.
    prevalence, response_probability : DataFrame
        Keys, then ``estimate``, ``standard_error`` (linearised; nan where a boundary makes it
        meaningless), ``at_boundary``, ``standard_error_if_random`` (as if the same number of
        cases had been drawn at random, one by one) and ``design_effect``, the square of their
        ratio.
    degrees_of_freedom : int
        Clusters less strata.
    starting_points, reached_best : int
        Runs of EM, and how many of them reached the best.
    """

    model: LatentClassModel
    responses: Responses
    parameters: Parameters
    log_pseudo_likelihood: float
    prevalence: pd.DataFrame
    response_probability: pd.DataFrame
    degrees_of_freedom: int
    starting_points: int
    reached_best: int


def weighted_maximum_likelihood(
    model: LatentClassModel,
    responses: Responses,
    *,
    starting_points: int = STARTS,
    seed: int | None = None,
    alike: Posterior | None = None,
    threads: int | None = None,
) -> WeightedMaximumLikelihood:
    """Fit a model by maximum likelihood under the responses' weights.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
        With a design: weights, clusters or strata.
    starting_points : int
        Runs of EM from scattered points.
    seed : int, optional
    alike : Posterior, optional
        A fit of the same model: EM starts from its posterior mean as well, and classes are named
        as they are there.
    threads : int, optional

    Raises
    ------
    ModelError
        When the responses have no design, or answers are impossible.
    """
    units = WeightedUnits.of(model, responses)
    refuse_impossible(model.table, units.cases, responses)
    blocks = AllBlocks.of(model)
    points = scattered(blocks, starting_points, np.random.default_rng(seed))
    if alike is not None:
        points = np.concatenate([blocks.elements(posterior_mean(alike))[None], points])
    found = climb_from(blocks, units.table, points, threads)
    best = blocks.parameters(found.elements)
    if alike is None:
        sizes = np.bincount(units.table.prevalence_row, units.counts, minlength=model.n_groups)
        best = labelled(model, best, np.asarray(sizes, dtype=np.float64))
    else:
        best = _named_alike(alike, best)
    linearised, if_random = design_tables(blocks, units, blocks.elements(best))
    return WeightedMaximumLikelihood(
        model=model,
        responses=responses,
        parameters=best,
        log_pseudo_likelihood=found.log_likelihood,
        prevalence=_beside(linearised.prevalence, if_random.prevalence),
        response_probability=_beside(
            linearised.response_probability, if_random.response_probability
        ),
        degrees_of_freedom=units.design.degrees_of_freedom,
        starting_points=found.log_likelihoods.size,
        reached_best=found.reached_best,
    )


def posterior_mean(posterior: Posterior) -> Parameters:
    """Return the posterior mean of all parameters."""
    draws = posterior.draws
    return Parameters(draws.elements.mean(axis=(0, 1)), draws.prevalence.mean(axis=(0, 1)))


def reference_membership(posterior: Posterior) -> Floats:
    """Return P(class | answers) of the units at the posterior mean, shape (unit, K)."""
    mean = posterior_mean(posterior)
    return membership(posterior.table, posterior.unit_table, mean.elements, mean.prevalence)


def design_tables(
    blocks: AllBlocks, units: WeightedUnits, elements: Floats
) -> tuple[Estimates, Estimates]:
    """Return the tables of a solution with linearised errors, and with those of random cases."""
    score = Score.of(blocks, units.table)
    fixed = fixed_elements(blocks, elements)
    bread = covariance(score, elements, fixed)
    return (
        estimates_with(score, elements, fixed, sandwich(score, units, elements, bread)),
        estimates_with(score, elements, fixed, bread),
    )


def sandwich(score: Score, units: WeightedUnits, elements: Floats, bread: Covariance) -> Covariance:
    """Return the linearised covariance of the estimates.

    Parameters
    ----------
    score : Score
    units : WeightedUnits
    elements : ndarray, shape (E,)
        Where the weighted likelihood is highest.
    bread : Covariance
        The inverse of the weighted information.
    """
    if bread.free is None:
        return bread
    value, slope = score.by_unit(elements)
    by_unit = (slope / value[:, None]) @ bread.directions
    totals = cluster_totals(units.by_row(by_unit), units.design)
    meat = total_covariance(totals, units.design)
    return replace(bread, free=bread.free @ meat @ bread.free)


def _named_alike(alike: Posterior, best: Parameters) -> Parameters:
    """Name the classes of a solution as they are named in a posterior."""
    none = np.zeros((1, 1))
    one = Draws(best.elements[None, None], best.prevalence[None, None], none, none)
    reference = reference_membership(alike)
    named = relabel_alike(alike.model, alike.unit_table, one, reference)
    return Parameters(named.elements[0, 0], named.prevalence[0, 0])


def _beside(linearised: pd.DataFrame, if_random: pd.DataFrame) -> pd.DataFrame:
    frame = linearised.copy()
    frame["standard_error_if_random"] = if_random["standard_error"]
    ratio = frame["standard_error"] / frame["standard_error_if_random"]
    frame["design_effect"] = ratio**2
    return frame
