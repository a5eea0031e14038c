"""Posterior predictive check of an outcome: would the model have given such values.

A replicate keeps each case's answers and covariates. At a draw of all parameters its class is
drawn given the answers alone, and its outcome given the class. Statistics of single classes are
weighted by the memberships that the answers give, the same weights on both sides.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.posterior.tables import OVERALL
from bayeslca.relate.case_units import CaseUnits
from bayeslca.relate.outcomes.draws import OutcomeDraws, flattened
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.relate.outcomes.quantities import simulate_outcome

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.relate.outcomes.column import Outcome

REPLICATES = 1000
MOST_RANGES = 10
ROUNDING = 1e-9
MISSED = 0.01
"""A check with a p below this is a misfit."""


def replicated_outcomes(
    posterior: Posterior,
    model: OutcomeModel,
    cases: CaseUnits,
    drawn: OutcomeDraws,
    *,
    most: int = REPLICATES,
    seed: int = 0,
) -> Floats:
    """Draw the outcome of all cases anew, shape (replicate, N)."""
    rng = np.random.default_rng(seed)
    flat = flattened(drawn, most)
    out = np.empty((len(flat.elements), model.value.size))
    for part, joint in log_joint(posterior.table, cases.units, flat.elements, flat.prevalence):
        below = np.cumsum(class_shares(joint), axis=0)[:-1]  # (K - 1, U, draws)
        for s, at in enumerate(range(len(flat.elements))[part]):
            u = rng.random(below.shape[1])
            classes = (u >= below[:, :, s]).sum(axis=0)[cases.unit_of_case]
            out[at] = simulate_outcome(model, flat.by_class[at], flat.shared[at], classes, rng)
    return out


def statistics(
    outcome: Outcome, value: Floats, weights: Floats, class_names: tuple[str, ...]
) -> dict[tuple[str, str], Floats]:
    """Return statistics (...) of outcomes (..., n), by their name and class.

    Parameters
    ----------
    outcome : Outcome
    value : ndarray, shape (..., n)
    weights : ndarray, shape (n, K)
        Memberships from the answers alone.
    class_names : tuple of str
    """
    out: dict[tuple[str, str], Floats] = {}
    mean = value.mean(axis=-1)
    away = value - mean[..., None]
    sd = np.sqrt((away**2).mean(axis=-1))
    if outcome.kind in ("numeric", "count"):
        out["mean", OVERALL] = mean
        out["standard deviation", OVERALL] = sd
        with np.errstate(invalid="ignore", divide="ignore"):
            out["skewness", OVERALL] = np.nan_to_num((away**3).mean(axis=-1) / sd**3)
        out["largest", OVERALL] = value.max(axis=-1)
        if outcome.kind == "count":
            out["share of zeros", OVERALL] = (value == 0.0).mean(axis=-1)
        else:
            out["smallest", OVERALL] = value.min(axis=-1)
    elif outcome.kind == "binary":
        out["share of yes", OVERALL] = mean
    else:
        for j, level in enumerate(outcome.levels):
            out[f"share of {level}", OVERALL] = (value == j).mean(axis=-1)
    name = "share of yes" if outcome.kind == "binary" else "mean"
    shift = float(outcome.kind == "ordered")  # places are counted from 1
    for k, latent_class in enumerate(class_names):
        share = weights[:, k] / weights[:, k].sum()
        centre = value @ share
        out[name, latent_class] = centre + shift
        if outcome.kind != "binary":
            spread = (value - centre[..., None]) ** 2 @ share
            out["standard deviation", latent_class] = np.sqrt(spread)
    return out


def outcome_checks(
    outcome: Outcome,
    model: OutcomeModel,
    replicates: Floats,
    membership: Floats,
    class_names: tuple[str, ...],
    interval: float = 0.95,
) -> pd.DataFrame:
    """Compare statistics of the outcome with those of replicates.

    Returns
    -------
    DataFrame
        A row per ``feature`` and ``latent_class`` ("overall": all cases) with ``observed``,
        ``expected``, ``lower``, ``upper`` of the replicates, and ``p``: twice the smaller of the
        shares of replicates that are as high or as low, at most 1; ``p_mcse`` is its error.
    """
    import pandas as pd

    seen = model.seen
    observed = statistics(outcome, model.value[seen], membership[seen], class_names)
    replicated = statistics(outcome, replicates[:, seen], membership[seen], class_names)
    n = len(replicates)
    tail = (1.0 - interval) / 2.0
    rows = []
    for key, found in replicated.items():
        value = float(observed[key])
        same = ROUNDING * max(1.0, abs(value))  # ties are ties, whatever the order of sums
        above, below = (found >= value - same).mean(), (found <= value + same).mean()
        share = min(float(above), float(below))
        lower, upper = np.quantile(found, [tail, 1.0 - tail])
        rows.append(
            {
                "feature": key[0],
                "latent_class": key[1],
                "observed": value,
                "expected": float(found.mean()),
                "lower": float(lower),
                "upper": float(upper),
                "p": min(1.0, 2.0 * share),
                "p_mcse": 2.0 * float(np.sqrt(max(share * (1.0 - share), 1.0 / n) / n)),
            }
        )
    frame = pd.DataFrame(rows)
    frame.attrs["interval"] = interval
    return frame


def distribution(
    outcome: Outcome, model: OutcomeModel, replicates: Floats, interval: float = 0.95
) -> pd.DataFrame:
    """Return the share of cases in ranges of values, observed and in replicates.

    Returns
    -------
    DataFrame
        A row per ``values`` ("0 to 9", a category): ``observed``, and ``expected``, ``lower``,
        ``upper`` of the replicates.
    """
    import pandas as pd

    seen = model.seen
    names, edges = _ranges(outcome, model.value[seen])
    shares = [
        (values[..., None, :] >= edges[:-1, None]) & (values[..., None, :] < edges[1:, None])
        for values in (model.value[seen], replicates[:, seen])
    ]
    observed, replicated = (share.mean(axis=-1) for share in shares)
    tail = (1.0 - interval) / 2.0
    lower, upper = np.quantile(replicated, [tail, 1.0 - tail], axis=0)
    frame = pd.DataFrame(
        {
            "values": names,
            "observed": observed,
            "expected": replicated.mean(axis=0),
            "lower": lower,
            "upper": upper,
        }
    )
    frame.attrs["interval"] = interval
    return frame


def _ranges(outcome: Outcome, value: Floats) -> tuple[list[str], Floats]:
    """Return names (n,) and edges (n + 1,) of ranges; the first and the last are open."""
    if outcome.levels:
        return list(outcome.levels), np.arange(len(outcome.levels) + 1.0) - 0.5
    low, high = np.quantile(value, [0.0 if outcome.kind == "count" else 0.02, 0.96])
    step = _round_step((high - low) / MOST_RANGES)
    if outcome.kind == "count":
        step = max(1.0, np.ceil(step))
    inner = np.arange(np.floor(low / step) + 1.0, np.floor(high / step) + 1.5) * step
    is_whole = outcome.kind == "count"
    last = [f"{edge - 1:g}" if is_whole else f"{edge:g}" for edge in inner]
    names = [f"up to {last[0]}"]
    for begin, end in zip(inner[:-1], last[1:], strict=True):
        names.append(f"{begin:g}" if f"{begin:g}" == end else f"{begin:g} to {end}")
    names.append(f"{inner[-1]:g} or more")
    return names, np.concatenate([[-np.inf], inner, [np.inf]])


def _round_step(step: float) -> float:
    """Return the next of 1, 2, 5, 10, ... above a step."""
    power = 10.0 ** np.floor(np.log10(max(step, 1e-300)))
    return float(next(m * power for m in (1.0, 2.0, 5.0, 10.0) if m * power >= step * (1 - 1e-9)))
