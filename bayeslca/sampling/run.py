"""Running the sampler: starting points, chains on threads, rounds until the rule is met.

Results depend on the seed alone, never on the number of threads: every chain has a generator of
its own, spawned from one seed sequence.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.exceptions import SamplingError
from bayeslca.model.compile import compile_units
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.prior_density import log_prior
from bayeslca.model.symmetry import Symmetry
from bayeslca.model.table import Table, UnitTable
from bayeslca.responses.responses import Responses
from bayeslca.sampling.chain import Chain, Kept, Task, make_task, stacked, thinned
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.possible import refuse_impossible
from bayeslca.sampling.progress import Meter, Show, shown
from bayeslca.sampling.starting_points import StartingPoints, find_starting_points
from bayeslca.sampling.stopping import StoppingRule, judge, label_free, watched_units
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel

Watch: TypeAlias = Callable[[Draws], Mapping[str, Floats]]
"""More quantities (chain, draw) for the stopping rule, computed at the end of each round."""

WARMUP = 500
FIRST_THIN = 4
MAX_SWEEPS = 400_000


def draw_posterior(
    model: LatentClassModel,
    responses: Responses | UnitTable,
    *,
    seed: Seed = None,
    chains: int = 4,
    draws: int = 1000,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int = MAX_SWEEPS,
    threads: int | None = None,
    progress: bool | Show = True,
    watch: Watch | None = None,
) -> Draws:
    """Draw from the posterior of a model by Gibbs sampling.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses or UnitTable
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    chains : int
    draws : int
        Kept draws per chain. When the rule needs a longer run, every other draw is dropped and
        the chain goes on thinned twice as much.
    ess, r_hat : float
        The rule: every label-free quantity (log likelihood, sorted prevalences, probabilities
        of some patterns) and every watched one has bulk and tail effective sample size of at
        least ``ess`` and R-hat of at most ``r_hat``.
    max_sweeps : int
        Sweeps per chain at most; when they are used up, ``limit_reached`` is set.
    threads : int, optional
        As many as there are processors when not given.
    progress : bool or callable
        True shows a bar on a terminal; a callable is given a `Progress` ten times a second.
    watch : callable, optional
        More quantities for the rule, such as relabelled ones.

    Returns
    -------
    Draws
        Not relabelled.

    Raises
    ------
    ModelError
        When there are no answers, or answers that the model declares impossible.
    SamplingError
        When the rule cannot be met by so few kept draws, or a part of the model has no exact
        step.
    KeyboardInterrupt
        On Ctrl-C, when all chains have stopped.
    """
    units = responses
    if isinstance(responses, Responses):
        units = compile_units(model.table, responses.units)
    assert isinstance(units, UnitTable)
    refuse_impossible(model.table, units, responses)
    return sample_table(
        model.table,
        units,
        model.prevalence_source,
        model.symmetry,
        seed=seed,
        chains=chains,
        draws=draws,
        ess=ess,
        r_hat=r_hat,
        max_sweeps=max_sweeps,
        threads=threads,
        progress=progress,
        watch=watch,
    )


def sample_table(
    table: Table,
    units: UnitTable,
    source: PrevalenceSource,
    labels: Symmetry | None,
    *,
    seed: Seed = None,
    chains: int = 4,
    draws: int = 1000,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int = MAX_SWEEPS,
    threads: int | None = None,
    progress: bool | Show = False,
    watch: Watch | None = None,
) -> Draws:
    """Draw from the posterior of a compiled model; see `draw_posterior`."""
    begin = time.perf_counter()
    _check_sizes(chains, draws, ess, max_sweeps)
    refuse_impossible(table, units, units)
    task = make_task(table, units, source, labels)
    threads = threads or default_threads()
    stop = threading.Event()
    sequence = seed_sequence(seed)
    rule = StoppingRule(ess, r_hat)
    with shown(progress) as show:
        points, begun = find_starting_points(
            task, sequence.spawn(1)[0], chains=chains, threads=threads, stop=stop
        )
        # The chains go on from where the short runs ended, with generators of their own: two
        # chains may go on from one short run.
        running = [
            Chain(
                task,
                one.elements,
                one.prevalence,
                np.random.default_rng(child),
                one.concentration,
            )
            for one, child in zip(begun, sequence.spawn(chains), strict=True)
        ]
        meter = Meter(show, rule, most=max_sweeps * chains)
        rounds = _Rounds(
            task, running, points, rule, draws, max_sweeps, threads, stop, meter, watch
        )
        found = rounds.until_done()
    if not found.limit_reached:
        points = points.joined()  # chains that began apart agree now: it was one mode
    seconds = time.perf_counter() - begin
    seed_number = int(seed) if isinstance(seed, int | np.integer) else None
    return _draws(task, found, points, seed=seed_number, seconds=seconds)


def seed_sequence(seed: Seed) -> np.random.SeedSequence:
    """Return the one seed sequence from which every stream is spawned."""
    if isinstance(seed, np.random.SeedSequence):
        return seed
    if isinstance(seed, np.random.Generator):
        return np.random.SeedSequence(seed.integers(2**63, size=4).tolist())
    return np.random.SeedSequence(seed)


@dataclass(frozen=True, eq=False)
class _Found:
    """What the rounds gave: kept draws of all chains, and how they were come by."""

    kept: Kept
    sweeps: int
    thin: int
    limit_reached: bool


@dataclass(frozen=True, eq=False)
class _Rounds:
    """The rounds of one run: sample, look, thin, sample on."""

    task: Task
    chains: list[Chain]
    points: StartingPoints
    rule: StoppingRule
    draws: int
    max_sweeps: int
    threads: int
    stop: threading.Event
    meter: Meter
    watch: Watch | None

    def until_done(self) -> _Found:
        """Double the run until the rule is met or the sweeps are used up.

        The warm-up stays as it is: by the time the rule is met, a beginning as long as the
        autocorrelation weighs no more than one part in ``ess``.
        """
        thin = FIRST_THIN
        while thin > 1 and WARMUP + thin * self.draws > self.max_sweeps:
            thin -= 1
        kept = self._all_chains(lambda chain: self._begin(chain, thin), WARMUP + self.draws * thin)
        while True:
            sweeps = WARMUP + self.draws * thin
            if self._is_met(kept, sweeps, thin):
                return _Found(stacked(kept), sweeps, thin, limit_reached=False)
            if WARMUP + self.draws * 2 * thin > self.max_sweeps:
                return _Found(stacked(kept), sweeps, thin, limit_reached=True)
            thin *= 2
            newer = self._go_on(thin)
            kept = [thinned(*pair) for pair in zip(kept, newer, strict=True)]

    def _begin(self, chain: Chain, thin: int) -> Kept:
        chain.run(1, WARMUP, self.stop, self.meter.add)
        return chain.run(self.draws, thin, self.stop, self.meter.add)

    def _go_on(self, thin: int) -> list[Kept]:
        draws = self.draws - self.draws // 2
        return self._all_chains(
            lambda chain: chain.run(draws, thin, self.stop, self.meter.add),
            WARMUP + self.draws * thin,
        )

    def _all_chains(self, work: Callable[[Chain], Kept], sweeps: int) -> list[Kept]:
        self.meter.plan(sweeps * len(self.chains))
        return on_threads(
            work, self.chains, threads=self.threads, stop=self.stop, look=self.meter.look
        )

    def _is_met(self, kept: list[Kept], sweeps: int, thin: int) -> bool:
        found = _Found(stacked(kept), sweeps, thin, limit_reached=False)
        quantities = label_free(
            self.task.table,
            watched_units(self.task.units),
            found.kept.elements,
            found.kept.prevalence,
            found.kept.log_likelihood,
            found.kept.pooled_concentration,
        )
        if self.watch is not None:
            draws = _draws(self.task, found, self.points, seed=None, seconds=0.0)
            quantities.update(self.watch(draws))
        convergence = judge(quantities)
        self.meter.judged(convergence)
        return convergence.meets(self.rule)


def _draws(
    task: Task, found: _Found, points: StartingPoints, *, seed: int | None, seconds: float
) -> Draws:
    kept = found.kept
    return Draws(
        elements=kept.elements,
        prevalence=kept.prevalence,
        log_likelihood=kept.log_likelihood,
        log_prior=log_prior(
            task.table, task.source, kept.elements, kept.prevalence, kept.pooled_concentration
        ),
        statistics={"accepted_swaps": kept.swaps},
        sampler="gibbs",
        seed=seed,
        sweeps=found.sweeps,
        warmup=WARMUP,
        thin=found.thin,
        seconds=seconds,
        limit_reached=found.limit_reached,
        concentration=kept.pooled_concentration,
        starts=points,
    )


def _check_sizes(chains: int, draws: int, ess: float, max_sweeps: int) -> None:
    if chains < 1 or draws < 4:
        msg = (
            f"chains={chains}, draws={draws}: sampling takes at least 1 chain and 4 kept draws "
            "per chain. The usual values are chains=4, draws=1000."
        )
        raise SamplingError(msg)
    if ess > chains * draws:
        msg = (
            f"ess={ess:g} asks for more effective draws than {chains} chains of {draws} kept "
            f"draws hold. Keep more (draws={int(2 * ess / chains)}) or lower ess."
        )
        raise SamplingError(msg)
    if max_sweeps < WARMUP + draws:
        msg = (
            f"max_sweeps={max_sweeps} leaves no room for {WARMUP} sweeps of warm-up and {draws} "
            f"kept draws. Set it to {WARMUP + draws * FIRST_THIN} or more."
        )
        raise SamplingError(msg)
