"""The posterior under a sample's design: pseudo-samples, each fitted, draws pooled."""

from __future__ import annotations

import math
import threading
import time
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.relate.weighted.pseudo_samples import draw_pseudo_samples
from bayeslca.relate.weighted.weighted_likelihood import (
    STARTS,
    WeightedMaximumLikelihood,
    posterior_mean,
    reference_membership,
    weighted_maximum_likelihood,
)
from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior
from bayeslca.relate.weighted.weighted_score import WeightedUnits
from bayeslca.sampling.chain import Chain, Kept, Task, make_task, stacked
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.progress import Progress, Show, shown
from bayeslca.sampling.relabel_alike import relabel_alike
from bayeslca.sampling.run import seed_sequence
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses

FEWEST = 20
WARMUP = 400
DRAWS = 40
THIN = 10


def sample_weighted(
    model: LatentClassModel,
    responses: Responses,
    *,
    pseudo_samples: int = 100,
    draws: int = DRAWS,
    seed: int | None = None,
    unweighted: Posterior | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
) -> WeightedPosterior:
    """Sample what is known of the population that a sample with a design was drawn from.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
        Read with weights, clusters or strata.
    pseudo_samples : int
        Data sets that undo the weights, each fitted; at least 20. The ends of intervals rest on
        their differences: 100 know a standard deviation between them to about 7 %.
    draws : int
        Kept of each.
    seed : int, optional
        Makes the draws the same every time, whatever the number of threads.
    unweighted : Posterior, optional
        The fit without the design, which gives starting points and the classes' names; sampled
        when left out.
    threads : int, optional
    progress : bool or callable
        True shows a bar on a terminal.

    Raises
    ------
    ModelError
        When the responses have no design, or no class allows an answer that was given.
    SamplingError
        When an option is out of range, or a part of the model has no Gibbs step.

    Notes
    -----
    Each pseudo-sample is fitted by a chain of its own that starts from a draw of the unweighted
    fit, so all chains stay in that fit's mode. See `bayeslca.relate.weighted.pseudo_samples` for
    what pseudo-samples are and why they are of the sample's size.
    """
    if pseudo_samples < FEWEST or draws < 4:
        msg = (
            f"pseudo_samples={pseudo_samples}, draws={draws}: take at least {FEWEST} pseudo-"
            "samples and 4 draws of each. The usual values are 100 and 40."
        )
        raise SamplingError(msg)
    if not isinstance(model.prevalence_source, DirichletPrevalence | ConstrainedPrevalence):
        msg = (
            f"prevalences come from {type(model.prevalence_source).__name__}; weights, clusters "
            "and strata are worked in for prevalences of their own in each group only. Take such "
            "a model, with the units or covariates as cluster or stratum where they are that."
        )
        raise SamplingError(msg)
    units = WeightedUnits.of(model, responses)
    sequence = seed_sequence(seed)
    for_points, for_data, for_chains = sequence.spawn(3)
    if unweighted is None:
        unweighted = model.sample(responses, seed=seed, threads=threads, progress=progress)
    likelihood = _likelihood(unweighted, responses, for_points, threads)
    at = posterior_mean(unweighted) if likelihood is None else likelihood.parameters
    blocks = AllBlocks.of(model)
    pseudo = draw_pseudo_samples(
        blocks, units, blocks.elements(at), pseudo_samples, np.random.default_rng(for_data)
    )
    begin = time.perf_counter()
    kept = fit_counts(unweighted, units, pseudo.counts, draws, for_chains, threads, progress)
    drawn = Draws(
        elements=kept.elements,
        prevalence=kept.prevalence,
        log_likelihood=kept.log_likelihood,
        log_prior=np.zeros(kept.log_likelihood.shape),
        seed=seed,
        sweeps=WARMUP + draws * THIN,
        warmup=WARMUP,
        thin=THIN,
        seconds=time.perf_counter() - begin,
    )
    return WeightedPosterior.of(
        unweighted=unweighted,
        responses=responses,
        draws=relabel_alike(model, units.table, drawn, reference_membership(unweighted)),
        group_share=_group_shares(units, pseudo.expected, model.n_groups),
        likelihood=likelihood,
    )


def _likelihood(
    unweighted: Posterior,
    responses: Responses,
    seed: np.random.SeedSequence,
    threads: int | None,
) -> WeightedMaximumLikelihood | None:
    """Fit by maximum likelihood; None where EM has no exact step for the model's constraints."""
    try:
        return weighted_maximum_likelihood(
            unweighted.model,
            responses,
            starting_points=STARTS,
            seed=int(seed.generate_state(1)[0]),
            alike=unweighted,
            threads=threads,
        )
    except ModelError:
        return None


def fit_counts(
    unweighted: Posterior,
    units: WeightedUnits,
    counts: Ints,
    draws: int,
    seed: np.random.SeedSequence,
    threads: int | None,
    progress: bool | Show,
) -> Kept:
    """Fit every pseudo-sample (n, unit) by a short chain."""
    model, n = unweighted.model, len(counts)
    task = make_task(model.table, units.cases, model.prevalence_source, model.symmetry)
    elements = unweighted.draws.flat_elements
    prevalence = unweighted.draws.flat_prevalence
    children = seed.spawn(n)
    stop = threading.Event()
    meter = _Meter((WARMUP + draws * THIN) * n)

    def work(i: int) -> Kept:
        rng = np.random.default_rng(children[i])
        start = int(rng.integers(len(elements)))
        chain = Chain(_with_counts(task, counts[i]), elements[start], prevalence[start], rng)
        chain.run(1, WARMUP, stop, meter.add)
        return chain.run(draws, THIN, stop, meter.add)

    with shown(progress) as show:
        kept = on_threads(
            work,
            range(n),
            threads=threads or default_threads(),
            stop=stop,
            look=lambda: show(meter.now()),
        )
    return stacked(kept)


class _Meter:
    """Counts the sweeps of all chains."""

    def __init__(self, planned: int) -> None:
        self._sweeps: list[int] = []
        self._planned = planned
        self._begin = time.perf_counter()

    def add(self, sweeps: int) -> None:
        """Count sweeps; chains call it from their threads (appending is atomic)."""
        self._sweeps.append(sweeps)

    def now(self) -> Progress:
        """Say how far the chains are."""
        done, seconds = sum(self._sweeps), time.perf_counter() - self._begin
        left = seconds * (self._planned / done - 1.0) if done else math.nan
        return Progress(done, max(self._planned, done), math.nan, math.nan, seconds, left)


def _with_counts(task: Task, counts: Ints) -> Task:
    layout = task.layout._replace(cases=np.ascontiguousarray(counts[task.layout.unit]))
    return replace(task, layout=layout)


def _group_shares(units: WeightedUnits, expected: Floats, n_groups: int) -> Floats:
    """Return the share of each group in each pseudo-sample, shape (pseudo-sample, group)."""
    member = np.eye(n_groups)[units.table.prevalence_row]
    sizes = expected @ member
    return np.asarray(sizes / sizes.sum(axis=1, keepdims=True))
