"""Leaving out more than one case: K-fold, and whole groups, by refits without them.

Two different questions, never mixed. K-fold leaves out some cases of every group: how well are
cases of groups that were seen predicted. Leave-one-group-out leaves out a group's cases together:
how well are cases of a group that was not seen predicted, when nothing but the prior is known of
how common the classes are in it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.comparison.information_criteria import standard_error
from bayeslca.assess.left_out.refits import Refit, Without, refit_without, why_no_refit
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.sampling.progress import Show

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.units import Units

FOLD, GROUP = 2, 3
"""First numbers of the keys of refits without a fold, or without a group."""


@dataclass(frozen=True, eq=False, repr=False)
class LeftOut:
    """How well a model predicts cases that were left out together.

    Attributes
    ----------
    kind : {"fold", "group"}
    elpd : float
        Log predictive density of each case's answers (class summed out) given the cases that
        stayed, summed over all cases; higher is better. Each case is predicted on its own.
    se : float
        Standard error. Of folds: over cases. Of groups: over groups, as cases of a group are
        left out together: sqrt(G / (G - 1) x sum of squares of a group's sum less its number
        of cases times the mean); nan with fewer than 3 groups.
    mcse : float
        Monte Carlo standard error: refits have draws of their own, and their errors add up as
        squares.
    table : DataFrame
        A row per ``fold`` or ``group``: ``cases``, ``elpd``, ``elpd_mcse``, ``per_case``,
        ``reliable``.
    counts : ndarray of int64, shape (F, U)
        Cases of each of the responses' units that each refit left out.
    pointwise : ndarray of float64, shape (F, U)
        Log predictive density of one of them; 0 where there is none.
    refits : tuple of Refit
    meaning : str
        What was left out and what is known of it, in a sentence.
    """

    kind: Literal["fold", "group"]
    elpd: float
    se: float
    mcse: float
    table: pd.DataFrame
    counts: Ints
    pointwise: Floats
    refits: tuple[Refit, ...]
    meaning: str

    @property
    def verdict(self) -> str:
        """What was found, in words."""
        error = "" if math.isnan(self.se) else f" ± {self.se:.1f}"
        text = f"Accuracy {self.elpd:.1f}{error}, simulation error {self.mcse:.2f}. {self.meaning}"
        bad = int((~self.table["reliable"]).sum())
        if bad:
            text += f" The refits of {bad} of {len(self.table)} {self.kind}s are not reliable."
        return text

    def __repr__(self) -> str:
        from textwrap import fill

        return f"{self.table.to_string(index=False)}\n\n{fill(self.verdict, 79)}"


def k_fold(
    posterior: Posterior,
    folds: int = 10,
    *,
    seed: int | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
) -> LeftOut:
    """Predict the cases of each fold from the cases of all other folds.

    Parameters
    ----------
    posterior : Posterior
    folds : int
        Cases are dealt out evenly to so many folds, group by group, whole cases.
    seed : int, optional
        Of the folds and the refits; that of the posterior when left out. Folds depend on the
        seed and the responses alone, so that models are compared on the same ones.
    threads, progress
        As in `bayeslca.assess.left_out.exact_loo.leave_one_out`.

    Raises
    ------
    ModelError
        When there are fewer than 2 folds, or more than cases.
    SamplingError
        When a part of the model has no exact Gibbs step.
    KeyboardInterrupt
        On Ctrl-C, when all refits have stopped.
    """
    units = posterior.responses.units
    refuse_folds(units, folds)
    root = seed if seed is not None else posterior.draws.seed or 0
    counts = fold_counts(units, folds, root)
    meaning = (
        f"Each of {folds} folds of cases was predicted from the others; every group has its "
        "share in every fold."
    )
    if posterior.model.groups is None and posterior.responses.groups is None:
        meaning = f"Each of {folds} folds of cases was predicted from the others."
    names = [str(f + 1) for f in range(folds)]
    return _left_out(posterior, "fold", names, counts, meaning, FOLD, root, threads, progress)


def leave_one_group_out(
    posterior: Posterior,
    *,
    seed: int | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
) -> LeftOut:
    """Predict the cases of each group from the cases of all other groups.

    Where the model gives each group prevalences of its own, those of the left-out group are
    integrated over their prior, and so are response probabilities that are free by group: nothing
    is learnt about them from other groups. Each case is predicted on its own, not together with
    the others of its group.

    Parameters
    ----------
    posterior : Posterior
    seed, threads, progress
        As in `k_fold`.

    Raises
    ------
    ModelError
        When the responses have no groups, or one only.
    SamplingError
        When a part of the model has no exact Gibbs step.
    """
    responses, units = posterior.responses, posterior.responses.units
    present = np.unique(units.group)
    if responses.groups is None or present.size < 2:
        msg = (
            "there are no two groups of cases, so that none can be left out. Name the column of "
            "groups (group=...), or use k_fold."
        )
        raise ModelError(msg)
    counts = np.stack([np.where(units.group == g, units.count, 0) for g in present])
    meaning = "Each group was predicted from the others."
    if posterior.model.groups is not None:
        free = ", and so were its own response probabilities" if posterior.model.free_items else ""
        over = "how they differ between units" if posterior.model.pooled else "their prior"
        meaning = (
            "Each group was predicted from the others: its prevalences were integrated over "
            f"{over}{free}."
        )
    meaning += " This is not leave-one-case-out, and the two figures are not comparable."
    names = [responses.groups.levels[int(g)] for g in present]
    root = seed if seed is not None else posterior.draws.seed or 0
    return _left_out(posterior, "group", names, counts, meaning, GROUP, root, threads, progress)


def refuse_folds(units: Units, folds: int) -> None:
    """Refuse a number of folds that the cases cannot be dealt out to."""
    if not 2 <= folds <= units.n_cases:
        msg = (
            f"folds={folds} for {units.n_cases} cases. Give a number from 2 to the number of "
            "cases; 10 is usual."
        )
        raise ModelError(msg)


def fold_counts(units: Units, folds: int, seed: int) -> Ints:
    """Deal cases out to folds, group by group, in a random order within each.

    Parameters
    ----------
    units : Units
    folds : int
    seed : int

    Returns
    -------
    ndarray of int64, shape (folds, U)
        Cases of each unit in each fold. Sizes of folds differ by one case at most, and so do a
        group's shares in them.
    """
    rng = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(FOLD,)))
    out = np.zeros((folds, units.n_units), dtype=np.int64)
    dealt = 0
    for group in np.unique(units.group):
        mine = np.flatnonzero(units.group == group)
        cases = rng.permutation(np.repeat(mine, units.count[mine]))
        np.add.at(out, ((dealt + np.arange(cases.size)) % folds, cases), 1)
        dealt += cases.size
    return out


def _left_out(
    posterior: Posterior,
    kind: Literal["fold", "group"],
    names: list[str],
    counts: Ints,
    meaning: str,
    key: int,
    seed: int,
    threads: int | None,
    progress: bool | Show,
) -> LeftOut:
    import pandas as pd

    reason = why_no_refit(posterior)
    if reason:
        msg = f"{kind}s cannot be left out here: {reason}."
        raise SamplingError(msg)
    of_unit, seen = model_unit(posterior), posterior.unit_table
    wanted = []
    for f, gone in enumerate(counts):
        without = np.bincount(of_unit, weights=gone, minlength=seen.n_units).astype(np.int64)
        scored = np.flatnonzero(without)
        wanted.append(Without(seen.count - without, scored, without[scored], (key, f)))
    refits = refit_without(posterior, wanted, seed=seed, threads=threads, progress=progress)
    pointwise = np.zeros(counts.shape)
    for f, (one, refit) in enumerate(zip(wanted, refits, strict=True)):
        of_model = np.zeros(seen.n_units)
        of_model[one.scored] = refit.log_density
        pointwise[f] = np.where(counts[f] > 0, of_model[of_unit], 0.0)
    sums, cases = (counts * pointwise).sum(axis=1), counts.sum(axis=1)
    table = pd.DataFrame(
        {
            kind: names,
            "cases": cases,
            "elpd": sums,
            "elpd_mcse": [one.total_mcse for one in refits],
            "per_case": sums / cases,
            "reliable": [one.settled for one in refits],
        }
    )
    se = standard_error(pointwise.ravel(), counts.ravel())
    return LeftOut(
        kind=kind,
        elpd=float(sums.sum()),
        se=se if kind == "fold" else group_standard_error(sums, cases),
        mcse=math.hypot(*(one.total_mcse for one in refits)),
        table=table,
        counts=counts,
        pointwise=pointwise,
        refits=tuple(refits),
        meaning=meaning,
    )


def group_standard_error(sums: Floats, cases: Ints) -> float:
    """Return the standard error over groups of a sum over all cases.

    Parameters
    ----------
    sums : ndarray, shape (G,)
        Of each group's cases.
    cases : ndarray of int, shape (G,)
    """
    n_groups = sums.size
    if n_groups < 3:
        return math.nan
    apart = sums - cases * sums.sum() / cases.sum()
    return math.sqrt(n_groups / (n_groups - 1) * float(apart @ apart))


def model_unit(posterior: Posterior) -> Ints:
    """Return, for each unit of the responses, the unit that the model sees.

    A model without groups pools those of all groups.
    """
    fine, seen = posterior.responses.units, posterior.units
    inside = np.flatnonzero(fine.unit_of_row >= 0)
    units, first = np.unique(fine.unit_of_row[inside], return_index=True)
    of_unit = np.empty(fine.n_units, dtype=np.int64)
    of_unit[units] = seen.unit_of_row[inside[first]]
    return of_unit
