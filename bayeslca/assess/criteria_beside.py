"""Maximum likelihood criteria beside a Bayesian comparison, and where the two agree."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

from bayeslca.assess.comparison import Comparison
from bayeslca.assess.comparison_words import Name, row_in_words
from bayeslca.assess.fit_statistics import Criteria, criteria_table
from bayeslca.assess.maximum_likelihood import MaximumLikelihood, maximum_likelihood

if TYPE_CHECKING:
    import pandas as pd

WIDTH = 80
SHOWN = {
    "aic": "AIC",
    "aicc": "AICc",
    "bic": "BIC",
    "bic_sclove": "BIC (Sclove)",
    "caic": "CAIC",
}


@dataclass(frozen=True, eq=False, repr=False)
class CriteriaBeside:
    """Criteria of the models of a comparison.

    Attributes
    ----------
    table : DataFrame
        A row per model: ``elpd``, ``elpd_diff`` and ``tied`` of the comparison, then
        ``log_likelihood``, ``n_parameters`` and, for each criterion, how far it lies above the
        smallest.
    fits : dict of MaximumLikelihood
    agreement : str
        Where criteria and comparison agree, in words.
    """

    table: pd.DataFrame
    fits: dict[Name, MaximumLikelihood]
    agreement: str

    def __repr__(self) -> str:
        shown = self.table[["elpd_diff", "tied", *SHOWN]].rename(columns=SHOWN)
        text = shown.to_string(float_format=lambda value: f"{value:.1f}")
        note = "The criteria are shown above their smallest value; elpd_diff is 0 for the best."
        return "\n".join([text, note, "", *textwrap.wrap(self.agreement, WIDTH)])


def criteria_beside(
    comparison: Comparison, *, starting_points: int = 100, seed: int | None = None
) -> CriteriaBeside:
    """Fit the models of a comparison by maximum likelihood, and set their criteria beside it.

    Parameters
    ----------
    comparison : Comparison
    starting_points, seed : see `maximum_likelihood`
    """
    fits = {
        name: maximum_likelihood(
            posterior.model, posterior.responses, starting_points=starting_points, seed=seed
        )
        for name, posterior in comparison.posteriors.items()
    }
    long = criteria_table(fits)
    wide = long.pivot(index="model", columns="criterion", values="above_best")
    table = comparison.table[["elpd", "elpd_diff", "tied"]].copy()
    table["log_likelihood"] = [fits[name].log_likelihood for name in table.index]
    table["n_parameters"] = [fits[name].n_parameters for name in table.index]
    for field in fields(Criteria):
        table[field.name] = wide[field.name].reindex(table.index)
    return CriteriaBeside(table, fits, _agreement(table, comparison))


def _agreement(table: pd.DataFrame, comparison: Comparison) -> str:
    names = list(comparison.posteriors)
    by_choice: dict[Name, list[str]] = {}
    for key, shown in SHOWN.items():
        if table[key].notna().any():
            smallest = names[int(table[key].argmin())]
            by_choice.setdefault(smallest, []).append(shown)
    inside: list[str] = []
    outside: list[str] = []
    for choice, chosen_by in by_choice.items():
        verb = "is" if len(chosen_by) == 1 else "are"
        part = f"{_listed(chosen_by)} {verb} smallest for {row_in_words(choice)}"
        (inside if choice in comparison.tied else outside).append(part)
    tied = [row_in_words(name) for name in comparison.tied if name != comparison.best]
    best = f"Leave-one-out predicts best with {row_in_words(comparison.best)}"
    best += f", tied with {_listed(tied)}." if tied else ", and no other is tied with it."
    parts = [best]
    if inside:
        parts.append(f"{'; '.join(inside)}: in agreement with that.")
    if outside:
        parts.append(
            f"{'; '.join(outside)}: not in agreement with that. These criteria count parameters; "
            "leave-one-out looks at what the cases, under the prior, say of each other."
        )
    return " ".join(parts)


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
