"""The log evidence of one model from its posterior draws, by estimators of different kinds.

*Bridge*: posterior draws against draws of a proposal near the posterior. *Ordinate*: Bayes'
theorem at some points, with the posterior density there averaged over the draws' full
conditionals; it draws from no proposal, so that the two guard each other. For bounded models,
whose conditionals have no known constant, *importance sampling* takes its place.

References
----------
Chib, S. (1995). Marginal likelihood from the Gibbs output. Journal of the American Statistical
Association 90, 1313-1321; Berkhof, J., van Mechelen, I. & Gelman, A. (2003). A Bayesian approach
to the selection and testing of mixture models. Statistica Sinica 13, 423-442 (averaged over
labels).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.evidence.bridge_sampling import (
    LEAST_EFFECTIVE,
    BridgeRatio,
    bridge_ratio,
    effective_draws,
)
from bayeslca.assess.evidence.conditionals import (
    SMALLEST,
    FreeParameters,
    conditional_parameters,
    log_evidence_of_one_class,
)
from bayeslca.assess.evidence.proposal import Labels, Proposal, labels_of
from bayeslca.exceptions import ModelError
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

LEAST_DRAWS = 100
"""Draws of a posterior below which no evidence is tried."""
SIZES = ((60, 1000), (150, 2000), (400, 4000))
"""Components of the proposal, and draws of each density, for each of the two halves."""
ORDINATE_POINTS, ORDINATE_DRAWS = 40, 1000
HALVES_APART = 3.0
"""Standard errors by which the two halves may differ."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """One estimate of a log evidence (or of a step between two).

    Attributes
    ----------
    kind : str
        "exact", "bridge", "ordinate", "importance" or "ladder".
    value, mcse : float
    why_not : str
        Why it is not to be used, in words; empty where it is.
    """

    kind: str
    value: float
    mcse: float
    why_not: str = ""

    @property
    def is_usable(self) -> bool:
        """Whether the estimate and its error may be used."""
        return not self.why_not


def model_estimates(
    posterior: Posterior, rng: np.random.Generator, *, size: int = 0
) -> tuple[Estimate, ...]:
    """Return estimates of a model's log evidence: the one to report, then one that guards it.

    Parameters
    ----------
    posterior : Posterior
    rng : numpy.random.Generator
    size : int
        Which of `SIZES` the bridge's proposal has.

    Raises
    ------
    ModelError
        Where labels can be exchanged in too many ways, or there are too few draws.
    """
    if posterior.draws.n_draws * posterior.draws.n_chains < LEAST_DRAWS:
        msg = f"there are fewer than {LEAST_DRAWS} draws"
        raise ModelError(msg)
    source: PrevalenceSource = posterior.model.prevalence_source
    if isinstance(source, PooledPrevalence):
        msg = "no bridge is written for units that are pooled; compare by leaving units out"
        raise ModelError(msg)
    if not isinstance(source, DirichletPrevalence | ConstrainedPrevalence):
        msg = f"no evidence is offered where prevalences come from {type(source).__name__}"
        raise ModelError(msg)
    free = FreeParameters(posterior.table, source)
    exact = log_evidence_of_one_class(free, posterior.unit_table)
    if exact is not None:
        return (Estimate("exact", exact, 0.0),)
    labels = labels_of(free, posterior.model.symmetry.prior_group)
    halves = _halves(posterior)
    bounds_error = posterior.model.log_bounds_probability.mcse
    ratios, proposed = zip(
        *(
            _bridge(posterior, free, labels, mine, theirs, *SIZES[size], rng)
            for mine, theirs in (halves, halves[::-1])
        ),
        strict=True,
    )
    bridged = _averaged(ratios, bounds_error)
    if free.is_bounded:
        return bridged, _importance(proposed, bounds_error)
    return bridged, _ordinate(posterior, free, labels, halves, rng)


@dataclass(frozen=True, eq=False)
class _Half:
    """Draws of some chains: parameters (chain, draw, F) and log posterior, not normalised."""

    values: Floats
    log_posterior: Floats


def _halves(posterior: Posterior) -> tuple[_Half, _Half]:
    """Cut the chains in two; a single chain in its first and second half."""
    draws = posterior.draws
    source = posterior.model.prevalence_source
    assert not isinstance(source, PooledPrevalence)  # refused in `model_estimates`
    free = FreeParameters(posterior.table, source)
    values = free.joined(draws.elements, draws.prevalence)
    log_posterior = draws.log_likelihood + draws.log_prior
    if draws.n_chains > 1:
        half = draws.n_chains // 2
        first: tuple[slice, ...] = (slice(0, half),)
        second: tuple[slice, ...] = (slice(half, None),)
    else:
        half = draws.n_draws // 2
        first = (slice(None), slice(0, half))
        second = (slice(None), slice(half, None))
    return _Half(values[first], log_posterior[first]), _Half(values[second], log_posterior[second])


def _bridge(
    posterior: Posterior,
    free: FreeParameters,
    labels: Labels,
    mine: _Half,
    theirs: _Half,
    n_components: int,
    n_draws: int,
    rng: np.random.Generator,
) -> tuple[BridgeRatio, Floats]:
    """Bridge one half's draws to a proposal from the other; also the proposal's log ratios."""
    conditionals = _conditionals(posterior, free, theirs, n_components, rng)[0]
    proposal = Proposal.flattened(free, labels, conditionals.reshape(-1, free.prior.size))
    values = proposal.draw(n_draws, rng)
    proposed = _log_posterior(posterior, free, values) - proposal.log_density(values)
    kept = _evenly(mine.values.shape[1], n_draws // mine.values.shape[0])
    sampled = mine.values[:, kept]
    density = proposal.log_density(sampled.reshape(-1, sampled.shape[2]))
    ratio = mine.log_posterior[:, kept] - density.reshape(sampled.shape[:2])
    return bridge_ratio(ratio, proposed[None]), proposed


def _averaged(ratios: tuple[BridgeRatio, ...], bounds_error: float) -> Estimate:
    """Join the two halves, which guard each other."""
    value = float(np.mean([one.value for one in ratios]))
    error = float(np.sqrt(sum(one.mcse**2 for one in ratios)) / len(ratios))
    why_not = ""
    gap = abs(ratios[0].value - ratios[1].value)
    if not all(one.is_usable for one in ratios):
        why_not = "the draws hardly overlap with the approximation that it starts from"
    elif gap > HALVES_APART * 2.0 * error:
        why_not = f"two halves of the chains differ by {gap:.2f}"
    return Estimate("bridge", value, float(np.hypot(error, bounds_error)), why_not)


def _importance(proposed: tuple[Floats, ...], bounds_error: float) -> Estimate:
    """Average the posterior over the proposal, for both halves together."""
    logs = np.stack(proposed)
    highest = logs.max()
    weights = np.exp(logs - highest)
    mean = weights.mean()
    relative = float(weights.std() / mean / np.sqrt(weights.size))
    effective = weights.sum() ** 2 / np.sum(weights**2)
    few = "it rests on a few draws" if effective < LEAST_EFFECTIVE else ""
    value = float(highest + np.log(mean))
    return Estimate("importance", value, float(np.hypot(relative, bounds_error)), few)


def _ordinate(
    posterior: Posterior,
    free: FreeParameters,
    labels: Labels,
    halves: tuple[_Half, _Half],
    rng: np.random.Generator,
) -> Estimate:
    """Compare prior x likelihood with the posterior density at points of the other half."""
    values, errors, effective = [], [], np.inf
    for mine, theirs in (halves, halves[::-1]):
        conditionals, shape = _conditionals(posterior, free, mine, ORDINATE_DRAWS, rng)
        at = np.argsort(theirs.log_posterior + _spikes(free, theirs.values), axis=None)
        at = at[-ORDINATE_POINTS:]
        points = theirs.values.reshape(-1, free.prior.size)[at]
        terms = Proposal(free, labels, conditionals.reshape(-1, free.prior.size)).log_terms(points)
        logs = logsumexp(terms - theirs.log_posterior.ravel()[at][:, None], axis=0)
        logs -= np.log(len(points))  # ln of posterior density / (prior x likelihood), (S,)
        highest = logs.max()
        weights = np.exp(logs - highest).reshape(shape)
        n = effective_draws(weights)
        values.append(-float(highest + np.log(weights.mean())))
        errors.append(float(weights.std() / weights.mean() / np.sqrt(n)))
        largest_count = weights.sum() ** 2 / np.sum(weights**2)
        effective = min(effective, n, float(largest_count))
    why_not = "it rests on a few draws" if effective < LEAST_EFFECTIVE else ""
    error = float(np.hypot(errors[0], errors[1])) / 2.0
    return Estimate("ordinate", float(np.mean(values)), error, why_not)


def _spikes(free: FreeParameters, values: Floats) -> Floats:
    """Return what takes the spikes at 0 out of the log prior of parameters (..., F).

    Below a Dirichlet parameter of 1 the density has no bound, and its highest points are ones
    where some probability happens to be next to 0: no good points to compare densities at.
    """
    below = np.maximum(1.0 - free.prior, 0.0)
    return np.asarray(np.log(np.maximum(values, SMALLEST)) @ below)


def _conditionals(
    posterior: Posterior, free: FreeParameters, half: _Half, n: int, rng: np.random.Generator
) -> tuple[Floats, tuple[int, int]]:
    """Return the Dirichlets (S, F) given classes drawn at evenly spaced draws; S by chain."""
    n_chains = half.values.shape[0]
    kept = half.values[:, _evenly(half.values.shape[1], n // n_chains)]
    elements, prevalence = free.apart(kept.reshape(-1, free.prior.size))
    found = conditional_parameters(free, posterior.unit_table, elements, prevalence, rng)
    return found, (n_chains, kept.shape[1])


def _log_posterior(posterior: Posterior, free: FreeParameters, values: Floats) -> Floats:
    """Return ln(prior x likelihood) at parameters (n, F)."""
    elements, prevalence = free.apart(values)
    by_unit = log_unit_likelihood(posterior.table, posterior.unit_table, elements, prevalence)
    prior = log_prior(posterior.table, free.source, elements, prevalence)
    return np.asarray(by_unit @ posterior.unit_table.count + prior)


def _evenly(n: int, most: int) -> Ints:
    return np.unique(np.linspace(0, n - 1, max(1, min(n, most))).astype(np.int64))
