"""The empty-class ladder: what one class more does to the evidence of exchangeable classes.

The posterior of K + 1 classes is bridged to the posterior of K classes with one empty class
beside them: its response probabilities from the prior, its prevalence from Betas that are near
what an empty class has. Symmetrised over which class is the new one; labels then do not matter.
Best where more classes than the data need are fitted, which is where the bridge to a proposal is
weakest; of no use below the number that the data need.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import betaln, gammaln, logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.evidence.bridge_sampling import BridgeRatio, bridge_ratio, effective_draws
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import log_joint
from bayeslca.model.table import Table, UnitTable

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

EMPTINESS = (1.0, 0.3, 0.1)
"""The new class's prevalence is Beta(a, K a + f N) for these f, each a third of the time."""
MOST_DRAWS = 4000
"""Draws of each posterior, over all chains."""
MOST_NUMBERS = 100_000_000
"""Units x draws x classes squared beyond which fewer draws are taken."""


@dataclass(frozen=True, eq=False)
class Rung:
    """What the ladder needs of one posterior.

    Attributes
    ----------
    table : Table
    units : UnitTable
    concentration : float
        The prevalences' Dirichlet parameter, the same for every class and group.
    elements : ndarray, shape (chain, draw, E)
    prevalence : ndarray, shape (chain, draw, groups, K)
    """

    table: Table
    units: UnitTable
    concentration: float
    elements: Floats
    prevalence: Floats

    @property
    def n_classes(self) -> int:
        """Number of classes."""
        return self.table.n_classes

    @property
    def cases(self) -> Floats:
        """Cases of each group, shape (groups,)."""
        groups = self.prevalence.shape[2]
        counts = np.bincount(self.units.prevalence_row, weights=self.units.count, minlength=groups)
        return np.asarray(counts, dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Step:
    """Two estimates of ln Z of K + 1 classes minus ln Z of K classes.

    Attributes
    ----------
    ladder : BridgeRatio
        From both posteriors.
    emptied : BridgeRatio
        From how probable it is that a class of the larger model has no case: that posterior
        alone. Guards the other.
    """

    ladder: BridgeRatio
    emptied: BridgeRatio


def rung_of(posterior: Posterior) -> Rung | None:
    """Return a posterior as a rung; None where its classes are not exchangeable and unrestricted.

    Every class must have elements of its own, one for each row, with the same priors.
    """
    table, source = posterior.table, posterior.model.prevalence_source
    if not isinstance(source, DirichletPrevalence) or table.is_bounded or not table.is_direct:
        return None
    if posterior.unit_table.log_weight.size or np.ptp(source.concentration) > 0:
        return None
    if np.unique(table.direct_element).size != table.n_elements:
        return None
    places = class_elements(table)
    if places is None or places.size != table.n_elements:
        return None
    priors = table.element_prior[table.direct_element]
    if np.any(priors != priors[:, :1]):
        return None
    draws = posterior.draws
    a = float(source.concentration[0, 0])
    return Rung(table, posterior.unit_table, a, draws.elements, draws.prevalence)


def can_be_joined(lower: Rung, upper: Rung) -> bool:
    """Tell whether one model is the other with one class more, under the same prior."""
    one, two = lower.table, upper.table
    return (
        upper.n_classes == lower.n_classes + 1
        and lower.concentration == upper.concentration
        and one.n_rows == two.n_rows
        and np.array_equal(
            one.element_prior[one.direct_element[:, 0]], two.element_prior[two.direct_element[:, 0]]
        )
        and np.array_equal(lower.units.row, upper.units.row)
        and np.array_equal(lower.units.count, upper.units.count)
        and np.array_equal(lower.units.prevalence_row, upper.units.prevalence_row)
    )


def ladder_step(lower: Rung, upper: Rung, rng: np.random.Generator) -> Step:
    """Return what one class more does to the log evidence.

    Parameters
    ----------
    lower, upper : Rung
        Of K and K + 1 classes; see `can_be_joined`.
    rng : numpy.random.Generator
    """
    size = upper.n_classes**2 * max(upper.units.n_units, 1)
    most = max(400, min(MOST_DRAWS, MOST_NUMBERS // size))
    above, emptied = _log_ratio(_thinned(upper, most))
    below, _ = _log_ratio(with_empty_class(_thinned(lower, most), upper.table, rng))
    return Step(bridge_ratio(above, below), _from_emptied(emptied, lower))


def with_empty_class(lower: Rung, table: Table, rng: np.random.Generator) -> Rung:
    """Add a class from the prior to draws of K classes; it becomes the last one."""
    shape = lower.elements.shape[:2]
    a, n_old, cases = lower.concentration, lower.n_classes, lower.cases
    old, new = class_elements(lower.table), class_elements(table)
    assert old is not None  # rungs have them
    assert new is not None
    gammas = np.maximum(
        rng.standard_gamma(table.element_prior, size=(*shape, table.n_elements)), 1e-300
    )
    sums = np.add.reduceat(gammas, table.block_start[:-1], axis=-1)
    elements = np.maximum(gammas / np.repeat(sums, np.diff(table.block_start), axis=-1), 1e-300)
    elements[..., new[:-1]] = lower.elements[..., old]
    emptiness = np.asarray(EMPTINESS)[np.arange(shape[0] * shape[1]).reshape(shape) % 3]
    share = rng.beta(a, n_old * a + emptiness[..., None] * cases)  # (chain, draw, groups)
    share = np.clip(share, 1e-300, 1.0 - 1e-16)
    prevalence = np.concatenate(
        [lower.prevalence * (1.0 - share[..., None]), share[..., None]], axis=-1
    )
    return Rung(table, lower.units, a, elements, prevalence)


def empty_class_constant(n_classes: int, concentration: float, cases: Floats) -> float:
    """Return ln P(a given one of K + 1 classes is empty | no answers), K = ``n_classes``."""
    a, old = concentration, n_classes * concentration
    new = old + a
    terms = gammaln(new) + gammaln(old + cases) - gammaln(old) - gammaln(new + cases)
    return float(np.sum(terms))


def class_elements(table: Table) -> Ints | None:
    """Return the elements of each class in the order of rows, (K, elements of one class).

    None where classes have different numbers of elements.
    """
    own = [
        tuple(dict.fromkeys(table.direct_element[:, k].tolist())) for k in range(table.n_classes)
    ]
    return np.asarray(own, dtype=np.int64) if len({len(one) for one in own}) == 1 else None


def _thinned(rung: Rung, most: int) -> Rung:
    chains, draws = rung.elements.shape[:2]
    kept = np.unique(np.linspace(0, draws - 1, max(4, min(draws, most // chains))).astype(int))
    return Rung(
        rung.table,
        rung.units,
        rung.concentration,
        rung.elements[:, kept],
        rung.prevalence[:, kept],
    )


def _log_ratio(rung: Rung) -> tuple[Floats, Floats]:
    """Return ln(posterior of K + 1) - ln(posterior of K with an empty class), (chain, draw).

    Unnormalised: the one by its evidence, the other by that of K classes. Prior densities cancel
    but for the prevalence of the new class. Also ln P(a class is empty | parameters, answers),
    averaged over the classes.
    """
    shape = rung.elements.shape[:2]
    prevalence = rung.prevalence.reshape(-1, *rung.prevalence.shape[2:])
    elements = rung.elements.reshape(len(prevalence), rung.table.n_elements)
    a, n_old, cases = rung.concentration, rung.n_classes - 1, rung.cases
    whole, without = _log_likelihoods(rung.table, rung.units, elements, prevalence)
    emptied = logsumexp(without - whole[:, None], axis=1) - np.log(rung.n_classes)
    left = np.einsum("g,sgk->sk", cases, np.log1p(-np.minimum(prevalence, 1.0 - 1e-16)))
    without = without - left  # prevalences of the other classes made to sum to 1
    terms = []
    for f in EMPTINESS:
        norm = float(np.sum(betaln(a, n_old * a) - betaln(a, n_old * a + f * cases)))
        terms.append(without + f * left + norm)
    mixed = logsumexp(terms, axis=(0, 2)) - np.log(len(EMPTINESS) * rung.n_classes)
    return np.asarray(whole - mixed).reshape(shape), np.asarray(emptied).reshape(shape)


def _log_likelihoods(
    table: Table, units: UnitTable, elements: Floats, prevalence: Floats
) -> tuple[Floats, Floats]:
    """Return the log likelihood (S,), and without each class (S, K), prevalences as they are."""
    n_classes = table.n_classes
    whole = np.empty(elements.shape[0])
    without = np.empty((elements.shape[0], n_classes))
    for draws, joint in log_joint(table, units, elements, prevalence):
        highest = joint.max(axis=0)
        shares = np.exp(joint - highest)
        whole[draws] = units.count @ (highest + np.log(shares.sum(axis=0)))
        for k in range(n_classes):
            # Summed anew: taking one class off the total loses all digits where it dominates.
            rest = shares[:k].sum(axis=0) + shares[k + 1 :].sum(axis=0)
            lost = rest < 1e-280
            with np.errstate(divide="ignore"):
                logs = highest + np.log(rest)
            if lost.any():
                logs[lost] = logsumexp(np.delete(joint[:, lost], k, axis=0), axis=0)
            without[draws, k] = units.count @ logs
    return whole, without


def _from_emptied(log_probability: Floats, lower: Rung) -> BridgeRatio:
    """Turn ln P(a class is empty | draw), (chain, draw), into a step between evidences."""
    highest = float(log_probability.max())
    weights = np.exp(log_probability - highest)
    n = min(effective_draws(weights), float(weights.sum() ** 2 / np.sum(weights**2)))
    mean = float(weights.mean())
    prior = empty_class_constant(lower.n_classes, lower.concentration, lower.cases)
    error = float(weights.std() / mean / np.sqrt(n))
    return BridgeRatio(prior - highest - float(np.log(mean)), error, n)
