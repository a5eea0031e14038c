"""Likelihood ratio tests of one class fewer: by parametric bootstrap, and the adjusted test.

The chi-square distribution does not hold for the number of classes, because a class too many lies
at a boundary. The bootstrap draws tables from the smaller model's solution, with the group sizes
and the missing answers of the data, fits both models to each and counts.

References
----------
McLachlan, G. J. (1987), Applied Statistics 36, 318-324.
"""

from __future__ import annotations

import sys
import textwrap
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from math import nan, sqrt

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.likelihood.em_layout import AllBlocks, with_units
from bayeslca.assess.likelihood.em_runs import MOST_STEPS, scattered
from bayeslca.assess.likelihood.lo_mendell_rubin import adjusted_test
from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood, maximum_likelihood
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.simulate import draw_answers, draw_classes
from bayeslca.model.table import UnitTable
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import MISSING, Units, collapse
from bayeslca.sampling.threads import default_threads, on_threads

WIDTH = 80
SHORT_STEPS = 60
GO_ON = 5
"""Of the runs on a drawn table, so many go on after so many steps: the best (short runs of EM,
Biernacki, Celeux & Govaert 2003, Computational Statistics & Data Analysis 41, 561-575)."""
CLOSE = 1e-4
"""They end when so many nats are left to gain."""
Progress = Callable[[int, int, float], None]
"""Called with tables done, tables planned, and seconds since the start."""


@dataclass(frozen=True, eq=False, repr=False)
class LikelihoodRatioTest:
    """A test of a model against one with more classes.

    Attributes
    ----------
    smaller, larger : MaximumLikelihood
    statistic : float
        Twice the difference of the log likelihoods.
    p_value : float
        Share of the drawn tables, the data among them, whose statistic is at least as large.
    p_value_mcse : float
        Its Monte Carlo standard error.
    simulated : ndarray, shape (samples,)
        The statistic of every drawn table.
    planned : int
        How many were asked for; more than there are when the run was stopped.
    adjusted_statistic, adjusted_p_value : float
        The adjusted test of Lo, Mendell & Rubin (2001); doubted by Jeffries (2003).
    seconds : float
    """

    smaller: MaximumLikelihood
    larger: MaximumLikelihood
    statistic: float
    p_value: float
    p_value_mcse: float
    simulated: Floats
    planned: int
    adjusted_statistic: float
    adjusted_p_value: float
    seconds: float

    @property
    def stopped(self) -> bool:
        """True when the run was stopped before all tables were drawn."""
        return self.simulated.size < self.planned

    def __repr__(self) -> str:
        one, two = self.smaller.model.n_classes, self.larger.model.n_classes
        done = f"{self.simulated.size:,} tables drawn from the smaller model"
        if self.stopped:
            done += f" (stopped: {self.planned:,} were planned)"
        lines = [
            f"Likelihood ratio test: {one} v {two} classes, {self.smaller.n_cases} cases",
            f"statistic 2(L{two} - L{one}) = {self.statistic:.4f}",
            f"bootstrap: p = {self.p_value:.4f} ± {self.p_value_mcse:.4f}, {done}",
            f"Lo-Mendell-Rubin, adjusted: {self.adjusted_statistic:.4f}, "
            f"p = {self.adjusted_p_value:.4f} (its proof is in doubt: Jeffries 2003)",
        ]
        return "\n".join(part for line in lines for part in textwrap.wrap(line, WIDTH))


def class_count_test(
    responses: Responses,
    classes: int,
    *,
    samples: int = 499,
    seed: int | None = None,
    starting_points: int = 100,
    threads: int | None = None,
    progress: bool | Progress = True,
) -> LikelihoodRatioTest:
    """Test ``classes - 1`` classes against ``classes``.

    Parameters
    ----------
    responses : Responses
    classes : int
        At least 2.
    samples, seed, threads, progress : see `likelihood_ratio_test`
    starting_points : int
        For the fits to the data.
    """
    if classes < 2:
        msg = f"classes={classes}: the test is of classes - 1 against classes; give 2 or more."
        raise ModelError(msg)
    one, two = (
        maximum_likelihood(
            LatentClassModel(responses.items, k, groups=responses.groups),
            responses,
            starting_points=starting_points,
            seed=seed,
            threads=threads,
        )
        for k in (classes - 1, classes)
    )
    return likelihood_ratio_test(
        one, two, samples=samples, seed=seed, threads=threads, progress=progress
    )


def likelihood_ratio_test(
    smaller: MaximumLikelihood,
    larger: MaximumLikelihood,
    *,
    samples: int = 499,
    seed: int | None = None,
    starting_points: int = 20,
    threads: int | None = None,
    progress: bool | Progress = True,
) -> LikelihoodRatioTest:
    """Test one solution against another with more parameters.

    Parameters
    ----------
    smaller, larger : MaximumLikelihood
        Of the same responses.
    samples : int
        Tables that are drawn.
    seed : int, optional
        Makes the result the same every time, whatever the number of threads.
    starting_points : int
        For either model's fit to a drawn table; the smaller one also starts at what the table
        was drawn from.
    threads : int, optional
        As many as there are processors when left out.
    progress : bool or callable
        A line on standard error, if that is a terminal; or called with tables done, tables
        planned and seconds.

    Notes
    -----
    Ctrl-C ends the test with the tables that are done; without any it is raised.
    """
    _check(smaller, larger, samples)
    statistic = 2.0 * (larger.log_likelihood - smaller.log_likelihood)
    adjusted, adjusted_p = adjusted_test(smaller, larger)
    began = time.perf_counter()
    simulated = _simulate(smaller, larger, samples, seed, starting_points, threads, progress)
    n = simulated.size
    p = (1 + int(np.sum(simulated >= statistic))) / (n + 1) if n else nan
    return LikelihoodRatioTest(
        smaller=smaller,
        larger=larger,
        statistic=statistic,
        p_value=p,
        p_value_mcse=sqrt(p * (1 - p) / n) if n else nan,
        simulated=simulated,
        planned=samples,
        adjusted_statistic=adjusted,
        adjusted_p_value=adjusted_p,
        seconds=time.perf_counter() - began,
    )


def _check(smaller: MaximumLikelihood, larger: MaximumLikelihood, samples: int) -> None:
    if smaller.responses.data_hash != larger.responses.data_hash:
        msg = "the two solutions are of different responses; fit both to the same."
        raise ModelError(msg)
    if smaller.n_parameters >= larger.n_parameters:
        msg = (
            f"the first solution has {smaller.n_parameters} free parameters and the second "
            f"{larger.n_parameters}; give the smaller model first."
        )
        raise ModelError(msg)
    if samples < 1:
        msg = f"samples={samples}: give the number of tables to draw, 1 or more."
        raise ModelError(msg)


def _simulate(
    smaller: MaximumLikelihood,
    larger: MaximumLikelihood,
    samples: int,
    seed: int | None,
    starting_points: int,
    threads: int | None,
    progress: bool | Progress,
) -> Floats:
    """Return the statistics of the tables that were done."""
    draw = _Drawer(smaller)
    one, two = _Refit(smaller), _Refit(larger)
    seeds = np.random.SeedSequence(seed).spawn(samples)
    found = np.full(samples, np.nan)
    stop = threading.Event()
    show = _shown(progress)
    began = time.perf_counter()

    def work(i: int) -> None:
        if stop.is_set():
            raise KeyboardInterrupt
        rng = np.random.default_rng(seeds[i])
        units = draw.units(rng)
        low = one.log_likelihood(units, starting_points, rng)
        found[i] = 2.0 * (two.log_likelihood(units, starting_points, rng) - low)

    def look() -> None:
        show(int(np.sum(np.isfinite(found))), samples, time.perf_counter() - began)

    try:
        on_threads(work, range(samples), threads=threads or default_threads(), stop=stop, look=look)
    except KeyboardInterrupt:
        if not np.isfinite(found).any():
            raise
    else:
        look()
    return np.asarray(found[np.isfinite(found)])


class _Drawer:
    """Draws tables from a solution, with the groups and the missing answers of the data."""

    def __init__(self, fit: MaximumLikelihood) -> None:
        units = fit.model.units(fit.responses)
        self._fit = fit
        self._group = np.repeat(units.group, units.count)
        self._answered = np.repeat(units.pattern != MISSING, units.count, axis=0)
        self._sizes = tuple(item.n_categories for item in fit.model.items)
        self._ones = np.ones(self._group.size, dtype=np.int64)

    def units(self, rng: np.random.Generator) -> Units:
        """Draw one table."""
        table, found = self._fit.model.table, self._fit.parameters
        classes = draw_classes(found.prevalence, self._group, rng)
        codes = draw_answers(table, found.elements, classes, self._group, rng)
        codes = np.where(self._answered, codes, MISSING).astype(np.int16)
        return collapse(codes, self._group, self._ones, self._sizes)


class _Refit:
    """Fits a model to drawn tables."""

    def __init__(self, fit: MaximumLikelihood) -> None:
        self._fit = fit
        self._blocks = AllBlocks.of(fit.model)
        self._layout = self._blocks.layout(_compiled(fit, fit.model.units(fit.responses)))
        self._own = self._blocks.elements(fit.parameters)

    def log_likelihood(self, units: Units, n: int, rng: np.random.Generator) -> float:
        """Return the highest log likelihood that the runs find."""
        from bayeslca.assess.likelihood.em import climb_all

        layout = with_units(self._layout, _compiled(self._fit, units))
        # Its own solution, drawn in from the edge: EM never leaves a probability of 0.
        near = 0.95 * self._own + 0.05 * scattered(self._blocks, 1, rng)[0]
        points = np.vstack([near[None], scattered(self._blocks, n, rng)])
        found = np.empty(len(points))
        climb_all(layout, points, SHORT_STEPS, CLOSE, found)
        best = np.argsort(-found, kind="stable")[:GO_ON]
        points, found = points[best], found[best]
        climb_all(layout, points, MOST_STEPS, CLOSE, found)
        return float(found.max())


def _compiled(fit: MaximumLikelihood, units: Units) -> UnitTable:
    return compile_units(fit.model.table, units)


def _shown(progress: bool | Progress) -> Progress:
    if callable(progress):
        return progress
    if not progress or not sys.stderr.isatty():
        return lambda _done, _planned, _seconds: None

    def line(done: int, planned: int, seconds: float) -> None:
        left = f", about {seconds * (planned / done - 1):.0f} s left" if done else ""
        end = "\n" if done == planned else ""
        sys.stderr.write(f"\rbootstrap: {done:,} of {planned:,} tables{left}      {end}")
        sys.stderr.flush()

    return line
