"""The sample's design: how much each case stands for, and which cases were drawn together."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ResponsesError


@dataclass(frozen=True, eq=False)
class SampleDesign:
    """Weights, clusters and strata of the rows of some responses.

    Attributes
    ----------
    weight : ndarray of float64, shape (row,)
        For how much of the population each row stands; positive, all 1 without a weight column.
    cluster : ndarray of int64, shape (row,)
        Index of the cluster (primary sampling unit); every row its own without a cluster column.
    stratum : ndarray of int64, shape (row,)
        Index of the stratum; all 0 without a stratum column.
    weight_name, cluster_name, stratum_name : str or None
        The columns' names, None where there is no such column.
    stratum_levels : tuple of str
        Names of the strata; those that were merged are joined by " + ".

    Raises
    ------
    ResponsesError
        When the parts are of different lengths, or a weight is not a positive number.
    """

    weight: Floats
    cluster: Ints
    stratum: Ints
    weight_name: str | None = None
    cluster_name: str | None = None
    stratum_name: str | None = None
    stratum_levels: tuple[str, ...] = ("",)

    def __post_init__(self) -> None:
        sizes = {self.weight.size, self.cluster.size, self.stratum.size}
        if len(sizes) > 1:
            msg = (
                f"weight, cluster and stratum have {self.weight.size}, {self.cluster.size} and "
                f"{self.stratum.size} entries. Give one of each for each row."
            )
            raise ResponsesError(msg)
        if not np.all(np.isfinite(self.weight) & (self.weight > 0)):
            msg = (
                "weight holds values that are not positive numbers. Give one above 0 for each row."
            )
            raise ResponsesError(msg)

    @property
    def n_clusters(self) -> int:
        """Number of clusters; the number of rows without a cluster column."""
        return int(self.cluster.max()) + 1

    @property
    def n_strata(self) -> int:
        """Number of strata; 1 without a stratum column."""
        return len(self.stratum_levels)

    @cached_property
    def stratum_of_cluster(self) -> Ints:
        """The stratum of each cluster, shape (cluster,)."""
        out = np.zeros(self.n_clusters, dtype=np.int64)
        out[self.cluster] = self.stratum
        return out

    @cached_property
    def clusters_in_stratum(self) -> Ints:
        """Number of clusters of each stratum, shape (stratum,)."""
        return np.bincount(self.stratum_of_cluster, minlength=self.n_strata)

    @property
    def degrees_of_freedom(self) -> int:
        """Clusters less strata."""
        return self.n_clusters - self.n_strata

    @property
    def is_weighted(self) -> bool:
        """True when weights differ."""
        return bool(np.ptp(self.weight) > 1e-9 * self.weight.max())

    @property
    def changes_nothing(self) -> bool:
        """True when it is a simple random sample: constant weights, no clusters, no strata."""
        alone = self.n_clusters == self.weight.size
        return alone and self.n_strata == 1 and not self.is_weighted

    @cached_property
    def effective_size(self) -> float:
        """Kish's (1965, Survey Sampling) effective number of cases: (sum w)^2 / sum w^2.

        It knows the weights alone, neither clusters nor what was asked. Formula from memory.
        """
        return float(self.weight.sum() ** 2 / (self.weight**2).sum())

    def in_words(self) -> str:
        """Say which columns the design rests on, with their numbers, in one sentence."""
        parts = []
        if self.weight_name is not None:
            ratio = self.weight.max() / self.weight.min()
            what = "are all equal" if not self.is_weighted else f"differ up to {ratio:.1f}-fold"
            parts.append(f"weights ({self.weight_name}) {what}")
        if self.cluster_name is not None:
            parts.append(f"{self.n_clusters:,} clusters ({self.cluster_name})")
        if self.stratum_name is not None:
            parts.append(f"{self.n_strata:,} strata ({self.stratum_name})")
        return "sample design: " + ", ".join(parts)
