"""A chain: the state of one Gibbs sampler, its generator, and the task it works on."""

from __future__ import annotations

import threading
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import SamplingError
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource
from bayeslca.model.symmetry import Symmetry, element_map
from bayeslca.model.table import Table, UnitTable
from bayeslca.sampling.bounds_layout import Bounded, Shares, bounded, shares
from bayeslca.sampling.layout import Layout, arrange, workspace
from bayeslca.sampling.pool_layout import pool

if TYPE_CHECKING:
    from collections.abc import Sequence

MOVES_EVERY = 5
"""Sweeps from one proposal of a permutation to the next."""

BLOCK_SECONDS = 0.05
"""A chain looks at the stop flag about so often."""


class Stopped(Exception):
    """A chain left its work because the stop flag was set."""


@dataclass(frozen=True, eq=False)
class Task:
    """What the chains sample: the same for all of them, never changed.

    Attributes
    ----------
    table : Table
    units : UnitTable
    source : DirichletPrevalence, ConstrainedPrevalence or PooledPrevalence
    layout : Layout
    bounds : Bounded
        Bounds and orders of the table's elements.
    shares : Shares
        Constrained prevalences; of none where they are not.
    permutations : ndarray of int64, shape (M, groups, K)
        Permutation moves to propose; none when labels only differ where the prior does not.
    element_maps : ndarray of int64, shape (M, E)
    """

    table: Table
    units: UnitTable
    source: DirichletPrevalence | ConstrainedPrevalence | PooledPrevalence
    layout: Layout
    bounds: Bounded
    shares: Shares
    permutations: Ints
    element_maps: Ints

    @property
    def is_bounded(self) -> bool:
        """True when probabilities are bounded or ordered, or prevalences constrained."""
        return bool(self.bounds.block.shape[0] or self.shares.element.shape[0])

    @property
    def is_pooled(self) -> bool:
        """True when units are pooled."""
        return isinstance(self.source, PooledPrevalence)


@dataclass(frozen=True, eq=False)
class Kept:
    """Kept draws of one chain; see `bayeslca.sampling.draws.Draws`.

    Attributes
    ----------
    elements : ndarray, shape (draw, E)
    prevalence : ndarray, shape (draw, groups, K)
    log_likelihood, swaps : ndarray, shape (draw,)
    concentration : ndarray, shape (draw, K) or (draw, 0)
        Of pooled units.
    """

    elements: Floats
    prevalence: Floats
    log_likelihood: Floats
    swaps: Floats
    concentration: Floats = field(default_factory=lambda: np.zeros((0, 0)))

    @classmethod
    def empty(
        cls, draws: int, n_elements: int, groups: int, n_classes: int, pooled: bool = False
    ) -> Kept:
        """Return room for so many draws."""
        return cls(
            np.empty((draws, n_elements)),
            np.empty((draws, groups, n_classes)),
            np.empty(draws),
            np.empty(draws),
            np.empty((draws, n_classes if pooled else 0)),
        )

    @property
    def pooled_concentration(self) -> Floats | None:
        """The concentration; None where units are not pooled."""
        return self.concentration if self.concentration.shape[-1] else None

    def part(self, rows: slice) -> Kept:
        """Return some of the draws (views, not copies)."""
        return Kept(
            self.elements[rows],
            self.prevalence[rows],
            self.log_likelihood[rows],
            self.swaps[rows],
            self.concentration[rows],
        )


def make_task(
    table: Table, units: UnitTable, source: PrevalenceSource, labels: Symmetry | None
) -> Task:
    """Collect what the chains need.

    Parameters
    ----------
    table : Table
    units : UnitTable
    source : PrevalenceSource
    labels : Symmetry or None
        None to do without permutation moves.

    Raises
    ------
    SamplingError
        Where the Gibbs sampler has no exact step.
    """
    if not isinstance(source, DirichletPrevalence | ConstrainedPrevalence | PooledPrevalence):
        msg = (
            f"prevalences come from {type(source).__name__}, for which the Gibbs sampler has no "
            "exact step. Use sampler='nuts'."
        )
        raise SamplingError(msg)
    permutations = np.zeros((0, table.n_prevalence_rows, table.n_classes), dtype=np.int64)
    if labels is not None and labels.table_group.n_members > labels.prior_group.n_members:
        proposals = np.ascontiguousarray(labels.table_group.proposals, dtype=np.int64)
        permutations = proposals[[source.keeps_ties(move) for move in proposals]]
    maps = [element_map(table, permutation) for permutation in permutations]
    return Task(
        table=table,
        units=units,
        source=source,
        layout=arrange(table, units, source.n_rows),
        bounds=bounded(table),
        shares=shares(source, table.n_classes),
        permutations=permutations,
        element_maps=np.asarray(maps, dtype=np.int64).reshape(len(maps), table.n_elements),
    )


class Chain:
    """One chain: everything that changes while it runs belongs to it alone.

    Parameters
    ----------
    task : Task
    elements : ndarray, shape (E,)
    prevalence : ndarray, shape (groups, K)
    rng : numpy.random.Generator
    concentration : ndarray, shape (K,), optional
        Where that of pooled units begins; 1 when left out, and forgotten after one sweep.
    """

    def __init__(
        self,
        task: Task,
        elements: Floats,
        prevalence: Floats,
        rng: np.random.Generator,
        concentration: Floats | None = None,
    ) -> None:
        self.task = task
        self.elements = np.array(elements, dtype=np.float64)
        self.prevalence = np.array(prevalence, dtype=np.float64, order="C")
        self.rng = rng
        self.sweeps = 0
        begin = np.ones(task.source.n_classes) if concentration is None else concentration
        self._state = np.tile(np.asarray(begin, dtype=np.float64), (task.source.n_rows, 1))
        self._pool = None
        if isinstance(task.source, PooledPrevalence):
            self._pool = pool(task.source, task.layout)
        self._work = workspace(task.layout)
        self._seconds_per_sweep = 1e-5

    def run(
        self,
        draws: int,
        thin: int,
        stop: threading.Event | None = None,
        report: Callable[[int], None] | None = None,
    ) -> Kept:
        """Go on for draws x thin sweeps and keep every thin-th state.

        The compiled code runs in blocks of some hundredths of a second; what is drawn does not
        depend on where they end.

        Parameters
        ----------
        draws, thin : int
        stop : threading.Event, optional
            Looked at between blocks.
        report : callable, optional
            Given the number of sweeps of each block.

        Raises
        ------
        Stopped
            When the stop flag was set.
        SamplingError
            When a unit has probability 0 in every class.
        """
        groups, n_classes = self.prevalence.shape
        kept = Kept.empty(draws, self.elements.size, groups, n_classes, pooled=self.task.is_pooled)
        first = 0
        while first < draws:
            if stop is not None and stop.is_set():
                raise Stopped
            block = max(1, int(BLOCK_SECONDS / (self._seconds_per_sweep * thin)))
            last = min(draws, first + block)
            start = time.perf_counter()
            self._run_block(kept.part(slice(first, last)), thin)
            n_sweeps = (last - first) * thin
            self._seconds_per_sweep = max((time.perf_counter() - start) / n_sweeps, 1e-7)
            if report is not None:
                report(n_sweeps)
            first = last
        return kept

    @property
    def concentration(self) -> Floats | None:
        """Concentration times mean (K,) of pooled units; None where units are not pooled."""
        return self._state[0].copy() if self.task.is_pooled else None

    def _run_block(self, kept: Kept, thin: int) -> None:
        from bayeslca.sampling.gibbs import run_sweeps

        task = self.task
        rest = (
            task.source.density_parameter,
            task.permutations,
            task.element_maps,
            MOVES_EVERY,
            self.sweeps,
            thin,
            self.elements,
            self.prevalence,
            kept.elements,
            kept.prevalence,
            kept.log_likelihood,
            kept.swaps,
            self.rng,
        )
        if self._pool is not None:
            from bayeslca.sampling.pooled_gibbs import run_pooled_sweeps

            failed = run_pooled_sweeps(
                task.layout,
                self._work,
                task.bounds,
                self._pool,
                np.empty_like(self.elements),
                self._state,
                kept.concentration,
                *rest[1:],
            )
        elif task.is_bounded:
            from bayeslca.sampling.bounded_gibbs import run_bounded_sweeps, scratch

            room = scratch(task.layout, task.shares)
            failed = run_bounded_sweeps(
                task.layout, self._work, task.bounds, task.shares, room, *rest
            )
        else:
            failed = run_sweeps(task.layout, self._work, *rest)
        self.sweeps += kept.log_likelihood.size * thin
        if failed:
            msg = "some answers have probability 0 in every class; check the fixed probabilities."
            raise SamplingError(msg)


def thinned(older: Kept, newer: Kept) -> Kept:
    """Drop every other draw of the older ones and append the newer, thinned twice as much."""
    half = older.part(slice(1, None, 2))
    pairs = older.swaps[: 2 * half.swaps.size].reshape(-1, 2).sum(axis=1)
    return Kept(
        np.concatenate([half.elements, newer.elements]),
        np.concatenate([half.prevalence, newer.prevalence]),
        np.concatenate([half.log_likelihood, newer.log_likelihood]),
        np.concatenate([pairs, newer.swaps]),
        np.concatenate([half.concentration, newer.concentration]),
    )


def stacked(chains: Sequence[Kept]) -> Kept:
    """Stack the kept draws of chains: a leading chain axis on every array."""
    return Kept(
        np.stack([kept.elements for kept in chains]),
        np.stack([kept.prevalence for kept in chains]),
        np.stack([kept.log_likelihood for kept in chains]),
        np.stack([kept.swaps for kept in chains]),
        np.stack([kept.concentration for kept in chains]),
    )
