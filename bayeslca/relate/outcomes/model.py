"""The model of an outcome given class: its form, its priors, and the arrays that kernels read."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.special import gammaln, logit

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    LOG_NEGATIVE_BINOMIAL,
    LOG_POISSON,
    LOGISTIC,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
    SMALLEST,
    OutcomeData,
    value_constant,
)

if TYPE_CHECKING:
    from bayeslca.relate.outcomes.column import OutcomeKind

CountModel = Literal["poisson", "negative_binomial"]
WIDE = 2.5
"""Standard deviations of the outcome within which class means lie, about, before the data."""
WIDE_LOG = 1.5
"""The same of the log of rates: means of classes lie within a factor of 20 of all cases', about."""
SIZE_SD = 1.5
"""Of the log of the negative binomial's size around 0: sizes of 0.05 to 19 in 95 %."""


@dataclass(frozen=True, eq=False)
class OutcomePrior:
    """Priors of an outcome's parameters; each form uses those that it has.

    Attributes
    ----------
    location : tuple of float
        Mean and standard deviation of the normal prior of means, intercepts or shifts.
    spread : tuple of float
        Of variances: degrees of freedom and scale of an inverse chi-square. Of sizes: mean and
        standard deviation of the log.
    pseudo : tuple of float
        Beta parameters, gamma shape and rate, or (first) Dirichlet parameter of every category.
    slope_sd : ndarray, shape (p,)
    threshold : ndarray, shape (R - 1,) or (0,)
        Means of the thresholds' normals; their standard deviation is that of ``location``.
    """

    location: tuple[float, float] = (0.0, 1.0)
    spread: tuple[float, float] = (1.0, 1.0)
    pseudo: tuple[float, float] = (1.0, 1.0)
    slope_sd: Floats = field(default_factory=lambda: np.zeros(0))
    threshold: Floats = field(default_factory=lambda: np.zeros(0))


@dataclass(frozen=True, eq=False)
class OutcomeModel:
    """An outcome given class. N cases, K classes, p covariates, R categories.

    Attributes
    ----------
    form : int
        See `bayeslca.sampling.outcome_forms`.
    n_classes : int
    value : ndarray, shape (N,)
        Anything where it was not seen.
    seen : ndarray of bool, shape (N,)
        Cases whose outcome and covariates are there.
    prior : OutcomePrior
    covariate : ndarray, shape (N, p)
        With mean 0 over the cases seen.
    n_levels : int
        Categories of an ordered outcome; 0 otherwise.
    equal_spread : bool
        One variance (or size) for all classes.
    """

    form: int
    n_classes: int
    value: Floats
    seen: Bools
    prior: OutcomePrior
    covariate: Floats
    n_levels: int = 0
    equal_spread: bool = False

    @property
    def n_slopes(self) -> int:
        """Number of covariate columns, p."""
        return int(self.covariate.shape[1])

    @property
    def has_spread(self) -> bool:
        """True when classes have a variance or a size beside their mean."""
        return self.form in (NORMAL, NEGATIVE_BINOMIAL, LOG_NEGATIVE_BINOMIAL)

    @property
    def columns(self) -> int:
        """Number of parameters of each class, M."""
        return self.n_levels if self.form == CATEGORICAL else 1 + self.has_spread

    @cached_property
    def seen_covariate(self) -> Floats:
        """Covariates of the cases seen, over which adjusted means are averaged."""
        return np.ascontiguousarray(self.covariate[self.seen])

    def data(self, case_of_unit: Ints | None = None) -> OutcomeData:
        """Return what the kernels read; units are cases, or cases in another order."""
        at = np.arange(self.value.size) if case_of_unit is None else np.asarray(case_of_unit)
        value = np.where(self.seen[at], self.value[at], 0.0).astype(np.float64)
        covariate = np.where(self.seen[at, None], self.covariate[at], 0.0)
        prior = self.prior
        return OutcomeData(
            form=self.form,
            value=value,
            rows=np.flatnonzero(self.seen[at]).astype(np.int64),
            covariate=np.ascontiguousarray(covariate, dtype=np.float64),
            constant=value_constant(self.form, value),
            equal_spread=self.equal_spread,
            location=np.array(prior.location, dtype=np.float64),
            spread=np.array(prior.spread, dtype=np.float64),
            pseudo=np.array(prior.pseudo, dtype=np.float64),
            slope_sd=np.array(prior.slope_sd, dtype=np.float64),
            threshold=np.array(prior.threshold, dtype=np.float64),
        )

    def start(self, classes: Ints, rng: np.random.Generator) -> tuple[Floats, Floats]:
        """Return parameters (K, M) and (S,) near those of given classes (N,) of the cases."""
        from bayeslca.sampling.outcome_draws import draw_outcome

        by_class = np.ones((self.n_classes, self.columns))
        by_class[:, 0] = self.prior.location[0]
        if self.form in (BERNOULLI, CATEGORICAL):
            by_class[:] = 1.0 / max(self.n_levels, 2)
        if self.form in (POISSON, NEGATIVE_BINOMIAL):
            by_class[:, 0] = max(float(self.value[self.seen].mean()), 0.1)
        if self.form == NORMAL:
            by_class[:, 1] = self.prior.spread[1]
        shared = np.concatenate([np.zeros(self.n_slopes), self.prior.threshold])
        data = self.data()
        for _ in range(10):
            draw_outcome(data, np.asarray(classes, dtype=np.int64), by_class, shared, rng)
        return by_class, shared

    def draw_prior(self, rng: np.random.Generator) -> tuple[Floats, Floats]:
        """Draw parameters (K, M) and (S,) from the prior."""
        prior, shape = self.prior, (self.n_classes, self.columns)
        by_class = np.empty(shape)
        if self.form == CATEGORICAL:
            by_class[:] = rng.dirichlet(np.full(self.n_levels, prior.pseudo[0]), self.n_classes)
        elif self.form == BERNOULLI:
            by_class[:, 0] = rng.beta(*prior.pseudo, self.n_classes)
        elif self.form in (POISSON, NEGATIVE_BINOMIAL):
            rate = rng.gamma(prior.pseudo[0], 1.0 / prior.pseudo[1], self.n_classes)
            by_class[:, 0] = np.maximum(rate, SMALLEST)
        else:
            by_class[:, 0] = rng.normal(*prior.location, self.n_classes)
        if self.has_spread:
            n = 1 if self.equal_spread else self.n_classes
            if self.form == NORMAL:
                df, scale = prior.spread
                by_class[:, 1] = df * scale / rng.chisquare(df, n)
            else:
                by_class[:, 1] = np.exp(rng.normal(*prior.spread, n))
        thresholds = prior.threshold
        while thresholds.size:
            thresholds = rng.normal(prior.threshold, prior.location[1])
            if np.all(np.diff(thresholds) > 0.0):
                break
        slopes = rng.normal(0.0, 1.0, self.n_slopes) * prior.slope_sd
        return by_class, np.concatenate([slopes, thresholds])

    def log_prior(self, by_class: Floats, shared: Floats) -> float:
        """Return the log prior density, thresholds' order left out of the norming constant."""
        prior, first = self.prior, by_class[:, 0]
        a, b = prior.pseudo
        if self.form == CATEGORICAL:
            n = self.n_levels
            norm = gammaln(n * a) - n * gammaln(a)
            total = self.n_classes * norm + (a - 1.0) * np.log(by_class).sum()
        elif self.form == BERNOULLI:
            inside = np.clip(first, SMALLEST, 1.0 - 1e-16)
            total = ((a - 1.0) * np.log(inside) + (b - 1.0) * np.log1p(-inside)).sum()
            total += self.n_classes * (gammaln(a + b) - gammaln(a) - gammaln(b))
        elif self.form in (POISSON, NEGATIVE_BINOMIAL):
            total = ((a - 1.0) * np.log(first) - b * first).sum()
            total += self.n_classes * (a * math.log(b) - gammaln(a))
        else:
            total = _log_normal(first, *prior.location)
        if self.has_spread:
            second = by_class[:1, 1] if self.equal_spread else by_class[:, 1]
            if self.form == NORMAL:
                df, scale = prior.spread
                half = 0.5 * df
                total += (-(half + 1.0) * np.log(second) - half * scale / second).sum()
                total += second.size * (half * math.log(half * scale) - gammaln(half))
            else:
                total += _log_normal(np.log(second), *prior.spread) - np.log(second).sum()
        p = self.n_slopes
        total += _log_normal(shared[:p], 0.0, prior.slope_sd)
        total += _log_normal(shared[p:], prior.threshold, prior.location[1])
        return float(total)


def _log_normal(x: Floats, mean: Floats | float, sd: Floats | float) -> float:
    scaled = (x - mean) / sd
    return float(np.sum(-0.5 * scaled**2 - np.log(sd) - 0.5 * math.log(2.0 * math.pi)))


def outcome_model(
    kind: OutcomeKind,
    value: Floats,
    n_classes: int,
    *,
    n_levels: int = 0,
    covariate: Floats | None = None,
    count_model: CountModel = "negative_binomial",
    equal_spread: bool = False,
) -> OutcomeModel:
    """Return the model of an outcome, with priors that are weak on the scale of the data.

    Parameters
    ----------
    kind : {"numeric", "binary", "count", "ordered"}
    value : ndarray, shape (N,)
        nan where it is missing.
    n_classes : int
    n_levels : int
        Categories of an ordered outcome.
    covariate : ndarray, shape (N, p), optional
        nan where it is missing.
    count_model : {"poisson", "negative_binomial"}
    equal_spread : bool
    """
    x = np.zeros((value.size, 0)) if covariate is None else np.asarray(covariate, dtype=np.float64)
    seen = ~np.isnan(value) & ~np.isnan(x).any(axis=1)
    x = x - x[seen].mean(axis=0)
    is_adjusted = x.shape[1] > 0
    form = _form(kind, is_adjusted, count_model)
    return OutcomeModel(
        form=form,
        n_classes=n_classes,
        value=value,
        seen=np.asarray(seen),
        prior=_weak_prior(form, value[seen], x[seen], n_levels),
        covariate=x,
        n_levels=n_levels,
        equal_spread=equal_spread,
    )


def _form(kind: OutcomeKind, is_adjusted: bool, count_model: CountModel) -> int:
    if kind == "numeric":
        return NORMAL
    if kind == "binary":
        return LOGISTIC if is_adjusted else BERNOULLI
    if kind == "ordered":
        return CUMULATIVE if is_adjusted else CATEGORICAL
    if count_model == "poisson":
        return LOG_POISSON if is_adjusted else POISSON
    return LOG_NEGATIVE_BINOMIAL if is_adjusted else NEGATIVE_BINOMIAL


def _weak_prior(form: int, value: Floats, x: Floats, n_levels: int) -> OutcomePrior:
    mean, variance = float(value.mean()), float(value.var(ddof=1))
    scale = math.sqrt(variance) if form == NORMAL else 1.0
    wide = WIDE_LOG if form in (LOG_POISSON, LOG_NEGATIVE_BINOMIAL) else WIDE
    slope_sd = np.asarray(wide * scale / x.std(axis=0, ddof=1)) if x.shape[1] else np.zeros(0)
    if form == NORMAL:
        return OutcomePrior((mean, WIDE * scale), (1.0, variance / 4.0), slope_sd=slope_sd)
    if form == CATEGORICAL:
        return OutcomePrior(pseudo=(2.0 / n_levels, 1.0))
    if form in (POISSON, NEGATIVE_BINOMIAL):
        return OutcomePrior(spread=(0.0, SIZE_SD), pseudo=(0.5, 0.5 / mean))
    if form == LOGISTIC:
        return OutcomePrior((float(logit((value.sum() + 0.5) / (value.size + 1.0))), WIDE),
                            slope_sd=slope_sd)  # fmt: skip
    if form in (LOG_POISSON, LOG_NEGATIVE_BINOMIAL):
        return OutcomePrior((math.log(mean), wide), (0.0, SIZE_SD), slope_sd=slope_sd)
    if form == CUMULATIVE:
        counts = np.bincount(value.astype(np.int64), minlength=n_levels) + 0.5
        below = np.cumsum(counts)[:-1] / counts.sum()
        return OutcomePrior((0.0, WIDE), slope_sd=slope_sd, threshold=np.asarray(logit(below)))
    return OutcomePrior()
