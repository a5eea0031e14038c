"""Starting points: scattered short runs, sorted into modes, and what was dropped.

A posterior may have several modes that a chain does not leave in any affordable time. Short runs
from scattered points find them; those far below the best are dropped, and that is reported.
"""

from __future__ import annotations

import threading
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.sampling.threads import on_threads

if TYPE_CHECKING:
    from bayeslca.sampling.chain import Chain, Kept, Task

SHORT_RUNS = 16
SHORT_SWEEPS = 200
SIGNATURE_DRAWS = 10
REACH = 10.0
SAME_NATS = 3.0
SAME_NATS_PER_PARAMETER = 0.25
"""Runs belong to one mode when they differ by less than SAME_NATS plus so much a parameter: in
one mode the log posterior varies by half a nat a parameter, and a short run averages that."""


@dataclass(frozen=True, eq=False)
class StartingPoints:
    """Where the chains began, and what the short runs before them found.

    Attributes
    ----------
    log_posterior : ndarray of float64, shape (n,)
        Log posterior (class summed out) of each short run: mean over its last half.
    mode : ndarray of int64, shape (n,)
        Mode of each short run; 0 is the best, then by falling log posterior.
    n_modes : int
        Number of modes within ``reach`` of the best.
    kept : ndarray of int64, shape (chains,)
        The short run that each chain goes on from.
    dropped : tuple of int
        Modes that no chain goes on from.
    best : float
        Log posterior of the best mode.
    reach : float
        Modes at most so many nats below the best keep a chain.
    shares, share_errors : tuple of float
        Where chains stayed in several modes and these were weighed: the share of the posterior
        that each holds, and its Monte Carlo error. Empty otherwise.
    why_unweighed : str
        Why modes that chains stayed in were not weighed; empty where they were, or there is one.
    """

    log_posterior: Floats
    mode: Ints
    n_modes: int
    kept: Ints
    dropped: tuple[int, ...]
    best: float
    reach: float = REACH
    shares: tuple[float, ...] = ()
    share_errors: tuple[float, ...] = ()
    why_unweighed: str = ""

    @property
    def n_runs(self) -> int:
        """Number of short runs."""
        return int(self.mode.size)

    @property
    def reached_best(self) -> int:
        """Number of short runs that ended in the best mode."""
        return int(np.sum(self.mode == 0))

    def gap(self, mode: int) -> float:
        """Nats by which the best run of a mode lies below the best mode."""
        return self.best - float(self.log_posterior[self.mode == mode].max())

    def joined(self) -> StartingPoints:
        """Join the modes that kept a chain into one: for when the chains turned out to agree."""
        together = set(self.mode[self.kept].tolist())
        if len(together) == 1:
            return self
        left = [0, *(m for m in range(int(self.mode.max()) + 1) if m not in together)]
        mode = np.array([0 if m in together else left.index(m) for m in self.mode.tolist()])
        return replace(
            self,
            mode=mode,
            n_modes=1 + sum(self.gap(m) <= self.reach for m in left[1:]),
            dropped=tuple(range(1, len(left))),
        )

    def in_words(self) -> str:
        """Say what the short runs found and what was dropped."""
        text = f"{self.reached_best} of {self.n_runs} short runs reached the best mode"
        parts = []
        for mode in range(1, int(self.mode.max()) + 1):
            n = int(np.sum(self.mode == mode))
            fate = ("was" if n == 1 else "were") + " dropped"
            if mode not in self.dropped:
                fate = "kept a chain"
            parts.append(f"{n} ended {self.gap(mode):.1f} nats lower and {fate}")
        return "; ".join([text, *parts])


def find_starting_points(
    task: Task,
    seed: np.random.SeedSequence,
    *,
    chains: int,
    threads: int,
    stop: threading.Event,
    runs: int = SHORT_RUNS,
    sweeps: int = SHORT_SWEEPS,
) -> tuple[StartingPoints, list[Chain]]:
    """Run short chains from scattered points and choose where the chains begin.

    Parameters
    ----------
    task : Task
    seed : numpy.random.SeedSequence
        One stream is spawned for each short run.
    chains : int
    threads : int
    stop : threading.Event
    runs, sweeps : int
        How many short runs, and how long.

    Returns
    -------
    StartingPoints
    list of Chain, one for each of ``kept``
        The short runs as they ended.
    """
    runs = max(runs, chains)
    rngs = [np.random.default_rng(child) for child in seed.spawn(runs)]
    short = [_scattered(task, rng, flat=i % 2 == 1) for i, rng in enumerate(rngs)]
    half = sweeps // 2

    def work(chain: Chain) -> Kept:
        chain.run(1, sweeps - half, stop)
        return chain.run(half, 1, stop)

    kept = on_threads(work, short, threads=threads, stop=stop)
    log_posterior = np.array([_log_posterior(task, one).mean() for one in kept])
    points = sort_into_modes(
        log_posterior,
        np.array([_fit(task, one) for one in kept]),
        task.units.count,
        same=SAME_NATS + SAME_NATS_PER_PARAMETER * _free_parameters(task),
        chains=chains,
    )
    return points, [short[i] for i in points.kept]


def sort_into_modes(
    log_posterior: Floats, fit: Floats, count: Ints, *, same: float, chains: int
) -> StartingPoints:
    """Group short runs whose fits are alike, and share the chains out among the modes.

    Parameters
    ----------
    log_posterior : ndarray, shape (n,)
    fit : ndarray, shape (n, U)
        Mean log probability of each unit.
    count : ndarray of int, shape (U,)
    same : float
        Runs are joined when they differ by fewer nats than this: half the count-weighted squared
        difference of their fits, plus the difference of their log posteriors. So are runs that
        are joined through others.
    chains : int
    """
    n = log_posterior.size
    group = np.arange(n)
    for a in range(n):
        for b in range(a):
            difference = 0.5 * float(np.sum(count * (fit[a] - fit[b]) ** 2))
            difference += abs(float(log_posterior[a] - log_posterior[b]))
            if difference < same:
                group[group == group[a]] = group[b]
    labels = sorted(set(group.tolist()), key=lambda g: -float(log_posterior[group == g].max()))
    mode = np.array([labels.index(g) for g in group.tolist()], dtype=np.int64)
    top = [float(log_posterior[mode == m].max()) for m in range(len(labels))]
    within = [m for m in range(len(labels)) if top[0] - top[m] <= REACH]
    kept = _share_out(log_posterior, mode, within[:chains], chains)
    used = set(mode[kept].tolist())
    return StartingPoints(
        log_posterior=log_posterior,
        mode=mode,
        n_modes=len(within),
        kept=kept,
        dropped=tuple(m for m in range(len(labels)) if m not in used),
        best=top[0],
    )


def _share_out(log_posterior: Floats, mode: Ints, modes: list[int], chains: int) -> Ints:
    """Give each mode one chain, its best run, and the best mode the chains that are left.

    Where the best mode has too few runs, the other modes' runs go on too.
    """
    ranked = np.argsort(-log_posterior, kind="stable")
    kept = [next(int(i) for i in ranked if mode[i] == m) for m in modes]
    for m in modes:
        kept += [int(i) for i in ranked if mode[i] == m and int(i) not in kept]
    first = kept[: len(modes)]
    chosen = (first + kept[len(modes) :])[:chains]
    while len(chosen) < chains:
        chosen.append(chosen[len(chosen) % len(modes)])
    return np.array(chosen, dtype=np.int64)


def _scattered(task: Task, rng: np.random.Generator, *, flat: bool) -> Chain:
    """Begin at a draw from the prior, or from flat Dirichlets where priors may hold runs close."""
    from bayeslca.sampling.chain import Chain

    blocks = BlockArrays.of(task.table)
    if flat:
        blocks = blocks.with_prior(np.ones(task.table.n_elements))
    elements = draw_inside(blocks, 1, rng)[0]
    prevalence = task.source.scatter(rng) if flat else task.source.simulate(rng)
    return Chain(task, elements, np.maximum(prevalence, 1e-300), rng)


def _log_posterior(task: Task, kept: Kept) -> Floats:
    return kept.log_likelihood + log_prior(
        task.table, task.source, kept.elements, kept.prevalence, kept.pooled_concentration
    )


def _fit(task: Task, kept: Kept) -> Floats:
    """Mean log probability of each unit (U,) over some draws of a short run."""
    some = np.linspace(0, kept.log_likelihood.size - 1, SIGNATURE_DRAWS).astype(int)
    draws = log_unit_likelihood(task.table, task.units, kept.elements[some], kept.prevalence[some])
    return np.asarray(draws.mean(axis=0))


def _free_parameters(task: Task) -> int:
    in_blocks = task.table.n_elements - task.table.n_blocks
    return max(1, in_blocks + task.source.n_rows * (task.source.n_classes - 1))
