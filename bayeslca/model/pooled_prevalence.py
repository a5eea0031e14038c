"""Prevalences of units that are alike but not the same: partial pooling.

The prevalences of each unit (a district, a herd) are drawn from one Dirichlet whose mean and
concentration are estimated with everything else: units with few cases borrow from the others, as
much as the units turn out to be alike.

References
----------
Gelman, A., Carlin, J. B., Stern, H. S., Dunson, D. B., Vehtari, A. & Rubin, D. B. (2013).
Bayesian Data Analysis, 3rd ed., chapter 5 (the Beta-binomial case). From memory.
"""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import betaln, gammaln, xlog1py, xlogy

from bayeslca._typing import Floats, Ints

SMALLEST = 1e-300
"""No drawn prevalence is smaller: its logarithm stays finite."""


@dataclass(frozen=True, eq=False)
class PooledPrevalence:
    """Prevalences of units from a Dirichlet with an estimated mean and spread.

    Attributes
    ----------
    n_rows : int
        Number of units.
    mean_prior : ndarray of float64, shape (K,)
        Dirichlet parameters of the mean prevalences' prior.
    spread_prior : tuple of float
        Beta parameters of the spread's prior; (1, 1) is uniform.

    Notes
    -----
    prevalence[g] ~ Dirichlet(c m) with the mean m ~ Dirichlet(mean_prior) and the spread
    s = (1 + c)^(-1/2) ~ Beta(spread_prior). A class of mean prevalence m has the standard
    deviation s (m (1 - m))^(1/2) between units: s is 0 when all units are alike and 1 when each
    holds one class only, and s^2 is the correlation of two cases of one unit. The state that
    samplers keep is the vector ``concentration`` = c m, shape (K,).
    """

    n_rows: int
    mean_prior: Floats
    spread_prior: tuple[float, float] = (1.0, 1.0)

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        return int(self.mean_prior.size)

    @property
    def concentration(self) -> Floats:
        """The mean's prior (row, K), the same for every unit: what is expected beforehand."""
        return np.tile(self.mean_prior, (self.n_rows, 1))

    @property
    def density_parameter(self) -> Floats:
        """Parameters (row, K) by which permutations of the classes are weighed."""
        return self.concentration

    def keeps_ties(self, permutation: Ints) -> bool:
        """Tell whether a permutation (row, K) treats all units alike, as their mean demands."""
        return bool((np.asarray(permutation) == np.asarray(permutation)[0]).all())

    def simulate(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) from the prior."""
        return np.asarray(self.simulate_many(rng, 1)[0][0])

    def simulate_many(self, rng: np.random.Generator, n: int) -> tuple[Floats, Floats]:
        """Draw prevalences (n, row, K), and the concentrations (n, K) behind them."""
        spread = np.clip(rng.beta(*self.spread_prior, size=n), 1e-8, 1.0 - 1e-12)
        total = spread**-2 - 1.0
        concentration = total[:, None] * rng.dirichlet(self.mean_prior, size=n)
        return draw_dirichlets(rng, concentration, self.n_rows), concentration

    def draw(self, rng: np.random.Generator, class_counts: Floats) -> Floats:
        """Refuse: prevalences given classes are drawn with their mean and spread, by a chain.

        See `bayeslca.sampling.pooled_source.PooledStep`.
        """
        msg = "pooled prevalences are drawn together with their mean and spread, by a chain"
        raise TypeError(msg)

    def scatter(self, rng: np.random.Generator) -> Floats:
        """Draw prevalences (row, K) evenly over all possible ones."""
        return rng.dirichlet(np.ones(self.n_classes), size=self.n_rows)

    def log_top(self, concentration: Floats) -> tuple[Floats, Floats]:
        """Return the log prior densities (...) of the mean and of the spread."""
        concentration = np.asarray(concentration, dtype=np.float64)
        total = concentration.sum(axis=-1)
        mean = concentration / total[..., None]
        a, (one, two) = self.mean_prior, self.spread_prior
        of_mean = gammaln(a.sum()) - gammaln(a).sum() + xlogy(a - 1.0, mean).sum(axis=-1)
        spread = np.minimum((1.0 + total) ** -0.5, 1.0 - 1e-15)
        of_spread = xlogy(one - 1.0, spread) + xlog1py(two - 1.0, -spread) - betaln(one, two)
        return np.asarray(of_mean), np.asarray(of_spread)

    def log_density(self, prevalence: Floats, concentration: Floats | None = None) -> Floats:
        """Return the log density (...) of mean, spread and the units' prevalences (..., row, K).

        Of the units' prevalences it is the density of their log odds: that of the prevalences
        themselves has no bound where one is nearly 0.
        """
        if concentration is None:
            msg = "the density of pooled prevalences needs their concentration (..., K)"
            raise TypeError(msg)
        of_mean, of_spread = self.log_top(concentration)
        total = concentration.sum(axis=-1)
        norm = gammaln(total) - gammaln(concentration).sum(axis=-1)
        logs = np.log(np.maximum(prevalence, SMALLEST))
        of_units = norm[..., None] + np.sum(concentration[..., None, :] * logs, axis=-1)
        return np.asarray(of_mean + of_spread + of_units.sum(axis=-1))

    def predict(self, prevalence: Floats, row: int) -> Floats:
        """Return the prevalences (..., K) of a new case in a unit."""
        return prevalence[..., row, :]

    def class_key(self, row: int, latent_class: int) -> Hashable:
        """Return what must be equal for two classes of a row to be exchangeable in the prior."""
        return float(self.mean_prior[latent_class])

    def is_invariant(self, permutation: Ints) -> bool:
        """Tell whether the prior is unchanged by a permutation (row, K) of the classes."""
        moved = self.mean_prior[np.asarray(permutation)[0]]
        return self.keeps_ties(permutation) and bool(np.array_equal(moved, self.mean_prior))

    def to_pymc(self, name: str, dims: tuple[str, ...]) -> Any:
        """Add the prevalences to the PyMC model in whose context it is called.

        Adds ``mean_prevalence`` (K,), ``spread`` and ``unit_concentration`` (a number) besides.
        """
        import pymc as pm

        mean = pm.Dirichlet("mean_prevalence", a=self.mean_prior, dims=dims[-1:])
        spread = pm.Beta("spread", *self.spread_prior)
        total = pm.Deterministic("unit_concentration", spread**-2 - 1.0)
        return pm.Dirichlet(name, a=total * mean, shape=(self.n_rows, self.n_classes), dims=dims)


def new_unit_name(group_name: str) -> str:
    """Return what rows about a unit that was not observed are called: ``a new district``."""
    return f"a new {group_name}"


def spread_of(concentration: Floats) -> Floats:
    """Return the spread (...) of concentrations (..., K)."""
    return np.asarray((1.0 + concentration.sum(axis=-1)) ** -0.5)


def draw_dirichlets(rng: np.random.Generator, parameter: Floats, n: int) -> Floats:
    """Draw n probability vectors (..., n, K) for each vector of Dirichlet parameters (..., K).

    By gammas in logs: exact however small the parameters are.
    """
    a = np.repeat(np.asarray(parameter, dtype=np.float64)[..., None, :], n, axis=-2)
    a = np.maximum(a, SMALLEST)
    logs = np.log(rng.standard_gamma(a + 1.0)) + np.log1p(-rng.random(a.shape)) / a
    shares = np.exp(logs - logs.max(axis=-1, keepdims=True))
    return np.asarray(np.maximum(shares / shares.sum(axis=-1, keepdims=True), SMALLEST))
