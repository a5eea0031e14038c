"""The number of classes as an unknown of the model: what a mixture of finite mixtures says."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from bayeslca._typing import Floats, Ints, Seed
from bayeslca.assess.class_count.averaged import counts_in_words
from bayeslca.assess.evidence.bridge_sampling import effective_draws
from bayeslca.assess.evidence.empty_class_ladder import class_elements
from bayeslca.assess.together.co_membership import (
    BATCHES,
    MOST_TOGETHER,
    CoMembership,
    most_sampled,
)
from bayeslca.assess.together.partition import point_partition
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.posterior.membership import pattern_keys
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.responses.responses import Responses

_Chain: TypeAlias = tuple[Ints, Ints, Floats, Floats, Ints]

LOOK_EVERY = 20
"""Sweeps from one look at who is together with whom to the next."""


@dataclass(frozen=True, eq=False)
class UnknownCount:
    """What the answers say when the number of classes is a parameter like any other.

    Attributes
    ----------
    table : DataFrame
        A row per number of classes with ``prior``, ``probability``, ``mcse`` (of the probability),
        and ``filled``, the probability that so many classes hold at least one case.
    effective_draws : float
        Of the number of classes; fewer than some hundreds make the table uncertain.
    co_membership : CoMembership or None
        Who is together with whom whatever the number of classes, and the sets of cases that
        follow; None where it was not asked for, or there are too many distinct patterns.
    patterns : DataFrame or None
        How probable each response pattern is, as `Averaged.pattern_probabilities` gives it.
    """

    table: pd.DataFrame
    effective_draws: float
    co_membership: CoMembership | None = None
    patterns: pd.DataFrame | None = None

    @property
    def together(self) -> Floats | None:
        """P(two different cases of these units are in one class), shape (U, U)."""
        return None if self.co_membership is None else self.co_membership.probability


def sample_class_count(
    responses: Responses,
    most: int,
    *,
    statements: tuple[str, ...] = (),
    groups: bool = True,
    prior: Floats | None = None,
    seed: Seed = None,
    chains: int = 4,
    draws: int = 20_000,
    together: bool = True,
    threads: int | None = None,
) -> UnknownCount:
    """Sample the number of classes together with everything else (telescoping sampler).

    Parameters
    ----------
    responses : Responses
    most : int
        The largest number of classes.
    statements : tuple of str
        Priors of all classes alike.
    groups : bool
        Whether groups that the responses have get prevalences of their own.
    prior : ndarray, shape (most,), optional
        Prior probabilities of 1, 2, ... classes; all equal when left out.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    chains, draws : int
        Chains, and kept sweeps of each; a quarter as many are thrown away first.
    together : bool
        Whether to find who is in one class with whom, and how probable patterns are.
    threads : int, optional

    Raises
    ------
    ModelError
        Where classes are not exchangeable, or the prior does not fit.
    """
    import threading

    from bayeslca.sampling.telescope import telescope

    weights = _checked_prior(prior, most)
    model = LatentClassModel(
        responses.items, max(most, 2), statements, groups=responses.groups if groups else None
    )
    block_start, block_prior, row_of = _one_class(model)
    units = compile_units(model.table, model.units(responses))
    source = model.prevalence_source
    assert isinstance(source, DirichletPrevalence)  # seen to in _one_class
    with np.errstate(divide="ignore"):
        log_prior = np.log(weights)
    possible = np.flatnonzero(weights > 0) + 1
    with_pairs = together and units.n_units <= MOST_TOGETHER
    sequence = np.random.default_rng(seed).spawn(chains)

    looks = draws // LOOK_EVERY + 1
    split_every = max(1, looks * chains // most_sampled(units.n_units, most))

    def work(at: int) -> _Chain:
        found: _Chain = telescope(
            block_start,
            block_prior,
            units.row_start,
            row_of[units.row],
            units.count,
            units.prevalence_row,
            float(source.concentration[0, 0]),
            log_prior,
            int(possible[at % possible.size]),
            draws // 4,
            draws,
            LOOK_EVERY if with_pairs else 0,
            split_every,
            sequence[at],
        )
        return found

    ran = on_threads(
        work,
        range(chains),
        threads=threads or default_threads(),
        stop=threading.Event(),
    )
    counts = np.stack([one[0] for one in ran])
    filled = np.stack([one[1] for one in ran])
    effective = effective_draws(counts.astype(np.float64))
    found = UnknownCount(_table(counts, filled, weights), effective)
    if not with_pairs:
        return found
    parts = np.concatenate([one[2] for one in ran])
    mean = parts.mean(axis=0)
    splits = np.concatenate([one[4] for one in ran])
    return replace(
        found,
        co_membership=CoMembership(
            model,
            responses,
            mean,
            parts.std(axis=0, ddof=1) / np.sqrt(len(parts)),
            point_partition(splits, units.count, mean),
            basis=f"With their number sampled among {counts_in_words(possible.tolist())}",
        ),
        patterns=_patterns(model, responses, np.stack([one[3] for one in ran])),
    )


def _patterns(model: LatentClassModel, responses: Responses, probability: Floats) -> pd.DataFrame:
    """Return the table of patterns from draws (chain, look, U) of their probabilities."""
    units = model.units(responses)
    frame = pattern_keys(model, units)
    flat = probability.reshape(-1, units.n_units)
    batches = np.stack([part.mean(axis=0) for part in np.array_split(flat, BATCHES)])
    frame["probability"] = flat.mean(axis=0)
    frame["mcse"] = batches.std(axis=0, ddof=1) / np.sqrt(BATCHES)
    frame["lower"], frame["upper"] = np.quantile(flat, [0.025, 0.975], axis=0)
    cases = np.bincount(units.group, weights=units.count)[units.group]
    frame["expected"] = frame["probability"] * cases
    frame.attrs["interval"] = 0.95
    return frame


def _table(counts: Ints, filled: Ints, prior: Floats) -> pd.DataFrame:
    import pandas as pd

    rows = []
    for k in range(1, prior.size + 1):
        here = (counts == k).astype(np.float64)
        share = float(here.mean())
        error = np.sqrt(share * (1 - share) / effective_draws(here))
        rows.append((prior[k - 1], share, float(error), float(np.mean(filled == k))))
    columns = ["prior", "probability", "mcse", "filled"]
    return pd.DataFrame(
        rows, columns=columns, index=pd.RangeIndex(1, prior.size + 1, name="classes")
    )


def _checked_prior(prior: Floats | None, most: int) -> Floats:
    if most < 1:
        msg = f"the largest number of classes is {most}. Give a whole number from 1."
        raise ModelError(msg)
    if prior is None:
        return np.full(most, 1.0 / most)
    weights = np.asarray(prior, dtype=np.float64)
    if weights.shape != (most,) or np.any(weights < 0) or not weights.sum() > 0:
        msg = (
            f"the prior on the number of classes needs {most} numbers of 0 or more, for 1 to "
            f"{most} classes; got {weights.tolist()}"
        )
        raise ModelError(msg)
    return np.asarray(weights / weights.sum())


def _one_class(model: LatentClassModel) -> tuple[Ints, Floats, Ints]:
    """Return the blocks of one class, their parameters, and the element of each row in them."""
    table, source = model.table, model.prevalence_source
    own = class_elements(table) if table.is_direct and not table.is_bounded else None
    same = isinstance(source, DirichletPrevalence) and np.ptp(source.concentration) == 0.0
    if own is None or not same or own.size != table.n_elements:
        msg = (
            "the number of classes can only be sampled where classes are exchangeable and free: "
            "leave out what ties, bounds or fixes probabilities"
        )
        raise ModelError(msg)
    first = np.sort(own[0])
    priors = table.element_prior[np.sort(own, axis=1)]
    if np.any(priors != priors[0]):
        msg = "the number of classes can only be sampled where all classes have the same priors"
        raise ModelError(msg)
    blocks = table.element_block[first]
    starts = np.concatenate([[0], np.flatnonzero(np.diff(blocks)) + 1, [first.size]])
    row_of = np.searchsorted(first, table.direct_element[:, 0])
    return starts.astype(np.int64), priors[0].astype(np.float64), row_of.astype(np.int64)
