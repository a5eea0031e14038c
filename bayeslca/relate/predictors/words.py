"""Predictors of class in plain sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.predictors.class_predictors import ClassPredictors

WAY_WORDS = {
    "joint": "jointly (answers and covariates shape the classes together)",
    "cut": "by a cut (classes from the answers alone, drawn given the covariates)",
    "three_steps": "in three steps (cases placed, the error of placement undone)",
}
CORRECTION_WORDS = {
    "fixed_error_likelihood": "likelihood with the error of placement held fixed (Vermunt 2010)",
    "inverse_error_matrix": "weights from the inverse error matrix (Bolck et al. 2004)",
}
SURE = 0.975


def headlines(found: ClassPredictors, interval: float = 0.95) -> list[str]:
    """Say what predicts class, a sentence per clear effect; or that nothing clearly does."""
    table = found.marginal_effects(interval, found.main_way)
    clear = table[(table["lower"] > 0) | (table["upper"] < 0)]
    if len(found.class_names) == 2:  # the other class says the same, turned round
        clear = clear[clear["latent_class"] == found.class_names[0]]
    if not len(clear):
        return [
            "No covariate clearly predicts class: every interval of a change in class "
            "probabilities holds 0."
        ]
    out = []
    for _, row in clear.iterrows():
        direction = "more" if row["median"] > 0 else "less"
        size, low, high = (100 * abs(row[name]) for name in ("median", "lower", "upper"))
        low, high = min(low, high), max(low, high)
        out.append(
            f"{row['latent_class']} is {direction} probable by {size:.0f} percentage points "
            f"({low:.0f} to {high:.0f}) for {row['covariate']}: {row['change']}."
        )
    return out


def in_words(found: ClassPredictors) -> str:
    """Return the result as a few lines for a terminal."""
    lines = [
        f"Predictors of class: {found.design.formula.text} "
        f"({int(found.design.used.sum())} cases; {', '.join(found.ways)})",
        *headlines(found),
        *(f"{finding.level}: {finding.message}" for finding in found.findings),
    ]
    return "\n".join(lines)


def cases_in_words(found: ClassPredictors) -> str:
    """Say how many cases were used."""
    used, total = int(found.design.used.sum()), found.design.used.size
    return f"{used} of {total} cases" if used < total else f"all {total} cases"


def clear_rows(table: pd.DataFrame) -> pd.DataFrame:
    """Return the rows of odds ratios whose interval leaves out 1."""
    return table[(table["lower"] > 0) | (table["upper"] < 0)]
