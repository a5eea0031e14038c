"""Refits without some of the cases: short chains that start from the posterior's own draws.

What a model predicts for cases that it has not seen is found by fitting it without them. The
chains start from draws of the posterior of all cases, in the mode that it is in, so that little
warm-up is needed; they go on until what they are for is precise enough. Leaving out one case,
a tenth of the cases or a whole group are the same thing with other counts.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, TypeAlias

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.comparison.information_criteria import mcse_of_mean
from bayeslca.assess.left_out.one_case_bridge import one_case_bridge
from bayeslca.exceptions import SamplingError
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.sampling.chain import Chain, Kept, Task, make_task, stacked, thinned
from bayeslca.sampling.layout import arrange
from bayeslca.sampling.progress import Progress, Show, shown
from bayeslca.sampling.stopping import some_units
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

CHAINS = 4
DRAWS = 500
FIRST_THIN = 2
WARMUP = 250
WARMUP_THINS = 20
"""Warm-up sweeps for each sweep between two kept draws of the posterior: slow chains need more."""
MOST_SWEEPS = 60_000
"""Sweeps per chain at most, or those of the posterior's own chains where they were fewer."""
LEAST_SWEEPS = 10_000
PRECISION = 0.05
"""Monte Carlo error, in nats of the sum over the cases left out, at which a refit ends."""
LEAST_ESS = 200.0
SUMMARY_ESS = 400.0
"""Of each quantity that is asked for besides: an error of a twentieth of its spread."""
FEWEST_ESS = 50.0
"""With a smaller effective sample size, or a larger R-hat than the next, a refit does not count."""
R_HAT, WORST_R_HAT = 1.02, 1.05

Summarise: TypeAlias = Callable[[Floats, Floats], Floats]
"""Makes quantities (chain, draw, ...) of a refit's elements (chain, draw, E) and prevalences."""


@dataclass(frozen=True, eq=False)
class Without:
    """What a refit leaves out, and what it is asked.

    Attributes
    ----------
    count : ndarray of int64, shape (U,)
        Cases of each unit that stay.
    scored : ndarray of int64, shape (V,)
        Units whose predictive density is wanted.
    weight : ndarray of int64, shape (V,)
        What each of them counts in the sum that is to be precise: cases.
    key : tuple of int
        Names the refit's stream of random numbers, whatever else is refitted.
    given : ndarray of float64, shape (chain, draw), or None
        Where one case is left out: log p(its answers | parameters) at the posterior's own draws,
        for a bridge between both posteriors.
    """

    count: Ints
    scored: Ints
    weight: Ints
    key: tuple[int, ...]
    given: Floats | None = None


@dataclass(frozen=True, eq=False)
class Refit:
    """What a refit gave.

    Attributes
    ----------
    log_density : ndarray of float64, shape (V,)
        Log predictive density of one case of each scored unit.
    mcse : ndarray of float64, shape (V,)
        Monte Carlo standard error of each, from the refit's own draws.
    total_mcse : float
        Of the weighted sum: the units of one refit share its draws.
    ess, r_hat : float
        Of that sum's first-order form.
    sweeps : int
        Sweeps per chain, warm-up included.
    settled : bool
        Whether the figures are precise enough to be used.
    given : ndarray of float64, shape (chain, draw), or None
        What each draw of the posterior of all cases adds to ``log_density``, to first order;
        None where these draws were not used.
    summary : ndarray of float64, shape (chain, draw, ...), or None
        What was asked for besides.
    """

    log_density: Floats
    mcse: Floats
    total_mcse: float
    ess: float
    r_hat: float
    sweeps: int
    settled: bool
    given: Floats | None = None
    summary: Floats | None = None


def why_no_refit(posterior: Posterior) -> str:
    """Return why a model cannot be refitted here; empty where it can."""
    try:
        _task(posterior)
    except SamplingError as error:
        return f"refits need the Gibbs sampler, and {str(error).split('. ')[0]}"
    return ""


def refit_without(
    posterior: Posterior,
    wanted: Sequence[Without],
    *,
    seed: int | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
    summarise: Summarise | None = None,
) -> list[Refit]:
    """Refit a model without some cases, several refits at a time.

    Parameters
    ----------
    posterior : Posterior
        Of all cases; where the chains start.
    wanted : sequence of Without
    seed : int, optional
        That of the posterior when not given. Each refit has a stream of its own.
    threads : int, optional
        As many as there are processors when not given; results do not depend on it.
    progress : bool or callable
        True shows a bar on a terminal; a callable is given a `Progress` ten times a second.
    summarise : callable, optional
        Makes ``summary`` of each refit; it is made precise as well.

    Returns
    -------
    list of Refit

    Raises
    ------
    SamplingError
        When a part of the model has no exact step, or no case would be left.
    KeyboardInterrupt
        On Ctrl-C, when all refits have stopped.
    """
    if not wanted:
        return []
    if any(one.count.sum() == 0 for one in wanted):
        msg = (
            "a refit would have no case left. Leaving cases out takes at least two cases (or "
            "groups, where whole groups are left out)."
        )
        raise SamplingError(msg)
    task = _task(posterior)
    root = seed if seed is not None else posterior.draws.seed or 0
    stop = threading.Event()
    with shown(progress, "Refitting", "from the posterior's draws") as show:
        meter = _Meter(show, len(wanted) * CHAINS * (_warmup(posterior) + DRAWS * FIRST_THIN))
        runs = [_Run(posterior, task, one, root, stop, meter, summarise) for one in wanted]
        return on_threads(
            _Run.done,
            runs,
            threads=threads or default_threads(),
            stop=stop,
            look=meter.look,
        )


def _task(posterior: Posterior) -> Task:
    model = posterior.model
    return make_task(model.table, posterior.unit_table, model.prevalence_source, model.symmetry)


def _warmup(posterior: Posterior) -> int:
    return int(np.clip(WARMUP_THINS * posterior.draws.thin, WARMUP, LEAST_SWEEPS // 4))


class _Meter:
    """Counts the sweeps of all refits and tells a callback how much is left."""

    def __init__(self, show: Show, planned: int) -> None:
        self._show, self._start = show, time.perf_counter()
        self._planned, self._done = [planned], [0]

    def add(self, sweeps: int) -> None:
        self._done.append(sweeps)  # from the refits' threads: appending is atomic

    def plan(self, more: int) -> None:
        self._planned.append(more)

    def look(self) -> None:
        done, planned = sum(self._done), sum(self._planned)
        seconds = time.perf_counter() - self._start
        left = seconds * max(planned / done - 1.0, 0.0) if done else float("nan")
        self._show(Progress(done, planned, float("nan"), float("nan"), seconds, left))


@dataclass(frozen=True, eq=False)
class _Run:
    """One refit: its chains run one after the other, as other refits take the other threads."""

    posterior: Posterior
    task: Task
    wanted: Without
    seed: int
    stop: threading.Event
    meter: _Meter
    summarise: Summarise | None

    def done(self) -> Refit:
        """Sample, look, and sample on until the sum is precise or the sweeps are used up."""
        task, warmup, thin = self._without(), _warmup(self.posterior), FIRST_THIN
        emptied = self._emptied(task)
        limit = int(np.clip(self.posterior.draws.sweeps, LEAST_SWEEPS, MOST_SWEEPS))
        chains = self._chains(task)
        for chain in chains:
            chain.run(1, warmup, self.stop, self.meter.add)
        kept = [chain.run(DRAWS, thin, self.stop, self.meter.add) for chain in chains]
        while True:
            found = self._look(stacked(kept), emptied, warmup + thin * DRAWS)
            precise = found.total_mcse <= PRECISION and found.ess >= LEAST_ESS
            precise = precise and found.r_hat <= R_HAT and _is_precise(found.summary)
            if precise or warmup + 2 * thin * DRAWS > limit:
                return found
            thin *= 2
            newer = DRAWS - DRAWS // 2
            self.meter.plan(newer * thin * len(chains))
            kept = [
                thinned(older, chain.run(newer, thin, self.stop, self.meter.add))
                for older, chain in zip(kept, chains, strict=True)
            ]

    def _without(self) -> Task:
        """Return the task without the cases that are left out."""
        whole = self.task.units
        units = replace(whole, count=np.asarray(self.wanted.count, dtype=np.int64))
        units = some_units(units, np.flatnonzero(units.count > 0))
        return replace(
            self.task,
            units=units,
            layout=arrange(self.task.table, units, self.task.source.n_rows),
        )

    def _chains(self, task: Task) -> list[Chain]:
        """Start each chain at a draw of the posterior, from one of its chains after the other."""
        draws = self.posterior.draws
        children = np.random.SeedSequence(self.seed, spawn_key=self.wanted.key).spawn(CHAINS)
        out = []
        for c, child in enumerate(children):
            rng = np.random.default_rng(child)
            at = c % draws.n_chains, int(rng.integers(draws.n_draws))
            prevalence = np.maximum(draws.prevalence[at], 1e-300)
            out.append(Chain(task, draws.elements[at], prevalence, rng))
        return out

    def _emptied(self, task: Task) -> Ints:
        """Return the rows of prevalences that are known by their prior alone."""
        left = np.bincount(
            task.units.prevalence_row, weights=task.units.count, minlength=task.source.n_rows
        )
        return np.flatnonzero(left == 0)

    def _look(self, kept: Kept, emptied: Ints, sweeps: int) -> Refit:
        from arviz_stats.base import array_stats

        wanted, source = self.wanted, self.task.source
        scored = some_units(self.task.units, wanted.scored)
        prevalence = kept.prevalence
        if emptied.size and isinstance(source, DirichletPrevalence):
            # A case's density is linear in them: their mean is exact, and has no noise.
            mean = source.concentration / source.concentration.sum(axis=1, keepdims=True)
            prevalence = prevalence.copy()
            prevalence[:, :, emptied] = mean[emptied]
        log_p = log_unit_likelihood(self.task.table, scored, kept.elements, prevalence)
        log_density, parts, given, settled = _densities(log_p, wanted.given)
        total = parts @ wanted.weight.astype(np.float64)
        ess, r_hat = np.inf, 1.0
        if np.ptp(total) > 1e-12:
            ess = float(array_stats.ess(total, method="mean"))
            r_hat = float(array_stats.rhat(total))
        return Refit(
            log_density=log_density,
            mcse=np.array([mcse_of_mean(parts[..., v]) for v in range(wanted.scored.size)]),
            total_mcse=mcse_of_mean(total),
            ess=ess,
            r_hat=r_hat,
            sweeps=sweeps,
            settled=bool(settled and ess >= FEWEST_ESS and r_hat <= WORST_R_HAT),
            given=given,
            summary=self.summarise(kept.elements, kept.prevalence) if self.summarise else None,
        )


def _is_precise(summary: Floats | None) -> bool:
    """Tell whether the means of all quantities asked for (chain, draw, ...) are precise."""
    from arviz_stats.base import array_stats

    if summary is None:
        return True
    flat = summary.reshape(*summary.shape[:2], -1)
    moving = [flat[..., i] for i in range(flat.shape[-1]) if np.ptp(flat[..., i]) > 1e-12]
    return all(float(array_stats.ess(one, method="mean")) >= SUMMARY_ESS for one in moving)


def _densities(log_p: Floats, given: Floats | None) -> tuple[Floats, Floats, Floats | None, bool]:
    """Return log densities (V,), what each draw adds to them, and whether they can be trusted.

    Parameters
    ----------
    log_p : ndarray, shape (chain, draw, V)
        At the refit's draws.
    given : ndarray or None
        See `Without`.
    """
    if given is not None:
        found = one_case_bridge(log_p[..., 0], given)
        enough = found.least_draws >= FEWEST_ESS
        return np.array([found.log_density]), found.without[..., None], found.given, enough
    log_density = logsumexp(log_p, axis=(0, 1)) - np.log(log_p.shape[0] * log_p.shape[1])
    parts = np.exp(log_p - log_density) - 1.0
    least = log_p.shape[0] * log_p.shape[1] / (1.0 + np.square(parts).mean(axis=(0, 1)))
    return log_density, parts, None, bool((least >= FEWEST_ESS).all())
