"""P(number of classes | answers): from log evidences and a prior on the number of classes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.assess.class_count.words import evidence_in_words
from bayeslca.assess.evidence.join import Joined
from bayeslca.assess.evidence.log_evidence import (
    Evidence,
    Tell,
    log_evidence_of_counts,
    probabilities,
)
from bayeslca.exceptions import ModelError

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

PriorOnCount = Mapping[int, float]


@dataclass(frozen=True, eq=False, repr=False)
class ClassCounts:
    """How probable each number of classes is, given the answers.

    Attributes
    ----------
    table : DataFrame
        A row per number of classes.

        ========================== ====================================================
        log_evidence               nan where it is not reliable
        log_evidence_mcse          its Monte Carlo standard error
        prior                      prior probability of the number
        probability                posterior probability, among the counts whose evidence
                                   is reliable; nan for the others
        probability_mcse           its Monte Carlo standard error
        log_bayes_factor           log evidence less that of one class fewer
        log_bayes_factor_mcse      its Monte Carlo standard error
        reliable                   whether the evidence is to be trusted
        reason                     why it is not, in words
        ========================== ====================================================
    evidence : dict from int to Evidence
    verdict : str
        What the answers support, how strongly, and on which priors that depends.
    covariance : ndarray, shape (n, n)
        Of the probabilities' Monte Carlo errors; 0 for numbers that have no probability.
    """

    table: pd.DataFrame
    evidence: dict[int, Evidence]
    verdict: str
    covariance: Floats

    def __repr__(self) -> str:
        columns = ["log_evidence", "log_evidence_mcse", "probability", "log_bayes_factor"]
        return f"{self.table[columns].round(3).to_string()}\n\n{self.verdict}"


def class_counts(
    posteriors: Mapping[int, Posterior],
    *,
    prior: PriorOnCount | None = None,
    seed: Seed = None,
    tell: Tell | None = None,
) -> ClassCounts:
    """Return how probable each number of classes is, given the answers.

    Parameters
    ----------
    posteriors : mapping from int to Posterior
        By number of classes; of the same answers, under the same priors.
    prior : mapping from int to float, optional
        Prior weight of each number; all equal when left out. Weights need not sum to 1.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
        Of the evidences; by default it follows from the posteriors' seeds.
    tell : callable, optional
        Told how much, 0 to 1, is done.

    Raises
    ------
    ModelError
        When the prior leaves out a number, or has a negative weight.
    """
    counts = sorted(posteriors)
    weights = checked_prior(prior, counts)
    evidence, joined = log_evidence_of_counts(posteriors, seed=seed, tell=tell)
    table, covariance = _table(counts, weights, evidence, joined)
    stated = any(one.model.stated.priors for one in posteriors.values())
    verdict = evidence_in_words(table, is_uniform=prior is None, stated=stated)
    return ClassCounts(table, evidence, verdict, covariance)


def checked_prior(prior: PriorOnCount | None, counts: Sequence[int]) -> Floats:
    """Return the prior probabilities (counts,) of numbers of classes.

    Raises
    ------
    ModelError
        When a number is left out, a weight is negative, or all are 0.
    """
    if prior is None:
        return np.full(len(counts), 1.0 / len(counts))
    missing = [k for k in counts if k not in prior]
    weights = np.array([float(prior.get(k, 0.0)) for k in counts])
    if missing or not np.all(np.isfinite(weights)) or np.any(weights < 0) or weights.sum() <= 0:
        msg = (
            f"the prior on the number of classes is {dict(prior)}. Give a weight of 0 or more for "
            f"each of {', '.join(map(str, counts))} classes, one of them above 0."
        )
        raise ModelError(msg)
    return np.asarray(weights / weights.sum())


FAR_BELOW = 20.0
"""Nats below the best beyond which a bridge that nothing guards is believed to lie below it: it may
be off by some nats, not by so many."""


def _far_below(one: Evidence, best: float) -> bool:
    """Whether an evidence that is not reliable still lies far below the best, by its own bridge."""
    bridged = any(each.kind == "bridge" and each.is_usable for each in one.estimates)
    return bridged and not one.modes and best - one.log_evidence > FAR_BELOW


def _has_its_rivals(
    counts: Sequence[int],
    good: Sequence[int],
    value: Floats,
    evidence: Mapping[int, Evidence] | None = None,
) -> bool:
    """Whether the best number can be weighed: its neighbours' evidence is reliable, or far below.

    Without them it would get a probability near 1 for want of rivals.
    """
    if not good:
        return False
    best = good[int(np.argmax(value))]
    beside = [k for k in (best - 1, best + 1) if k in counts]
    top = float(value.max())
    weighed = [
        k for k in beside if k in good or (evidence is not None and _far_below(evidence[k], top))
    ]
    return weighed == beside and (len(good) > 1 or len(counts) == 1)


def _table(
    counts: Sequence[int], prior: Floats, evidence: Mapping[int, Evidence], joined: Joined
) -> tuple[pd.DataFrame, Floats]:
    import pandas as pd

    good = [k for k in counts if evidence[k].reliable]
    at = [joined.counts.index(k) for k in good]
    covariance = joined.covariance[np.ix_(at, at)]
    value = np.array([evidence[k].log_evidence for k in good])
    chance, error = np.full(len(counts), np.nan), np.full(len(counts), np.nan)
    of_chance = np.zeros((len(counts),) * 2)
    rows = [counts.index(k) for k in good]
    if _has_its_rivals(counts, good, value, evidence) and prior[rows].sum() > 0:
        chance[rows], of_chance[np.ix_(rows, rows)] = probabilities(value, covariance, prior[rows])
        error[rows] = np.sqrt(np.maximum(np.diag(of_chance)[rows], 0.0))
    steps = {}
    for k in good:
        if k - 1 in good:
            i, j = good.index(k), good.index(k - 1)
            variance = covariance[i, i] + covariance[j, j] - 2 * covariance[i, j]
            steps[k] = (float(value[i] - value[j]), float(np.sqrt(max(variance, 0.0))))
    records = [
        {
            "log_evidence": evidence[k].log_evidence if evidence[k].reliable else np.nan,
            "log_evidence_mcse": evidence[k].mcse if evidence[k].reliable else np.nan,
            "prior": float(prior[i]),
            "probability": float(chance[i]),
            "probability_mcse": float(error[i]),
            "log_bayes_factor": steps.get(k, (np.nan, np.nan))[0],
            "log_bayes_factor_mcse": steps.get(k, (np.nan, np.nan))[1],
            "reliable": evidence[k].reliable,
            "reason": evidence[k].reason,
        }
        for i, k in enumerate(counts)
    ]
    return pd.DataFrame(records, index=pd.Index(counts, name="classes")), of_chance
