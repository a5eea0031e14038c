"""Progress: what is told while chains run, and the bar that shows it."""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TypeAlias

from bayeslca.sampling.stopping import Convergence, StoppingRule


@dataclass(frozen=True, slots=True)
class Progress:
    """How far sampling has come.

    Attributes
    ----------
    sweeps : int
        Sweeps done so far, all chains together.
    planned : int
        Sweeps at the end of this round, all chains together.
    ess : float
        Smallest effective sample size at the last look; nan before the first.
    r_hat : float
        Largest R-hat at the last look; nan before the first.
    seconds : float
        Since the start.
    seconds_left : float
        Estimate of what is left; nan before the first look.
    """

    sweeps: int
    planned: int
    ess: float
    r_hat: float
    seconds: float
    seconds_left: float


Show: TypeAlias = Callable[[Progress], None]


class Meter:
    """Counts sweeps and tells a callback.

    Parameters
    ----------
    show : callable
    rule : StoppingRule
    most : float
        Sweeps after which sampling ends in any case, all chains together.
    """

    def __init__(self, show: Show, rule: StoppingRule, most: float = math.inf) -> None:
        self._show = show
        self._most = most
        self._rule = rule
        self._start = time.perf_counter()
        self._sweeps: list[int] = []
        self._planned = 0
        self._last: Convergence | None = None

    def add(self, sweeps: int) -> None:
        """Count sweeps; chains call it from their threads (appending is atomic)."""
        self._sweeps.append(sweeps)

    def plan(self, planned: int) -> None:
        """Set the sweeps at the end of the round that begins."""
        self._planned = planned

    def judged(self, convergence: Convergence) -> None:
        """Take note of a look at convergence."""
        self._last = convergence
        self.look()

    def look(self) -> None:
        """Tell the callback how things stand."""
        sweeps, seconds = sum(self._sweeps), time.perf_counter() - self._start
        ess = r_hat = left = math.nan
        if self._last is not None:
            ess, r_hat = self._last.ess, self._last.r_hat
            left = self._seconds_left(sweeps, seconds, ess)
        self._show(Progress(sweeps, max(self._planned, sweeps), ess, r_hat, seconds, left))

    def _seconds_left(self, sweeps: int, seconds: float, ess: float) -> float:
        """At least this round; more of them when the effective sample size is far off."""
        if self._last is not None and self._last.meets(self._rule):
            return 0.0
        needed = sweeps * self._rule.ess / ess if ess > 0.0 else math.inf
        end = min(max(needed, self._planned), self._most)
        return seconds * max(end / max(sweeps, 1) - 1.0, 0.0)


@contextmanager
def shown(
    progress: bool | Show, title: str = "Sampling", first: str = "looking for starting points"
) -> Iterator[Show]:
    """Give the callback that shows progress: the caller's own, a bar, or nothing at all.

    The bar is drawn only when standard error is a terminal; ``first`` stands in it until there
    are figures.
    """
    if callable(progress):
        yield progress
    elif progress and sys.stderr.isatty():
        yield from _bar(title, first)
    else:
        yield lambda _progress: None


def _bar(title: str, first: str) -> Iterator[Show]:
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as RichProgress

    bar = RichProgress(
        TextColumn(title),
        BarColumn(bar_width=None),
        TextColumn("{task.fields[text]}"),
        TimeElapsedColumn(),
        console=Console(stderr=True),
        transient=True,
    )
    with bar:
        task = bar.add_task("sampling", total=None, text=first)

        def show(progress: Progress) -> None:
            total = progress.planned or None
            bar.update(task, completed=progress.sweeps, total=total, text=in_words(progress))

        yield show


def in_words(progress: Progress) -> str:
    """Put the figures of a progress in one short line."""
    parts = [f"{progress.sweeps:,} sweeps"]
    if not math.isnan(progress.ess):
        if math.isfinite(progress.ess):
            parts.append(f"ESS {progress.ess:,.0f}")
        parts.append(f"R-hat {progress.r_hat:.3f}")
    if math.isfinite(progress.seconds_left):
        parts.append(f"about {max(progress.seconds_left, 0.0):.0f} s left")
    return ", ".join(parts)
