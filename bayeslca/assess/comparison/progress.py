"""Progress of a comparison: fits and evidences of all rows as one whole, with the time left."""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, TypeAlias

from bayeslca.assess.comparison.words import Name, row_in_words

if TYPE_CHECKING:
    from bayeslca.sampling.progress import Progress

REFITS, EVIDENCE = 0.3, 0.3
"""Work of a row's refits and of its evidence, of that of a fit with as many classes (about; times
differ by data)."""
SOON = 0.02
"""Share of the whole from which on the time left is told."""


@dataclass(frozen=True, slots=True)
class FitProgress:
    """How far a comparison has come.

    Attributes
    ----------
    name : int or str
        The row that is being fitted or refitted; during the evidences, the last row.
    fit, fits : int
        Which fit it is, and of how many.
    sampling : Progress or None
        How far that fit is; None during the evidences.
    refitting : bool
        True when the row is fitted and patterns (or folds) of it are refitted: ``sampling``
        counts the sweeps of all its refits.
    weighing : bool
        True when all rows are fitted and their evidences are found.
    share : float
        How much of the whole is done, 0 to 1: all fits, refits and evidences.
    seconds_left : float
        Estimate for the whole; nan until there is one.
    """

    name: Name
    fit: int
    fits: int
    sampling: Progress | None = None
    refitting: bool = False
    weighing: bool = False
    share: float = 0.0
    seconds_left: float = math.nan


Show: TypeAlias = Callable[[FitProgress], None]


class ComparisonMeter:
    """Turns the progress of single fits and of the evidences into that of the whole.

    Parameters
    ----------
    show : callable
    to_fit : mapping from row to int
        Numbers of classes of the rows that are fitted, in their order.
    to_weigh : mapping from row to int
        Of all rows: each gets an evidence.
    """

    def __init__(
        self, show: Show, to_fit: Mapping[Name, int], to_weigh: Mapping[Name, int]
    ) -> None:
        self._show = show
        self._names = list(to_fit)
        self._to_fit = dict(to_fit)
        self._rows = dict(to_weigh)
        self._fits = float(sum(to_fit.values()))
        self._whole = self._fits + (REFITS + EVIDENCE) * sum(to_weigh.values())
        self._start = time.perf_counter()
        self._share = 0.0

    def of_fit(self, name: Name) -> Callable[[Progress], None]:
        """Return what takes note of how far the fit of a row is."""
        at = self._names.index(name)
        before = sum(self._to_fit[other] for other in self._names[:at])

        def note(sampling: Progress) -> None:
            work = before + _done(sampling) * self._to_fit[name]
            self._tell(work, FitProgress(name, at + 1, len(self._names), sampling))

        return note

    def of_refits(self, name: Name) -> Callable[[Progress], None]:
        """Return what takes note of how far the refits of a row are."""
        names = list(self._rows)
        at = names.index(name)
        before = self._fits + REFITS * sum(self._rows[other] for other in names[:at])

        def note(sampling: Progress) -> None:
            work = before + REFITS * _done(sampling) * self._rows[name]
            self._tell(work, FitProgress(name, at + 1, len(names), sampling, refitting=True))

        return note

    def of_evidence(self, done: float) -> None:
        """Take note of how much of the evidences, 0 to 1, is done."""
        weighing = EVIDENCE * sum(self._rows.values())
        n = len(self._rows)
        last = FitProgress(list(self._rows)[-1], n, n, weighing=True)
        self._tell(self._whole - (1.0 - done) * weighing, last)

    def _tell(self, work: float, so_far: FitProgress) -> None:
        self._share = max(self._share, min(work / self._whole, 1.0))  # rounds may be added
        seconds, left = time.perf_counter() - self._start, math.nan
        if self._share > SOON:
            left = seconds * (1.0 - self._share) / self._share
        self._show(replace(so_far, share=self._share, seconds_left=left))


def _done(sampling: Progress) -> float:
    return min(sampling.sweeps / max(sampling.planned, 1), 1.0)


@contextmanager
def shown(progress: bool | Show) -> Iterator[Show]:
    """Give the callback that shows progress: the caller's own, one bar, or nothing at all.

    The bar is drawn only when standard error is a terminal.
    """
    if callable(progress):
        yield progress
    elif progress and sys.stderr.isatty():
        yield from _bar()
    else:
        yield lambda _progress: None


def _bar() -> Iterator[Show]:
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn
    from rich.progress import Progress as RichProgress

    bar = RichProgress(
        TextColumn("{task.description}"),
        BarColumn(bar_width=None),
        TextColumn("{task.fields[text]}"),
        console=Console(stderr=True),
        transient=True,
    )
    with bar:
        task: Any = bar.add_task("Comparing", total=1.0, text="")

        def show(fit: FitProgress) -> None:
            what, left = what_in_words(fit), left_in_words(fit)
            bar.update(task, description=what, completed=fit.share, text=left)

        yield show


def what_in_words(fit: FitProgress) -> str:
    """Return what is being done: ``Fit 3 of 6, three classes``."""
    if fit.weighing:
        return "Weighing the evidence"
    if fit.refitting:
        return f"Refits of {row_in_words(fit.name)}"
    return f"Fit {fit.fit} of {fit.fits}, {row_in_words(fit.name)}"


def left_in_words(fit: FitProgress) -> str:
    """Return the time that is left: ``about 12 s left``; empty until it is known."""
    if not math.isfinite(fit.seconds_left):
        return ""
    if fit.seconds_left < 90:
        return f"about {max(fit.seconds_left, 0.0):.0f} s left"
    return f"about {fit.seconds_left / 60:.0f} min left"
