"""Maximum likelihood criteria beside a Bayesian comparison, and where the two agree."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from math import nan
from typing import TYPE_CHECKING

from bayeslca.assess.comparison.comparison import Comparison
from bayeslca.assess.comparison.words import Name, row_in_words
from bayeslca.assess.likelihood.fit_statistics import Criteria, criteria_table
from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood, maximum_likelihood
from bayeslca.exceptions import ModelError

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
        smallest; nan for models without a maximum likelihood solution.
    fits : dict of MaximumLikelihood
    agreement : str
        Where criteria and comparison agree, in words.
    refused : dict of str
        Why there is no solution, by model.
    """

    table: pd.DataFrame
    fits: dict[Name, MaximumLikelihood]
    agreement: str
    refused: dict[Name, str]

    def __repr__(self) -> str:
        shown = self.table[["elpd_diff", "tied", *SHOWN]].rename(columns=SHOWN)
        text = shown.to_string(float_format=lambda value: f"{value:.1f}")
        note = "The criteria are shown above their smallest value; elpd_diff is 0 for the best."
        without = [f"{row_in_words(name)}: {why}" for name, why in self.refused.items()]
        said = [line for text in (self.agreement, *without) for line in textwrap.wrap(text, WIDTH)]
        return "\n".join([text, note, "", *said])


def criteria_beside(
    comparison: Comparison,
    *,
    starting_points: int = 100,
    seed: int | None = None,
    progress: Callable[[Name], None] | None = None,
) -> CriteriaBeside:
    """Fit the models of a comparison by maximum likelihood, and set their criteria beside it.

    A model whose constraints have no exact step in EM is left out, with the reason in
    ``refused``.

    Parameters
    ----------
    comparison : Comparison
    starting_points, seed : see `maximum_likelihood`
    progress : callable, optional
        Told the name of each model before it is fitted.

    Raises
    ------
    ModelError
        When not one of the models can be fitted.
    """
    fits: dict[Name, MaximumLikelihood] = {}
    refused: dict[Name, str] = {}
    for name, posterior in comparison.posteriors.items():
        if progress is not None:
            progress(name)
        try:
            fits[name] = maximum_likelihood(
                posterior.model, posterior.responses, starting_points=starting_points, seed=seed
            )
        except ModelError as error:
            refused[name] = str(error)
    if not fits:
        raise ModelError(next(iter(refused.values())))
    table = _table(comparison, fits)
    return CriteriaBeside(table, fits, _agreement(table, comparison, fits), refused)


def _table(comparison: Comparison, fits: dict[Name, MaximumLikelihood]) -> pd.DataFrame:
    wide = criteria_table(fits).pivot(index="model", columns="criterion", values="above_best")
    table = comparison.table[["elpd", "elpd_diff", "tied"]].copy()
    for column in ("log_likelihood", "n_parameters"):
        table[column] = [
            getattr(fits[name], column) if name in fits else nan for name in table.index
        ]
    for field in fields(Criteria):
        table[field.name] = wide[field.name].reindex(table.index)
    return table


def _agreement(
    table: pd.DataFrame, comparison: Comparison, fits: dict[Name, MaximumLikelihood]
) -> str:
    if len(table) == 1:
        return ""
    by_choice: dict[Name, list[str]] = {}
    for key, shown in SHOWN.items():
        if table[key].notna().any():
            smallest = list(table.index)[int(table[key].argmin())]
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
