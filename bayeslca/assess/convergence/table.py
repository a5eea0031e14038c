"""R-hat, effective sample sizes and Monte Carlo errors of every reported quantity."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.posterior.class_state import ClassState
from bayeslca.posterior.summary import Quantities, summary_frame

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

AGREE = 1.01
"""Largest R-hat at which chains are said to agree."""
ENOUGH = 100
"""Least bulk and tail effective sample size per chain."""
KEYS = ("quantity", "group", "latent_class", "item", "category", "note")
NUMBERS = ("mean", "sd", "mcse", "ess_bulk", "ess_tail", "r_hat")
CONSTANT, EMPTY, TWIN = "constant", "empty class", "not told apart"


@dataclass(frozen=True, slots=True)
class Worst:
    """The worst of the quantities that count.

    Attributes
    ----------
    r_hat : float
        Largest; 1 when nothing counts, infinite where chains stand still apart.
    r_hat_of : str
    ess : float
        Smallest of bulk and tail; infinite when nothing counts.
    ess_of : str
    n : int
        How many quantities count.
    """

    r_hat: float
    r_hat_of: str
    ess: float
    ess_of: str
    n: int


def diagnostics_table(posterior: Posterior, state: ClassState) -> pd.DataFrame:
    """Return a row per reported quantity, those of the posterior's own tables.

    Parameters
    ----------
    posterior : Posterior
    state : ClassState
        Classes whose quantities need not converge.
    """
    import pandas as pd

    log_likelihood = summary_frame(
        pd.DataFrame({"quantity": ["log likelihood"]}),
        Quantities(posterior.draws.log_likelihood[:, :, None]),
    )
    parts = [log_likelihood, posterior.prevalence().assign(quantity="prevalence")]
    if posterior.model.pooled:
        parts.append(posterior.between_units())
    if posterior.model.n_classes > 1:
        parts.append(posterior.separation().assign(quantity="separation").drop(columns="note"))
    parts.append(posterior.response_probabilities().assign(quantity="response probability"))
    if posterior.model.item_sets:
        joint = posterior.joint_answers().rename(columns={"joint_answer": "category"})
        parts.append(joint.rename(columns={"items": "item"}).assign(quantity="joint answer"))
    for part in parts:
        part.attrs.clear()  # pandas compares the attributes of what it joins
        for key in set(KEYS) - set(part.columns):
            part[key] = ""
        part["note"] = _notes(part, posterior.model.class_names, state)
    return pd.concat(parts, ignore_index=True)[[*KEYS, *NUMBERS]]


def worst_of(table: pd.DataFrame, n_chains: int) -> Worst:
    """Return the worst R-hat and effective sample size of the rows that count."""
    rows = table[table["note"] == ""]
    if not len(rows):
        return Worst(1.0, "", math.inf, "", 0)
    r_hat, ess = _r_hat(rows, n_chains), _ess(rows)
    names = names_of(rows)
    high, low = int(np.argmax(r_hat)), int(np.argmin(ess))
    return Worst(float(r_hat[high]), names[high], float(ess[low]), names[low], len(rows))


def not_met(table: pd.DataFrame, n_chains: int) -> list[str]:
    """Return the quantities that count and have not converged."""
    rows = table[table["note"] == ""]
    late = (_r_hat(rows, n_chains) > AGREE) | (_ess(rows) < ENOUGH * n_chains)
    return [name for name, is_late in zip(names_of(rows), late, strict=True) if is_late]


def names_of(rows: pd.DataFrame) -> list[str]:
    """Return what each row is about, such as ``P(fees=yes | managed)``."""
    return [_name(row) for row in rows[list(KEYS)].itertuples(index=False, name=None)]


def _name(row: Iterable[str]) -> str:
    quantity, group, latent_class, item, category, _ = row
    where = f" | {group}" if group else ""
    if quantity == "prevalence":
        return f"P({latent_class}{where})"
    if quantity == "response probability":
        return f"P({item}={category} | {latent_class}{', ' + group if group else ''})"
    if quantity == "joint answer":
        return f"P({category} | {latent_class}{', ' + group if group else ''})"
    return quantity


def _r_hat(rows: pd.DataFrame, n_chains: int) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """R-hat; chains that stand still at different values have none and count as infinite.

    A single chain has none either; it gets a finding of its own.
    """
    values = rows["r_hat"].to_numpy(dtype=np.float64)
    return np.where(np.isnan(values), np.inf if n_chains > 1 else 1.0, values)


def _ess(rows: pd.DataFrame) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """Smaller of bulk and tail effective sample size; 0 where there is none."""
    values = rows[["ess_bulk", "ess_tail"]].min(axis=1, skipna=False).to_numpy(dtype=np.float64)
    return np.where(np.isnan(values), 0.0, values)


def _notes(frame: pd.DataFrame, class_names: tuple[str, ...], state: ClassState) -> list[str]:
    empty = {class_names[k] for k in state.empty}
    twins = {class_names[k] for pair in state.twins for k in pair}
    notes = []
    rows = zip(frame["latent_class"], frame["lower"], frame["upper"], strict=True)
    for name, lower, upper in rows:
        if lower == upper:  # rounding leaves a constant a tiny sd, but its quantiles are exact
            notes.append(CONSTANT)
        else:
            notes.append(EMPTY if name in empty else TWIN if name in twins else "")
    return notes
