"""Draws: what a sampler hands over, before anything is named or summarised."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from bayeslca._typing import Floats
from bayeslca.sampling.starting_points import StartingPoints

Sampler = Literal["gibbs", "nuts"]


@dataclass(frozen=True, eq=False)
class Draws:
    """Kept draws of all chains. E elements, K classes; groups are prevalence rows.

    Attributes
    ----------
    elements : ndarray of float64, shape (chain, draw, E)
        Elements of the compiled table's blocks.
    prevalence : ndarray of float64, shape (chain, draw, groups, K)
    log_likelihood : ndarray of float64, shape (chain, draw)
        Of the data at these draws: class summed out, all cases counted.
    log_prior : ndarray of float64, shape (chain, draw)
        Normalised density of elements and prevalences; of pooled units also of their mean and
        spread, with the units' prevalences as log odds.
    statistics : mapping of str to ndarray, shape (chain, draw)
        What else the sampler noticed: "accepted_swaps" (permutation moves accepted since the
        draw before), "diverging".
    sampler : {"gibbs", "nuts"}
    seed : int or None
        The seed as it was given, where that was a number.
    sweeps : int
        Sweeps (or NUTS iterations) per chain, warm-up included.
    warmup : int
        Sweeps per chain that were thrown away at the start.
    thin : int
        Sweeps from one kept draw to the next.
    seconds : float
    limit_reached : bool
        True when the stopping rule was not met before the stated number of sweeps.
    concentration : ndarray of float64, shape (chain, draw, K), or None
        Of pooled units: the Dirichlet parameters of their prevalences, concentration times mean
        (see `bayeslca.model.pooled_prevalence`); None where units are not pooled.
    starts : StartingPoints or None
        Where the chains began and what was dropped; None for a sampler that has no such step.
    """

    elements: Floats
    prevalence: Floats
    log_likelihood: Floats
    log_prior: Floats
    statistics: Mapping[str, Floats] = field(default_factory=dict)
    sampler: Sampler = "gibbs"
    seed: int | None = None
    sweeps: int = 0
    warmup: int = 0
    thin: int = 1
    seconds: float = 0.0
    limit_reached: bool = False
    concentration: Floats | None = None
    starts: StartingPoints | None = None

    @property
    def n_chains(self) -> int:
        """Number of chains."""
        return int(self.elements.shape[0])

    @property
    def n_draws(self) -> int:
        """Number of kept draws per chain."""
        return int(self.elements.shape[1])

    @property
    def flat_elements(self) -> Floats:
        """Elements of all chains end to end, shape (chain x draw, E); E may be 0."""
        return self.elements.reshape(self.n_chains * self.n_draws, self.elements.shape[-1])

    @property
    def flat_prevalence(self) -> Floats:
        """Prevalences of all chains end to end, shape (chain x draw, groups, K)."""
        return self.prevalence.reshape(-1, *self.prevalence.shape[2:])

    @property
    def n_classes(self) -> int:
        """Number of latent classes."""
        return int(self.prevalence.shape[3])
