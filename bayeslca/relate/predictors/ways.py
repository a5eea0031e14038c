"""Two of three ways to relate classes to covariates: jointly, and by a cut.

Jointly, answers and covariates shape the classes in one posterior. By the cut, response
probabilities are those of the measurement model's posterior, held; given each draw of them,
classes and coefficients are sampled together, so that the classes are drawn given the covariates
too. Classes drawn from the answers alone would attenuate every effect.

References
----------
Plummer, M. (2015). Cuts in Bayesian graphical models. Statistics and Computing 25, 37-43.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints, Seed
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.case_units import CaseUnits, case_units
from bayeslca.relate.predictors.covariates import Design
from bayeslca.relate.same_classes import SameClasses, same_classes
from bayeslca.sampling.joint_chain import JointTask, joint_task
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.joint_gibbs import sample_held, sample_joint
from bayeslca.sampling.logistic_step import NAME, LogisticStep
from bayeslca.sampling.progress import Show
from bayeslca.sampling.stopping import judge

FIRST_SWEEPS = 20
MOST_SWEEPS = 320
FORGOTTEN = 0.05
"""The inner chain is long enough when what is left of its start (autocorrelation from one end of
it to the other, response probabilities held) is below this."""
PILOTS = 8
PILOT_DRAWS = 200


@dataclass(frozen=True, eq=False)
class Regression:
    """Covariates and cases, arranged for sampling.

    Attributes
    ----------
    design : Design
    rows : ndarray of float64, shape (row, P)
        Distinct lines of the design.
    row_of_case : ndarray of int64, shape (N,)
        Of each row of the responses; 0 for cases that are left out.
    cases : CaseUnits
    prior_sd : ndarray of float64, shape (P,)
    task : JointTask
    """

    design: Design
    rows: Floats
    row_of_case: Ints
    cases: CaseUnits
    prior_sd: Floats
    task: JointTask


def regression(posterior: Posterior, design: Design, prior_sd: Floats) -> Regression:
    """Arrange a regression of class on covariates for sampling.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    design : Design
    prior_sd : ndarray, shape (P,)
        Standard deviation of every class's coefficients around 0.
    """
    responses = posterior.responses
    grouped = posterior.model.groups is not None
    group = responses.group_codes if grouped else np.zeros(responses.n_rows, dtype=np.int64)
    key = np.column_stack([group[design.used], design.matrix])
    _, first, row = np.unique(key, axis=0, return_index=True, return_inverse=True)
    row_of_case = np.zeros(responses.n_rows, dtype=np.int64)
    row_of_case[design.used] = row.reshape(-1)
    rows = np.ascontiguousarray(design.matrix[first])
    cases = case_units(posterior.model, responses, row_of_case, keep=design.used)
    n_classes = posterior.model.n_classes
    task = joint_task(
        posterior.table,
        cases.units,
        len(rows),
        lambda rng: LogisticStep(rows, prior_sd, n_classes, rng),
        group_of_row=np.asarray(group[design.used][first], dtype=np.int64),
    )
    return Regression(design, rows, row_of_case, cases, prior_sd, task)


@dataclass(frozen=True, eq=False)
class WayDraws:
    """What one way gave.

    Attributes
    ----------
    coefficients : ndarray of float64, shape (chain, draw, K, P)
        Relabelled.
    named : SameClasses
    inner_sweeps : int
        Length of the inner chains of a cut; 0 for the joint way.
    """

    coefficients: Floats
    named: SameClasses
    inner_sweeps: int = 0

    @property
    def draws(self) -> JointDraws:
        """The draws themselves."""
        return self.named.draws


def jointly(
    posterior: Posterior,
    relation: Regression,
    *,
    seed: Seed,
    draws: int = 1000,
    ess: float = 1000.0,
    threads: int | None = None,
    progress: bool | Show = False,
) -> WayDraws:
    """Sample answers, classes and coefficients from one posterior."""

    def watch(so_far: JointDraws) -> Mapping[str, Floats]:
        named = same_classes(posterior, so_far)
        contrasts = against_mean(named.parameter(NAME))
        return {
            f"coefficient {p + 1} of class {k + 1}": contrasts[:, :, k, p]
            for k in range(contrasts.shape[2])
            for p in range(contrasts.shape[3])
        }

    drawn = sample_joint(
        relation.task,
        _starts(posterior),
        seed=seed,
        draws=draws,
        ess=ess,
        threads=threads,
        progress=progress,
        watch=watch,
    )
    named = same_classes(posterior, drawn)
    return WayDraws(named.parameter(NAME), named)


def by_cut(
    posterior: Posterior,
    relation: Regression,
    *,
    seed: np.random.SeedSequence,
    draws: int = 500,
    threads: int | None = None,
    progress: bool | Show = False,
) -> WayDraws:
    """Hold draws of the response probabilities; sample classes and coefficients at each."""
    pilot, run = seed.spawn(2)
    sweeps = inner_sweeps(posterior, relation, seed=pilot, threads=threads)
    kept = posterior.draws.elements
    at = np.unique(np.linspace(0, kept.shape[1] - 1, min(draws, kept.shape[1])).astype(int))
    drawn = sample_held(
        relation.task,
        np.ascontiguousarray(kept[:, at]),
        sweeps=sweeps,
        seed=run,
        threads=threads,
        progress=progress,
    )
    # Elements are held, so labels stay those of the measurement posterior.
    k = np.arange(posterior.model.n_classes)
    named = SameClasses(drawn, np.broadcast_to(k, (*drawn.log_likelihood.shape, k.size)), 0.0)
    return WayDraws(drawn.parameters[NAME], named, sweeps)


def inner_sweeps(
    posterior: Posterior, relation: Regression, *, seed: Seed, threads: int | None = None
) -> int:
    """Find how long an inner chain must be to forget its start.

    At some draws of the response probabilities, chains are run with these held; the length is
    doubled until the mean autocorrelation of every coefficient from one end to the other is
    below 0.05.
    """
    elements = posterior.draws.flat_elements
    at = np.linspace(0, len(elements) - 1, PILOTS).astype(int)
    held = np.repeat(elements[at][:, None], PILOT_DRAWS, axis=1)
    sweeps, step = FIRST_SWEEPS, 5
    drawn = sample_held(relation.task, held, sweeps=step, seed=seed, threads=threads)
    contrasts = against_mean(drawn.parameters[NAME])
    flat = contrasts.reshape(PILOTS, PILOT_DRAWS, -1)
    flat = flat - flat.mean(axis=1, keepdims=True)
    variance = np.maximum((flat**2).mean(axis=1), 1e-300)
    while sweeps < MOST_SWEEPS:
        lag = sweeps // step
        products = (flat[:, lag:] * flat[:, :-lag]).mean(axis=1) / variance
        if float(products.mean(axis=0).max()) < FORGOTTEN:
            break
        sweeps *= 2
    return sweeps


def against_mean(coefficients: Floats) -> Floats:
    """Return coefficients (..., K, P) less their mean over the classes: all the data speak of."""
    return np.asarray(coefficients - coefficients.mean(axis=-2, keepdims=True))


def worst_convergence(coefficients: Floats) -> tuple[float, float]:
    """Return the smallest effective sample size and largest R-hat of contrasts of classes."""
    contrasts = against_mean(coefficients)
    found = judge(
        {
            f"{k}, {p}": contrasts[:, :, k, p]
            for k in range(contrasts.shape[2])
            for p in range(contrasts.shape[3])
        }
    )
    return found.ess, found.r_hat


def _starts(posterior: Posterior) -> Floats:
    """Return the last draw (chain, E) of each chain of the measurement posterior."""
    return np.ascontiguousarray(posterior.draws.elements[:, -1])
