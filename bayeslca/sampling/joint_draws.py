"""Draws of a joint model: class tables, and the parameters of its steps beside them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from bayeslca._typing import Floats


@dataclass(frozen=True, eq=False)
class JointDraws:
    """Kept draws of all chains of a joint model. E elements, K classes, G groups.

    Attributes
    ----------
    elements : ndarray of float64, shape (chain, draw, E)
        Elements of the compiled table's blocks.
    prevalence : ndarray of float64, shape (chain, draw, G, K)
        Mean prevalence over the cases of each group: prevalences of single rows follow from the
        parameters of the source.
    log_likelihood : ndarray of float64, shape (chain, draw)
        Of answers (and outcomes) given covariates: class summed out, all cases counted.
    log_prior : ndarray of float64, shape (chain, draw)
        Of the steps' parameters and, where they are drawn, of the elements.
    parameters : mapping of str to ndarray, shape (chain, draw, ...)
        Of the source's and the outcome's step, by name.
    statistics : mapping of str to ndarray, shape (chain, draw)
        "accepted_swaps": permutation moves accepted since the draw before.
    seed : int or None
        The seed as it was given, where that was a number.
    sweeps, warmup, thin : int
        Sweeps per chain in all, before the first kept draw, and from one kept draw to the next.
    seconds : float
    limit_reached : bool
        True when the stopping rule was not met before the stated number of sweeps.
    """

    elements: Floats
    prevalence: Floats
    log_likelihood: Floats
    log_prior: Floats
    parameters: Mapping[str, Floats] = field(default_factory=dict)
    statistics: Mapping[str, Floats] = field(default_factory=dict)
    seed: int | None = None
    sweeps: int = 0
    warmup: int = 0
    thin: int = 1
    seconds: float = 0.0
    limit_reached: bool = False

    @property
    def n_chains(self) -> int:
        """Number of chains."""
        return int(self.log_likelihood.shape[0])

    @property
    def n_draws(self) -> int:
        """Number of kept draws per chain."""
        return int(self.log_likelihood.shape[1])

    @property
    def flat_elements(self) -> Floats:
        """Elements of all chains end to end, shape (chain x draw, E); E may be 0."""
        return self.elements.reshape(self.n_chains * self.n_draws, self.elements.shape[-1])

    @property
    def flat_prevalence(self) -> Floats:
        """Prevalences of all chains end to end, shape (chain x draw, G, K)."""
        return self.prevalence.reshape(-1, *self.prevalence.shape[2:])

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        return int(self.prevalence.shape[3])
