"""Who is together with whom: probabilities that two cases are in one class, and a partition.

Neither depends on what classes are called, so that both can be averaged over the number of
classes. Kept by distinct answers (units), never by pairs of cases; cases are looked up.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints, Seed
from bayeslca.assess.comparison.words import row_in_words
from bayeslca.assess.together.partition import Partition, point_partition
from bayeslca.exceptions import ModelError, near_names
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import membership
from bayeslca.posterior.membership import pattern_keys
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

MOST_TOGETHER = 3000
"""More distinct response patterns than this get no matrix of who is together with whom."""
BATCHES = 20
"""Batches of draws, from whose spread Monte Carlo errors follow."""
MOST_WORK = 10**10
"""Multiplications; where there are many patterns, fewer draws are used."""
LEAST_DRAWS = 200
SAMPLED = 1000
"""Sampled partitions; fewer where they would hold more than so many numbers:"""
MOST_NUMBERS = 20_000_000


@dataclass(frozen=True, eq=False, repr=False)
class CoMembership:
    """How probably two cases are in one class, and the sets of cases that follow.

    Attributes
    ----------
    model : LatentClassModel
        Whose units these are.
    responses : Responses
    probability : ndarray, shape (U, U)
        P(in one class) of two *different* cases of these units; units in the order of
        ``units``. On the diagonal: two cases with the same answers.
    mcse : ndarray, shape (U, U)
        Monte Carlo standard errors, with that of the weights where numbers of classes are
        averaged over.
    partition : Partition
        The sets with the smallest expected variation of information.
    basis : str
        What it was averaged over, in words that can begin a sentence.
    """

    model: LatentClassModel
    responses: Responses
    probability: Floats
    mcse: Floats
    partition: Partition
    basis: str

    @cached_property
    def units(self) -> Units:
        """The distinct answers."""
        return self.model.units(self.responses)

    @cached_property
    def patterns(self) -> pd.DataFrame:
        """The set of each response pattern.

        A row per pattern (and group, where the model has groups): its answers and ``count``, then
        ``set`` ("A" for the largest), ``within``, the mean probability of being in one class with
        the other cases of its set (nan for a case alone), ``other_set``, the other set that it is
        nearest to, and ``other``, the same with that set's cases.
        """
        import pandas as pd

        means = self._mean_with_sets
        n_sets, labels = self.partition.n_sets, self.partition.labels
        rows = np.arange(labels.size)
        within = means[rows, labels]
        rest = means.copy()
        rest[rows, labels] = -1.0
        nearest = rest.argmax(axis=1)
        names = np.array([set_name(s) for s in range(n_sets)], dtype=object)
        alone = n_sets == 1
        return pd.concat(
            [
                pattern_keys(self.model, self.units),
                pd.DataFrame(
                    {
                        "set": names[labels],
                        "within": within,
                        "other_set": [None] * len(rows) if alone else names[nearest],
                        "other": np.nan if alone else rest[rows, nearest],
                    }
                ),
            ],
            axis=1,
        )

    @cached_property
    def sets(self) -> pd.DataFrame:
        """A row per ``set``: ``cases``, ``patterns``, ``within`` and ``between``.

        ``within``: mean probability that two different cases of the set are in one class (nan
        for a single case); ``between``: the same of a case of the set and a case of another.
        """
        import pandas as pd

        labels, count = self.partition.labels, self.units.count.astype(np.float64)
        rows = []
        for s in range(self.partition.n_sets):
            mine = labels == s
            pairs = np.outer(count[mine], count[mine]) - np.diag(count[mine])
            others = np.outer(count[mine], count[~mine])
            rows.append(
                {
                    "set": set_name(s),
                    "cases": int(count[mine].sum()),
                    "patterns": int(mine.sum()),
                    "within": _mean(self.probability[np.ix_(mine, mine)], pairs),
                    "between": _mean(self.probability[np.ix_(mine, ~mine)], others),
                }
            )
        return pd.DataFrame(rows)

    @property
    def verdict(self) -> str:
        """Into which sets the cases fall, and how surely, in words."""
        from bayeslca.assess.together.words import together_in_words

        return together_in_words(self)

    def cases(self) -> pd.DataFrame:
        """Return the set of each case, with the columns of ``patterns`` after its name.

        Cases without a single answer are in no set; neither are they looked up.
        """
        unit = self.units.unit_of_row
        frame = self.patterns[["set", "within", "other_set", "other"]].iloc[unit]
        frame = frame.reset_index(drop=True)
        frame.loc[unit < 0, :] = None
        frame.insert(0, "case", list(self.responses.row_names))
        if self.responses.is_table_of_patterns:
            frame.insert(1, "count", self.responses.counts)
        return frame

    def between(self, one: str, other: str) -> float:
        """Return the probability that two cases are in one class; 1 for a case and itself.

        Parameters
        ----------
        one, other : str
            Names of cases; of a row that stands for several cases, two different ones are meant.
        """
        a, b = self._unit_of(one), self._unit_of(other)
        if one == other and not self.responses.is_table_of_patterns:
            return 1.0
        return float(self.probability[a, b])

    def with_case(self, name: str) -> pd.DataFrame:
        """Return the other cases by falling probability of being in one class with a case.

        Returns
        -------
        DataFrame
            ``case``, ``probability`` and ``mcse``; cases without an answer are left out.
        """
        import pandas as pd

        mine, unit = self._unit_of(name), self.units.unit_of_row
        names = [str(row) for row in self.responses.row_names]
        keep = [
            row
            for row, other in enumerate(names)
            if unit[row] >= 0 and (other != str(name) or self.responses.is_table_of_patterns)
        ]
        frame = pd.DataFrame(
            {
                "case": [self.responses.row_names[row] for row in keep],
                "probability": self.probability[mine, unit[keep]],
                "mcse": self.mcse[mine, unit[keep]],
            }
        )
        return frame.sort_values("probability", ascending=False, kind="stable", ignore_index=True)

    @cached_property
    def _mean_with_sets(self) -> Floats:
        """Mean probability (U, sets) of a case with the other cases of each set."""
        labels, count = self.partition.labels, self.units.count.astype(np.float64)
        member = np.zeros((labels.size, self.partition.n_sets))
        member[np.arange(labels.size), labels] = count
        total = self.probability @ member
        numbers = np.broadcast_to(member.sum(axis=0), total.shape).copy()
        rows = np.arange(labels.size)
        total[rows, labels] -= np.diag(self.probability)  # a case and itself are no pair
        numbers[rows, labels] -= 1.0
        with np.errstate(invalid="ignore"):
            return np.asarray(np.where(numbers > 0, total / numbers, np.nan))

    def _unit_of(self, name: str) -> int:
        names = [str(row) for row in self.responses.row_names]
        if str(name) not in names:
            near = near_names(str(name), names)
            msg = f"there is no case {name!r}{near}. Name a case as it was read."
            raise ModelError(msg)
        unit = int(self.units.unit_of_row[names.index(str(name))])
        if unit < 0:
            msg = f"case {name!r} gave no answer, so that nothing tells whom it is together with."
            raise ModelError(msg)
        return unit

    def __repr__(self) -> str:
        return f"{self.sets.round(3).to_string(index=False)}\n\n{self.verdict}"


def co_membership(posterior: Posterior, *, seed: Seed = None) -> CoMembership:
    """Return who is together with whom, for a model with a fixed number of classes.

    Parameters
    ----------
    posterior : Posterior
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
        Of the sampled partitions; by default it follows from the posterior's own seed.

    Raises
    ------
    ModelError
        When there are too many distinct response patterns.
    """
    check_size(posterior.units.n_units)
    rng = generator(posterior, seed)
    mean, error = together_of(posterior)
    splits = sampled_splits(
        posterior, most_sampled(posterior.units.n_units, posterior.model.n_classes), rng
    )
    return CoMembership(
        posterior.model,
        posterior.responses,
        mean,
        error,
        point_partition(splits, posterior.units.count, mean),
        basis=f"With {row_in_words(posterior.model.n_classes)}",
    )


def check_size(n_units: int) -> None:
    """Refuse more distinct response patterns than can be held pair by pair."""
    if n_units > MOST_TOGETHER:
        msg = (
            f"there are {n_units:,} distinct response patterns; who is together with whom is kept "
            f"for up to {MOST_TOGETHER:,}. Leave out items, or use the membership of each case."
        )
        raise ModelError(msg)


def generator(posterior: Posterior, seed: Seed) -> np.random.Generator:
    """Return the generator of the sampled partitions."""
    if seed is None:
        return np.random.default_rng([20261202, posterior.draws.seed or 0])
    return np.random.default_rng(seed)


def together_of(posterior: Posterior) -> tuple[Floats, Floats]:
    """Return P(two different cases are in one class) by units (U, U), and its Monte Carlo error."""
    units, n_classes = posterior.unit_table, posterior.model.n_classes
    if n_classes == 1:
        return np.ones((units.n_units,) * 2), np.zeros((units.n_units,) * 2)
    elements, prevalence = flat_draws(posterior)
    most = max(LEAST_DRAWS, MOST_WORK // (units.n_units**2 * n_classes))
    at = evenly(len(elements), most)
    mean = np.zeros((units.n_units,) * 2)
    square = np.zeros_like(mean)
    batches = np.array_split(at, BATCHES)
    for some in batches:
        share = membership(posterior.table, units, elements[some], prevalence[some])
        flat = share.transpose(1, 0, 2).reshape(units.n_units, -1)
        batch = flat @ flat.T / some.size
        mean += batch / BATCHES
        square += batch**2 / BATCHES
    error = np.sqrt(np.maximum(square - mean**2, 0.0) / (BATCHES - 1))
    return mean, error


def sampled_splits(posterior: Posterior, n: int, rng: np.random.Generator) -> Ints:
    """Sample partitions: the number of each unit's cases in each class, shape (n, U, K)."""
    elements, prevalence = flat_draws(posterior)
    at = evenly(len(elements), n)
    share = membership(posterior.table, posterior.unit_table, elements[at], prevalence[at])
    share /= share.sum(axis=2, keepdims=True)
    return np.asarray(rng.multinomial(posterior.unit_table.count, share), dtype=np.int32)


def most_sampled(n_units: int, n_classes: int) -> int:
    """Return how many partitions are sampled."""
    return max(LEAST_DRAWS, min(SAMPLED, MOST_NUMBERS // (n_units * n_classes)))


def flat_draws(posterior: Posterior) -> tuple[Floats, Floats]:
    """Return the draws of elements (S, E) and prevalences (S, groups, K), chain after chain."""
    draws = posterior.draws
    return (
        draws.flat_elements,
        draws.flat_prevalence,
    )


def evenly(n: int, most: int) -> Ints:
    """Return at most so many of n places, evenly spaced."""
    return np.unique(np.linspace(0, n - 1, max(1, min(n, most))).astype(np.int64))


def set_name(at: int) -> str:
    """Return the name of a set: A, B, ..., Z, A2, B2, ..."""
    letter, round_ = chr(ord("A") + at % 26), at // 26
    return letter if not round_ else f"{letter}{round_ + 1}"


def _mean(values: Floats, weights: Floats) -> float:
    total = float(weights.sum())
    return float((values * weights).sum() / total) if total > 0 else float("nan")
