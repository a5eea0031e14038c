"""The joint way: one posterior of answers and outcome, in which the outcome shapes the classes."""

from __future__ import annotations

import time
from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints, Seed
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource
from bayeslca.model.probabilities import class_shares, log_joint, membership
from bayeslca.relate.case_units import CaseUnits
from bayeslca.relate.outcomes.cut import case_of_unit
from bayeslca.relate.outcomes.draws import MOST_FOR_MEMBERSHIP, OutcomeDraws, flattened
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.relate.outcomes.quantities import class_means
from bayeslca.relate.same_classes import same_classes
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.outcome_step import BY_CLASS, SHARED, OutcomeGibbs
from bayeslca.sampling.pooled_source import PooledStep
from bayeslca.sampling.steps import DirichletStep, SourceStep

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MAX_SWEEPS = 40_000


def joint_draws(
    posterior: Posterior,
    outcome: OutcomeModel,
    cases: CaseUnits,
    *,
    seed: Seed = None,
    draws: int = 1000,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int = MAX_SWEEPS,
    threads: int | None = None,
) -> OutcomeDraws:
    """Draw from the joint posterior of answers and outcome.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model: where the chains start, and what the classes are called.
    outcome : OutcomeModel
        Cases in the order of the responses.
    cases : CaseUnits
        A unit for every case.
    seed, draws, ess, r_hat, max_sweeps, threads : see `bayeslca.sampling.joint_gibbs.sample_joint`
    """
    from bayeslca.sampling.joint_chain import joint_task
    from bayeslca.sampling.joint_gibbs import sample_joint

    begin = time.perf_counter()
    order = case_of_unit(cases)
    share = _shares(posterior, cases)

    def make_outcome(rng: np.random.Generator) -> OutcomeGibbs:
        classes = np.empty(order.size, dtype=np.int64)
        below = np.cumsum(share, axis=1)[:, :-1]
        classes[order] = (rng.random(order.size)[:, None] >= below).sum(axis=1)
        return OutcomeGibbs(outcome.data(order), outcome.log_prior, *outcome.start(classes, rng))

    source = posterior.model.prevalence_source

    def make_source(rng: np.random.Generator) -> SourceStep:
        if isinstance(source, DirichletPrevalence):
            return DirichletStep(source.concentration, rng)
        if isinstance(source, PooledPrevalence):
            return PooledStep(source, rng)
        return _ModelPrevalence(source, rng)

    task = joint_task(
        posterior.table,
        cases.units,
        source.n_rows,
        make_source,
        make_outcome,
        group_of_row=np.arange(source.n_rows),
    )

    def watch(so_far: JointDraws) -> Mapping[str, Floats]:
        found = with_own_names(posterior, so_far)
        means = class_means(outcome, found.by_class, found.shared)
        return {f"mean of class {k + 1}": means[..., k] for k in range(means.shape[-1])}

    drawn = sample_joint(
        task,
        posterior.draws.elements[:, -1],
        seed=seed,
        draws=draws,
        ess=min(ess, 0.25 * draws * posterior.draws.n_chains),
        r_hat=r_hat,
        max_sweeps=max_sweeps,
        threads=threads,
        watch=watch,
    )
    named = with_own_names(posterior, drawn)
    return OutcomeDraws(
        by_class=named.by_class,
        shared=named.shared,
        elements=named.elements,
        prevalence=named.prevalence,
        membership=joint_membership(posterior, outcome, cases, named)[cases.unit_of_case],
        sweeps=drawn.sweeps,
        limit_reached=drawn.limit_reached,
        seconds=time.perf_counter() - begin,
    )


def _shares(posterior: Posterior, cases: CaseUnits) -> Floats:
    """Return P(class | answers) (U, K) at one draw."""
    draws = posterior.draws
    return membership(posterior.table, cases.units, draws.elements[0, -1], draws.prevalence[0, -1])


def with_own_names(posterior: Posterior, drawn: JointDraws) -> OutcomeDraws:
    """Return the draws with the measurement model's names of classes."""
    named = same_classes(posterior, drawn)
    by_class = named.parameter(BY_CLASS)
    return OutcomeDraws(
        by_class,
        drawn.parameters[SHARED],
        named.draws.elements,
        named.draws.prevalence,
        np.zeros((0, by_class.shape[2])),
    )


def joint_membership(
    posterior: Posterior, outcome: OutcomeModel, cases: CaseUnits, drawn: OutcomeDraws
) -> Floats:
    """Return the mean of P(class | answers, outcome) over draws, shape (U, K)."""
    from bayeslca.sampling.outcome_density import fill_log_density

    data = outcome.data(case_of_unit(cases))
    flat = flattened(drawn, MOST_FOR_MEMBERSHIP)
    density = np.empty((cases.units.n_units, outcome.n_classes))
    total = np.zeros_like(density)
    for part, joint in log_joint(posterior.table, cases.units, flat.elements, flat.prevalence):
        for s, (by_class, shared) in enumerate(
            zip(flat.by_class[part], flat.shared[part], strict=True)
        ):
            fill_log_density(data, np.ascontiguousarray(by_class), shared, density)
            total += class_shares(joint[:, :, s] + density.T).T
    return total / len(flat.elements)


class _ModelPrevalence:
    """A prevalence source with known, equal, bounded or ordered prevalences, as a step."""

    def __init__(self, source: PrevalenceSource, rng: np.random.Generator) -> None:
        self.source = source
        self.value = source.simulate(rng)

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Nothing beside the prevalences."""
        return {}

    def prevalence(self, out: Floats) -> None:
        """Write the current prevalences (row, K)."""
        out[:] = self.value

    def draw(self, class_count: Ints, prevalence: Floats, rng: np.random.Generator) -> None:
        """Draw the prevalences given the cases in each class."""
        self.value = self.source.draw(rng, class_count.astype(np.float64))
        prevalence[:] = self.value

    def permute(self, permutation: Ints) -> None:
        """Rename classes."""
        self.value = np.ascontiguousarray(self.value[:, permutation])

    def log_prior(self) -> float:
        """Return the log prior density; -inf where the constraints are not kept."""
        return float(self.source.log_density(self.value))
