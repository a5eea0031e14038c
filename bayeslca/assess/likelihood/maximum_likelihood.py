"""Maximum likelihood by EM, with the statistics of fit that go with it.

Priors play no part here, except to name classes that nothing else names. With few cases the
maximum often lies at the edge of what is possible (a probability estimated as 0 or 1), where
standard errors mean nothing: the posterior is made for that, this is for comparison with it.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import nan, prod
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2

from bayeslca._typing import Floats
from bayeslca.assess.likelihood.em_labels import labelled
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.em_runs import Climbed, climb_from, from_shares, scattered
from bayeslca.assess.likelihood.estimates import Estimates, estimates
from bayeslca.assess.likelihood.fit_statistics import (
    Criteria,
    information_criteria,
    pearson,
    relative_entropy,
)
from bayeslca.assess.likelihood.saturated import saturated
from bayeslca.assess.likelihood.words import as_terminal_text, findings_of
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood, membership
from bayeslca.model.simulate import Parameters
from bayeslca.model.table import UnitTable
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import MISSING, Units
from bayeslca.sampling.possible import refuse_impossible

if TYPE_CHECKING:
    import pandas as pd

FEWEST_A_CELL = 5.0
"""Cases per cell, in every group, below which no chi-square distribution is trusted (Agresti
2002, Categorical Data Analysis, 2nd ed., section 9.8: from memory)."""


@dataclass(frozen=True, eq=False, repr=False)
class MaximumLikelihood:
    """A maximum likelihood solution.

    Attributes
    ----------
    model : LatentClassModel
    responses : Responses
    log_likelihood : float
        Sum over cases of log p(answers), natural logarithm.
    n_parameters : int
        Free parameters: known ones left out, shared ones counted once.
    n_cases : int
        Cases with at least one answer.
    df : int
        Cells of the cross-table (less one a group) less free parameters; may be negative.
    g2, x2 : float
        Likelihood ratio statistic against the saturated model, and Pearson's statistic. With
        missing answers ``g2`` is under missingness at random, and ``x2`` is of the complete
        cases alone. nan where a finding says why.
    g2_p_value, x2_p_value : float
        From the chi-square distribution; nan where it is not to be trusted (``chi_square``).
    chi_square : str
        Why there are no p-values; empty where there are.
    criteria : Criteria
        Also as ``aic``, ``aicc``, ``bic``, ``bic_sclove``, ``caic``.
    relative_entropy : float
        1 when every case is surely in one class; nan with one class.
    parameters : Parameters
        The solution as the model's blocks.
    prevalence, response_probability : DataFrame
        Columns ``estimate``, ``standard_error`` (nan where a boundary makes it meaningless),
        ``at_boundary``; keys ``latent_class``, ``group``, ``item``, ``category``.
    boundary : tuple of str
        Estimates at 0 or 1, such as ``"P(fees=yes | managed) = 1"``.
    active : tuple of str
        Probabilities that lie on a bound or are held together by an order.
    starting_points, reached_best : int
        Runs of EM, and how many of them ended within 0.001 of the highest log likelihood.
    log_likelihoods : ndarray, shape (runs,)
        Of every run.
    findings : tuple of Finding
    """

    model: LatentClassModel
    responses: Responses
    log_likelihood: float
    n_parameters: int
    n_cases: int
    df: int
    g2: float
    x2: float
    g2_p_value: float
    x2_p_value: float
    chi_square: str
    criteria: Criteria
    relative_entropy: float
    parameters: Parameters
    prevalence: pd.DataFrame
    response_probability: pd.DataFrame
    boundary: tuple[str, ...]
    active: tuple[str, ...]
    starting_points: int
    reached_best: int
    log_likelihoods: Floats
    findings: tuple[Finding, ...]

    @property
    def aic(self) -> float:
        """Akaike's criterion."""
        return self.criteria.aic

    @property
    def aicc(self) -> float:
        """Akaike's criterion, corrected for small samples."""
        return self.criteria.aicc

    @property
    def bic(self) -> float:
        """Schwarz's criterion."""
        return self.criteria.bic

    @property
    def bic_sclove(self) -> float:
        """Sclove's sample-size-adjusted BIC."""
        return self.criteria.bic_sclove

    @property
    def caic(self) -> float:
        """Bozdogan's consistent AIC."""
        return self.criteria.caic

    def membership(self) -> Floats:
        """Return P(class | answers), shape (row, K).

        Rows without a single answer have their group's prevalences.
        """
        model, units = self.model, self.model.units(self.responses)
        table, estimate = compile_units(model.table, units), self.parameters
        by_unit = membership(model.table, table, estimate.elements, estimate.prevalence)
        grouped = model.groups is not None
        group = self.responses.group_codes if grouped else np.zeros(self.responses.n_rows, int)
        at = np.where(units.unit_of_row >= 0, units.unit_of_row, units.n_units + group)
        return np.asarray(np.concatenate([by_unit, estimate.prevalence])[at])

    def __repr__(self) -> str:
        return as_terminal_text(self)


def maximum_likelihood(
    model: LatentClassModel,
    responses: Responses,
    *,
    starting_points: int = 100,
    seed: int | None = None,
    start: Parameters | Floats | None = None,
    threads: int | None = None,
) -> MaximumLikelihood:
    """Fit a model by maximum likelihood.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    starting_points : int
        Runs of EM, from points scattered evenly over what the model allows.
    seed : int, optional
        Makes the starting points the same every time, whatever the number of threads.
    start : Parameters, or ndarray of shape (row, K), optional
        One start of one's own in place of scattered ones: parameters, or P(class) of every row.
    threads : int, optional
        As many as there are processors when left out.

    Raises
    ------
    ModelError
        When no exact step is written for the constraints, a start does not fit, or answers are
        impossible.
    """
    blocks = AllBlocks.of(model)
    units = model.units(responses)
    table = compile_units(model.table, units)
    refuse_impossible(model.table, table, responses)
    points = _points(blocks, units, table, responses, starting_points, seed, start)
    found = climb_from(blocks, table, points, threads)
    return _result(model, blocks, units, table, responses, found)


def _points(
    blocks: AllBlocks,
    units: Units,
    table: UnitTable,
    responses: Responses,
    n: int,
    seed: int | None,
    start: Parameters | Floats | None,
) -> Floats:
    model = blocks.model
    if start is None:
        if n < 1:
            msg = f"starting_points={n}: EM needs at least one."
            raise ModelError(msg)
        return scattered(blocks, n, np.random.default_rng(seed))
    if isinstance(start, Parameters):
        wanted = (model.table.n_elements,), (model.n_groups, model.n_classes)
        if (start.elements.shape, start.prevalence.shape) != wanted:
            msg = (
                f"start has elements {start.elements.shape} and prevalences "
                f"{start.prevalence.shape}; this model has {wanted[0]} and {wanted[1]}."
            )
            raise ModelError(msg)
        return blocks.elements(start)[None]
    shares = np.asarray(start, dtype=np.float64)
    if shares.shape != (responses.n_rows, model.n_classes):
        msg = (
            f"start has the shape {shares.shape}; give the probability of each class for each "
            f"row of the responses: {(responses.n_rows, model.n_classes)}."
        )
        raise ModelError(msg)
    if np.any(shares < 0) or not np.allclose(shares.sum(axis=1), 1.0):
        msg = "the rows of start must be probabilities that sum to 1."
        raise ModelError(msg)
    by_unit = np.zeros((units.n_units, model.n_classes))
    used = units.unit_of_row >= 0
    weighted = shares[used] * responses.counts[used, None]
    np.add.at(by_unit, units.unit_of_row[used], weighted)
    return from_shares(blocks, table, by_unit / units.count[:, None])


def _result(
    model: LatentClassModel,
    blocks: AllBlocks,
    units: Units,
    table: UnitTable,
    responses: Responses,
    found: Climbed,
) -> MaximumLikelihood:
    sizes = np.bincount(units.group, weights=units.count, minlength=model.n_groups)
    group_cases = np.asarray(sizes, dtype=np.float64)
    best = labelled(model, blocks.parameters(found.elements), group_cases)
    shown = estimates(blocks, table, blocks.elements(best))
    shares = membership(model.table, table, best.elements, best.prevalence)
    reference = saturated(units)
    g2 = 2.0 * (reference.log_likelihood - found.log_likelihood)
    if -1e-6 < g2 < 0.0:
        g2 = 0.0  # the model is as good as the saturated one, to rounding
    x2 = _pearson(model, units, table, best)
    df = _free_cells(model) - blocks.n_free
    doubt = _chi_square_doubt(blocks, units, responses, shown, df)
    complete = bool((units.pattern != MISSING).all())
    return MaximumLikelihood(
        model=model,
        responses=responses,
        log_likelihood=found.log_likelihood,
        n_parameters=blocks.n_free,
        n_cases=units.n_cases,
        df=df,
        g2=g2,
        x2=x2,
        g2_p_value=nan if doubt else float(chi2.sf(g2, df)),
        x2_p_value=float(chi2.sf(x2, df)) if complete and not doubt else nan,
        chi_square=doubt,
        criteria=information_criteria(found.log_likelihood, blocks.n_free, units.n_cases),
        relative_entropy=relative_entropy(shares, units.count),
        parameters=best,
        prevalence=shown.prevalence,
        response_probability=shown.response_probability,
        boundary=shown.boundary,
        active=shown.active,
        starting_points=found.log_likelihoods.size,
        reached_best=found.reached_best,
        log_likelihoods=found.log_likelihoods,
        findings=findings_of(shown, found, reference.reason, complete, doubt),
    )


def _free_cells(model: LatentClassModel) -> int:
    """Return the cells of the cross-table less one, over all groups."""
    return model.n_groups * (prod(item.n_categories for item in model.items) - 1)


def _pearson(model: LatentClassModel, units: Units, table: UnitTable, best: Parameters) -> float:
    """Return X2 of the complete cases; nan when a group has none."""
    complete = (units.pattern != MISSING).all(axis=1)
    if np.unique(units.group[complete]).size < np.unique(units.group).size:
        return nan
    p = np.exp(log_unit_likelihood(model.table, table, best.elements, best.prevalence))
    _, stratum = np.unique(units.group[complete], return_inverse=True)
    return pearson(units.count[complete], p[complete], stratum)


def _chi_square_doubt(
    blocks: AllBlocks, units: Units, responses: Responses, shown: Estimates, df: int
) -> str:
    """Return why the chi-square distribution is not used; empty when it is."""
    model = blocks.model
    if blocks.chains.element.size:
        return "it is not valid under bounds and orders"
    if df < 1:
        return "no degrees of freedom are left"
    cells = prod(item.n_categories for item in model.items)
    smallest = min(int(units.count[units.group == g].sum()) for g in np.unique(units.group))
    if smallest < FEWEST_A_CELL * cells:
        return f"the table is too sparse ({smallest:,} cases, {cells:,} cells)"
    if shown.singular or not model.identifiability(responses).identified:
        return "the model is not identified, so the degrees of freedom are wrong"
    return ""
