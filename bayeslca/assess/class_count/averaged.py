"""The posterior averaged over the number of classes, for what does not depend on labels.

Probabilities of response patterns, the predictive density of new cases, and who is together with
whom mean the same whatever the number of classes, so that each number's answer can be weighed by
P(number of classes | answers). The Monte Carlo error of the weights is carried along.

References
----------
Hoeting, J. A., Madigan, D., Raftery, A. E. & Volinsky, C. T. (1999). Bayesian model averaging: a
tutorial. Statistical Science 14, 382-401.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints, Seed
from bayeslca.assess.class_count.class_counts import ClassCounts
from bayeslca.assess.comparison.words import listed_with_and, row_in_words
from bayeslca.assess.together.co_membership import (
    BATCHES,
    CoMembership,
    check_size,
    evenly,
    flat_draws,
    generator,
    most_sampled,
    sampled_splits,
    together_of,
)
from bayeslca.assess.together.partition import point_partition
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import PIECE, log_unit_likelihood
from bayeslca.posterior.membership import pattern_keys
from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.summary import check_interval
from bayeslca.sampling.stopping import some_units

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.table import UnitTable
    from bayeslca.responses.responses import Responses

LEAST_WEIGHT = 1e-6
"""Numbers of classes with less probability are left out of the average."""
MIXED_DRAWS = 4000
"""Draws of all numbers of classes together, for intervals."""


@dataclass(frozen=True, eq=False, repr=False)
class Averaged:
    """Posteriors of different numbers of classes, weighed by P(number of classes | answers).

    Attributes
    ----------
    posteriors : dict from int to Posterior
        By number of classes, those that weigh anything.
    weight : ndarray, shape (n,)
        Their probabilities; they sum to 1.
    covariance : ndarray, shape (n, n)
        Of the weights' Monte Carlo errors.
    verdict : str
        What is averaged over, what is left out and why.
    caveat : str
        The part of it that must be known; empty when nothing is left out and all is sound.
    trustworthy : bool
        False where the sampling of a number that weighs more than 1 % is not to be trusted.
    """

    posteriors: dict[int, Posterior]
    weight: Floats
    covariance: Floats
    verdict: str
    caveat: str
    trustworthy: bool

    @property
    def responses(self) -> Responses:
        """The answers of the fit."""
        return self._first.responses

    @property
    def _first(self) -> Posterior:
        return next(iter(self.posteriors.values()))

    @property
    def weights(self) -> pd.DataFrame:
        """A row per number of classes with its ``probability`` and that one's ``mcse``."""
        import pandas as pd

        error = np.sqrt(np.maximum(np.diag(self.covariance), 0.0))
        return pd.DataFrame(
            {"probability": self.weight, "mcse": error},
            index=pd.Index(list(self.posteriors), name="classes"),
        )

    def pattern_probabilities(
        self, responses: Responses | None = None, interval: float = 0.95
    ) -> pd.DataFrame:
        """Return how probable each response pattern is.

        Parameters
        ----------
        responses : Responses, optional
            Whose patterns; those of the fit when left out.
        interval : float

        Returns
        -------
        DataFrame
            A row per pattern (within its group, where the model has groups): the answers and
            ``count``, then ``probability`` (posterior mean) with its Monte Carlo error ``mcse``,
            ``lower`` and ``upper`` (of the probability, over parameters and numbers of classes),
            and ``expected``: the probability times the cases of the group. Where answers are
            missing, it is the probability of those given.
        """
        check_interval(interval)
        at = self.responses if responses is None else responses
        units = self._first.model.units(at)
        found = self._of_units(at, interval)
        frame = pattern_keys(self._first.model, units)
        cases = np.bincount(units.group, weights=units.count)[units.group]
        for name, values in found.items():
            frame[name] = values
        frame["expected"] = frame["probability"] * cases
        frame.attrs["interval"] = interval
        return frame

    def log_predictive(self, new_responses: Responses) -> pd.DataFrame:
        """Return the log predictive density of new cases: ln p(answers | answers of the fit).

        Parameters
        ----------
        new_responses : Responses
            Read with the model's own items.

        Returns
        -------
        DataFrame
            A row per ``case`` with ``log_density`` and its Monte Carlo error ``mcse``. A case
            without an answer has density 1.
        """
        import pandas as pd

        units = self._first.model.units(new_responses)
        found = self._of_units(new_responses, 0.95)
        with np.errstate(divide="ignore", invalid="ignore"):
            logs = np.append(np.log(found["probability"]), 0.0)
            error = np.append(found["mcse"] / found["probability"], 0.0)
        at = units.unit_of_row  # -1, the last entry, for cases without an answer
        frame = pd.DataFrame({"case": list(new_responses.row_names)})
        if new_responses.is_table_of_patterns:
            frame["count"] = new_responses.counts
        frame["log_density"], frame["mcse"] = logs[at], error[at]
        return frame

    def co_membership(self, *, seed: Seed = None) -> CoMembership:
        """Return who is together with whom, whatever the number of classes.

        Parameters
        ----------
        seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
            Of the sampled partitions; by default it follows from the posteriors' own seed.

        Raises
        ------
        ModelError
            When there are too many distinct response patterns.
        """
        first = self._first
        n_units = first.units.n_units
        check_size(n_units)
        rng = generator(first, seed)
        # The error of a sum of products: of each number's own matrix, and of the weights, whose
        # covariance is taken apart into independent parts.
        values, vectors = np.linalg.eigh(self.covariance)
        mean, variance = np.zeros((n_units,) * 2), np.zeros((n_units,) * 2)
        parts = [np.zeros_like(mean) for _ in values]
        for i, posterior in enumerate(self.posteriors.values()):
            found, error = together_of(posterior)
            mean += self.weight[i] * found
            variance += (self.weight[i] * error) ** 2
            for r, part in enumerate(parts):
                part += vectors[i, r] * found
        variance += sum(max(v, 0.0) * part**2 for v, part in zip(values, parts, strict=True))
        most = max(one.model.n_classes for one in self.posteriors.values())
        n = most_sampled(n_units, most)
        splits = [
            _padded(sampled_splits(posterior, share, rng), most)
            for posterior, share in zip(
                self.posteriors.values(), shared_out(self.weight, n), strict=True
            )
            if share
        ]
        return CoMembership(
            first.model,
            first.responses,
            mean,
            np.sqrt(variance),
            point_partition(np.concatenate(splits), first.units.count, mean),
            basis=f"Averaged over {counts_in_words(list(self.posteriors))} by their probability",
        )

    def _of_units(self, responses: Responses, interval: float) -> dict[str, Floats]:
        """Return probability, error and interval (U,) of each unit's answers."""
        means, errors, draws = [], [], []
        share = shared_out(self.weight, MIXED_DRAWS)
        for posterior, n_mixed in zip(self.posteriors.values(), share, strict=True):
            table = compile_units(posterior.table, posterior.model.units(responses))
            mean, error, some = _unit_probability(posterior, table, n_mixed)
            means.append(mean)
            errors.append(error)
            draws.append(some)
        mean, error = np.stack(means), np.stack(errors)
        variance = (self.weight**2) @ error**2
        variance += np.einsum("iu,ij,ju->u", mean, self.covariance, mean)
        tail = (1.0 - interval) / 2.0
        lower, upper = np.quantile(np.concatenate(draws), [tail, 1.0 - tail], axis=0)
        return {
            "probability": self.weight @ mean,
            "mcse": np.sqrt(np.maximum(variance, 0.0)),
            "lower": lower,
            "upper": upper,
        }

    def __repr__(self) -> str:
        return f"{self.weights.round(3).to_string()}\n\n{self.verdict}"


def averaged(counts: ClassCounts, posteriors: Mapping[int, Posterior]) -> Averaged:
    """Return the posteriors weighed by the probability of their number of classes.

    Parameters
    ----------
    counts : ClassCounts
    posteriors : mapping from int to Posterior
        Those that the probabilities were found from.

    Raises
    ------
    ModelError
        Where the probabilities are not known reliably.
    """
    chance = counts.table["probability"].to_numpy(dtype=np.float64)
    known = np.isfinite(chance)
    if not known.any():
        msg = f"there is nothing to average by: {counts.verdict}"
        raise ModelError(msg)
    rows = np.flatnonzero(known & (np.nan_to_num(chance) >= LEAST_WEIGHT))
    names = [int(k) for k in counts.table.index]
    kept = {names[i]: posteriors[names[i]] for i in rows}
    weight = chance[rows] / chance[rows].sum()
    unknown = [k for k, is_known in zip(names, known, strict=True) if not is_known]
    doubtful = [
        k
        for k, w in zip(kept, weight, strict=True)
        if w > 0.01 and not kept[k].diagnostics().trustworthy
    ]
    basis = (
        f"Averaged over {counts_in_words(list(kept))} by the probability of each given the answers."
    )
    caveat = _caveat(unknown, doubtful)
    return Averaged(
        kept,
        weight,
        counts.covariance[np.ix_(rows, rows)],
        verdict=f"{basis} {caveat}".rstrip(),
        caveat=caveat,
        trustworthy=not doubtful,
    )


def counts_in_words(counts: list[int]) -> str:
    """Return numbers of classes in words: ``two to four classes``, ``one and three classes``."""
    words = [row_in_words(k).split()[0] for k in counts]
    if len(counts) == 1:
        return row_in_words(counts[0])
    if len(counts) > 2 and counts[-1] - counts[0] == len(counts) - 1:
        return f"{words[0]} to {words[-1]} classes"
    return f"{listed_with_and(words)} classes"


def shared_out(weight: Floats, n: int) -> list[int]:
    """Share n draws out by weights, as evenly as whole numbers can; heavy ones get at least one."""
    exact = weight / weight.sum() * n
    share = np.floor(exact).astype(np.int64)
    rest = np.argsort(-(exact - share), kind="stable")[: n - int(share.sum())]
    share[rest] += 1
    return [int(s) for s in share]


def _caveat(unknown: list[int], doubtful: list[int]) -> str:
    text = ""
    if unknown:
        text += (
            f"What {counts_in_words(unknown)} would say is left out: the evidence is not "
            "reliable there."
        )
    if doubtful:
        text += (
            f" The sampling of {counts_in_words(doubtful)} is not to be trusted, and so neither "
            "is the average."
        )
    return text.strip()


def _unit_probability(
    posterior: Posterior, units: UnitTable, n_mixed: int
) -> tuple[Floats, Floats, Floats]:
    """Return mean and error (U,) of each unit's probability, and some draws of it (n, U)."""
    elements, prevalence = flat_draws(posterior)
    mixed = evenly(len(elements), n_mixed) if n_mixed else np.zeros(0, dtype=np.int64)
    size = max(1, PIECE // len(elements))
    mean, error = np.empty(units.n_units), np.empty(units.n_units)
    draws = np.empty((mixed.size, units.n_units))
    for first in range(0, units.n_units, size):
        which = np.arange(first, min(first + size, units.n_units))
        some = some_units(units, which)
        found = np.exp(log_unit_likelihood(posterior.table, some, elements, prevalence))
        batches = np.stack([part.mean(axis=0) for part in np.array_split(found, BATCHES)])
        mean[which] = found.mean(axis=0)
        error[which] = batches.std(axis=0, ddof=1) / np.sqrt(BATCHES)
        draws[:, which] = found[mixed]
    return mean, error, draws


def _padded(splits: Ints, n_classes: int) -> Ints:
    """Add empty classes, so that partitions of all numbers of classes have one shape."""
    return np.pad(splits, ((0, 0), (0, 0), (0, n_classes - splits.shape[2])))
