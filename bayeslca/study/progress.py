"""Progress of a whole run: one bar over all fits, on a terminal only."""

from __future__ import annotations

import math
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from bayeslca.assess.comparison.progress import left_in_words
from bayeslca.sampling.progress import Progress, in_words

if TYPE_CHECKING:
    from bayeslca.assess.comparison.progress import FitProgress

Tell = Callable[[str, float, str], None]
"""Takes what is done now, how much of the whole is done (0 to 1), and figures."""


@dataclass
class JobProgress:
    """Tells how far a run has come: fits done, and how far the present one is.

    Attributes
    ----------
    tell : callable
    fits : int
        Number of fits of the whole run.
    done : int
        Fits that are finished.
    """

    tell: Tell
    fits: int
    done: int = 0
    _before_comparison: int | None = None

    def of_model(self, name: str) -> Callable[[Progress], None]:
        """Return what takes note of how far a model is."""
        return lambda sampling: self._show(name, sampling)

    def of_comparison(self, fit: FitProgress) -> None:
        """Take note of how far the comparison of class counts is."""
        name = "1 class" if fit.name == 1 else f"{fit.name} classes"
        name = name if isinstance(fit.name, int) else str(fit.name)
        before = self._before(fit)
        if fit.weighing or fit.refitting:
            what = "Weighing the evidence" if fit.weighing else f"Refits of {name}"
        else:
            self.done = max(self.done, before + fit.fit - 1)
            what = f"Fit {min(self.done + 1, self.fits)} of {self.fits}, {name}"
        figures = [left_in_words(fit)]
        if fit.sampling is not None:  # the time left is that of the whole, not of the fit
            figures.insert(0, in_words(replace(fit.sampling, seconds_left=math.nan)))
        share = (before + fit.share * (self.fits - before)) / max(self.fits, 1)
        self.tell(what, min(share, 1.0), ", ".join(part for part in figures if part))

    def of_other_priors(self, fit: FitProgress) -> None:
        """Take note of how far the class counts under other priors are."""
        what = f"Fit {fit.fit} of {fit.fits} under other priors"
        if fit.weighing:
            what = "Weighing the evidence under other priors"
        self.tell(what, fit.share, left_in_words(fit))

    def _before(self, fit: FitProgress) -> int:
        """Return the fits that were done before the comparison began."""
        if self._before_comparison is None:
            fitting = not (fit.weighing or fit.refitting)
            self._before_comparison = self.fits - fit.fits if fitting else self.done
        return self._before_comparison

    def finished(self, fits: int) -> None:
        """Count fits that are finished, or were kept from the run before."""
        self.done += fits

    def say(self, what: str) -> None:
        """Say what is done after the fits."""
        self.tell(what, 1.0, "")

    def _show(self, name: str, sampling: Progress) -> None:
        share = sampling.sweeps / max(sampling.planned, 1)
        what = f"Fit {min(self.done + 1, self.fits)} of {self.fits}, {name}"
        self.tell(what, min((self.done + share) / max(self.fits, 1), 1.0), in_words(sampling))


@contextmanager
def job_progress(fits: int, *, quiet: bool) -> Iterator[JobProgress]:
    """Give what tells the progress of a run; silent when quiet or not on a terminal."""
    if quiet or not sys.stderr.isatty():
        yield JobProgress(lambda what, share, figures: None, fits)
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn
    from rich.progress import Progress as RichProgress

    bar = RichProgress(
        TextColumn("{task.description}"),
        BarColumn(bar_width=12),
        TextColumn("{task.fields[figures]}"),
        console=Console(stderr=True),
        transient=True,
    )
    with bar:
        task = bar.add_task("Reading", total=1.0, figures="")

        def tell(what: str, share: float, figures: str) -> None:
            bar.update(task, description=what, completed=share, figures=figures)

        yield JobProgress(tell, fits)
