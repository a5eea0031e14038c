"""Models compared by K-fold: the same folds for all of them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bayeslca.assess.comparison.information_criteria import standard_error
from bayeslca.assess.comparison.words import Name, row_in_words
from bayeslca.assess.left_out.folds import LeftOut, k_fold
from bayeslca.assess.left_out.refits import why_no_refit
from bayeslca.posterior.posterior import Posterior
from bayeslca.sampling.progress import Show

if TYPE_CHECKING:
    import pandas as pd

FOLD_SEED = 0
"""Of the folds: the same for all models, whatever their own seeds."""


@dataclass(frozen=True, eq=False)
class FoldComparison:
    """Models by how well they predict each fold of cases from the others.

    Attributes
    ----------
    table : DataFrame
        A row per model that can be refitted: ``elpd``, ``elpd_se``, ``elpd_mcse``,
        ``elpd_diff`` from the best by folds (0 or less), ``elpd_diff_se``, ``reliable``.
    folds : int
    left_out : dict of LeftOut
        Each row's folds.
    no_refit : dict of str
        Rows that are left out, and why.
    """

    table: pd.DataFrame
    folds: int
    left_out: dict[Name, LeftOut]
    no_refit: dict[Name, str]

    @property
    def verdict(self) -> str:
        """Which row predicts left-out folds best, in words."""
        from bayeslca.assess.comparison.comparison import (
            is_tie,  # which holds a comparison of this kind
        )

        if not self.left_out:
            return "No row could be refitted without a fold of its cases."
        ranked = sorted(self.left_out, key=lambda name: -self.left_out[name].elpd)
        text = f"By {self.folds} folds of cases, {row_in_words(ranked[0])} predicted best"
        if len(ranked) == 1:
            return f"{text}."
        row = dict(zip(self.left_out, self.table.to_dict("records"), strict=True))[ranked[1]]
        gap = f"{-row['elpd_diff']:.1f} ± {row['elpd_diff_se']:.1f}"
        tie = ", too close to tell" if is_tie(row["elpd_diff"], row["elpd_diff_se"]) else ""
        return f"{text}; next {row_in_words(ranked[1])}, {gap} behind{tie}."


def compared_by_folds(
    posteriors: Mapping[Name, Posterior],
    index: str,
    folds: int,
    progress: Callable[[Name], bool | Show],
) -> FoldComparison:
    """Refit every model without each fold of the cases.

    Parameters
    ----------
    posteriors : mapping from int or str to Posterior
        Of the same responses.
    index : str
        What the rows' names are.
    folds : int
    progress : callable
        Given a row's name, returns who is told how far its refits are.
    """
    import pandas as pd

    reasons = {name: why_no_refit(one) for name, one in posteriors.items()}
    found = {
        name: k_fold(one, folds, seed=FOLD_SEED, progress=progress(name))
        for name, one in posteriors.items()
        if not reasons[name]
    }
    best = max(found, key=lambda name: found[name].elpd) if found else None
    rows = []
    for one in found.values():
        assert best is not None
        other = found[best]
        gap = (one.pointwise - other.pointwise).ravel()
        rows.append(
            {
                "elpd": one.elpd,
                "elpd_se": one.se,
                "elpd_mcse": one.mcse,
                "elpd_diff": one.elpd - other.elpd,
                "elpd_diff_se": 0.0 if one is other else standard_error(gap, one.counts.ravel()),
                "reliable": bool(one.table["reliable"].all()),
            }
        )
    return FoldComparison(
        table=pd.DataFrame(rows, index=pd.Index(list(found), name=index)),
        folds=folds,
        left_out=found,
        no_refit={name: why for name, why in reasons.items() if why},
    )
