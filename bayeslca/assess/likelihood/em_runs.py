"""EM from many starting points: which maximum is the best, and how many runs reached it."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.exceptions import ModelError
from bayeslca.model.table import UnitTable
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.sampling.threads import default_threads, on_threads

MOST_STEPS = 10_000
TOLERANCE = 1e-6
"""A run ends when it has less than this left to gain, extrapolated."""
LAST_STEPS = 200_000
LAST_TOLERANCE = 1e-10
"""The best run then goes on so far."""
SAME = 1e-3
"""Runs within so many nats of the best have reached it."""


@dataclass(frozen=True, eq=False)
class Climbed:
    """What the runs found.

    Attributes
    ----------
    elements : ndarray, shape (E,)
        The best point.
    log_likelihood : float
        There.
    log_likelihoods : ndarray, shape (runs,)
        Of every run, in the order of the starting points.
    steps : int
        Steps of the best run after it was chosen.
    """

    elements: Floats
    log_likelihood: float
    log_likelihoods: Floats
    steps: int

    @property
    def reached_best(self) -> int:
        """Number of runs that reached the best maximum."""
        return int(np.sum(self.log_likelihoods >= self.log_likelihood - SAME))

    @property
    def ended(self) -> bool:
        """True when the best run ended by itself."""
        return self.steps < LAST_STEPS


def scattered(blocks: AllBlocks, n: int, rng: np.random.Generator) -> Floats:
    """Draw starting points (n, E), evenly over what bounds and orders allow."""
    return np.ascontiguousarray(draw_inside(blocks.blocks, n, rng))


def from_shares(blocks: AllBlocks, units: UnitTable, shares: Floats) -> Floats:
    """Return the starting point (1, E) that memberships (U, K) of the units give."""
    from bayeslca.assess.likelihood.em import add_up, expect, maximise, work_for

    layout = blocks.layout(units)
    work = work_for(layout)
    sizes = np.diff(blocks.blocks.block_start)
    elements = np.repeat(1.0 / sizes, sizes)
    expect(layout, work, elements)
    work.shares[:] = shares
    add_up(layout, work, elements)
    maximise(layout, work, elements)
    return elements[None]


def climb_from(
    blocks: AllBlocks, units: UnitTable, points: Floats, threads: int | None = None
) -> Climbed:
    """Run EM from every starting point (n, E), and the best of them to the end.

    Raises
    ------
    ModelError
        When no starting point gives the answers a probability.
    """
    from bayeslca.assess.likelihood.em import climb, climb_all

    layout = blocks.layout(units)
    points = points.copy()
    found = np.full(len(points), -np.inf)
    stop = threading.Event()
    threads = threads or default_threads()

    def work(which: Ints) -> None:
        for i in which:
            if stop.is_set():
                raise KeyboardInterrupt
            climb_all(layout, points[i : i + 1], MOST_STEPS, TOLERANCE, found[i : i + 1])

    pieces = np.array_split(np.arange(len(points)), min(len(points), 4 * threads))
    on_threads(work, pieces, threads=threads, stop=stop)
    best = int(np.argmax(found))
    if not np.isfinite(found[best]):
        msg = (
            "EM cannot start: the answers have probability 0 at every starting point. Start "
            "elsewhere, or loosen the probabilities that are fixed at 0 or 1."
        )
        raise ModelError(msg)
    elements = points[best].copy()
    value, steps = climb(layout, elements, LAST_STEPS, LAST_TOLERANCE, np.empty(0))
    found[best] = value
    return Climbed(elements, value, found, steps)
