"""Partial pooling shown: each unit alone and pooled, what lies between units, a new unit."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import BayesLCAError
from bayeslca.model.pooled_prevalence import PooledPrevalence, draw_dirichlets, spread_of
from bayeslca.model.probabilities import log_joint
from bayeslca.posterior.summary import Quantities, summary_frame

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

NEW_UNIT = 7001
"""Key of the stream from which the prevalences of a new unit are drawn."""
ALONE_NUMBERS = 400_000
"""Numbers held while units are looked at alone; fewer draws are used when cases are many."""
ALONE_ROUNDS, ALONE_MOVE = 500, 1e-6
"""EM for one unit alone stops after so many rounds, or when no share moves by more."""
SPREAD, CONCENTRATION = "spread between units", "concentration"
MEAN, SD = "mean prevalence", "standard deviation between units"


def pooled_concentration(posterior: Posterior) -> Floats:
    """Return concentration times mean (chain, draw, K).

    Raises
    ------
    BayesLCAError
        When the model does not pool its units.
    """
    concentration = posterior.draws.concentration
    if concentration is None:
        msg = (
            "the units of this model are not pooled, so there is nothing between them to show. "
            "Fit it with LatentClassModel(..., groups=responses.groups, pooled=True)."
        )
        raise BayesLCAError(msg)
    return concentration


def new_unit_draws(posterior: Posterior) -> Floats:
    """Draw the prevalences (chain, draw, K) of a unit that was not observed."""
    seed = posterior.draws.seed
    rng = np.random.default_rng([NEW_UNIT, 0 if seed is None else seed])
    return draw_dirichlets(rng, pooled_concentration(posterior), 1)[..., 0, :]


def between_units(posterior: Posterior, interval: float = 0.95) -> pd.DataFrame:
    """Return how much units differ; see `Posterior.between_units`."""
    import pandas as pd

    names = posterior.model.class_names
    draws = _between(pooled_concentration(posterior))
    keys = pd.DataFrame(
        {
            "quantity": [SPREAD, CONCENTRATION, *[MEAN] * len(names), *[SD] * len(names)],
            "latent_class": ["", "", *names, *names],
        }
    )
    frame = summary_frame(keys, Quantities(draws), interval)
    # The concentration's tail is so long that its mean says nothing, and may not exist.
    frame.loc[frame["quantity"] == CONCENTRATION, ["mean", "sd", "mcse"]] = np.nan
    source = posterior.model.prevalence_source
    assert isinstance(source, PooledPrevalence)
    rng = np.random.default_rng(NEW_UNIT)
    prior = _between(source.simulate_many(rng, 20_000)[1])
    tail = (1.0 - interval) / 2.0
    for name, at in (("median", 0.5), ("lower", tail), ("upper", 1.0 - tail)):
        frame[f"prior_{name}"] = np.quantile(prior, at, axis=0)
    return frame


def _between(concentration: Floats) -> Floats:
    """Return spread, concentration, means and standard deviations (..., 2 + 2 K)."""
    total = concentration.sum(axis=-1)[..., None]
    mean = concentration / total
    spread = spread_of(concentration)[..., None]
    return np.concatenate([spread, total, mean, spread * np.sqrt(mean * (1.0 - mean))], axis=-1)


def partial_pooling(posterior: Posterior, interval: float = 0.95) -> pd.DataFrame:
    """Return each unit alone and pooled; see `Posterior.partial_pooling`."""
    import pandas as pd

    total = pooled_concentration(posterior).sum(axis=-1)
    model = posterior.model
    assert model.groups is not None  # pooled units are groups
    levels, names = model.groups.levels, model.class_names
    cases = posterior.group_cases
    keys = pd.DataFrame(
        {
            "group": np.repeat(levels, len(names)),
            "latent_class": np.tile(names, len(levels)),
            "cases": np.repeat(cases.astype(np.int64), len(names)),
            "alone": prevalence_alone(posterior).ravel(),
        }
    )
    flat = posterior.prevalence_draws.reshape(*total.shape, -1)
    frame = summary_frame(keys, Quantities(flat), interval)
    borrowed = (total[..., None] / (total[..., None] + cases)).mean(axis=(0, 1))
    frame["borrowed"] = np.repeat(borrowed, len(names))
    return frame


def prevalence_alone(posterior: Posterior) -> Floats:
    """Return the prevalences (unit, K) that each unit's own cases are most probable under.

    Given the response probabilities of a draw, those prevalences of a unit that make its answers
    most probable (maximum likelihood, by EM), averaged over some draws; nan without cases. Where
    classes are surely known it is the share of the unit's cases in each class.
    """
    table, units, draws = posterior.table, posterior.unit_table, posterior.draws
    n_units, n_classes = units.n_units, table.n_classes
    every = draws.n_chains * draws.n_draws
    some = int(np.clip(ALONE_NUMBERS // max(1, n_units * n_classes), 20, min(200, every)))
    at = np.linspace(0, every - 1, some).astype(int)
    elements = draws.elements.reshape(every, -1)[at]
    flat = np.full((some, table.n_prevalence_rows, n_classes), 1.0 / n_classes)
    joint = np.concatenate(
        [found for _, found in log_joint(table, units, elements, flat)], axis=2
    ).transpose(2, 1, 0)  # (S, U, K)
    likelihood = np.exp(joint - joint.max(axis=2, keepdims=True))
    order = np.argsort(units.prevalence_row, kind="stable")
    likelihood, row = likelihood[:, order], np.asarray(units.prevalence_row)[order]
    counts = np.asarray(units.count, dtype=np.float64)[order]
    present, starts = np.unique(row, return_index=True)
    prevalence = flat[:, present]
    cases = np.add.reduceat(counts, starts)[:, None]
    place = np.searchsorted(present, row)
    for _ in range(ALONE_ROUNDS):
        share = likelihood * prevalence[:, place]
        share *= (counts / share.sum(axis=2))[:, :, None]
        newer = np.add.reduceat(share, starts, axis=1) / cases
        moved = float(np.abs(newer - prevalence).max())
        prevalence = newer
        if moved < ALONE_MOVE:
            break
    out = np.full((table.n_prevalence_rows, n_classes), np.nan)
    out[present] = prevalence.mean(axis=0)
    return out


def spread_sensitivity(posterior: Posterior, interval: float = 0.95) -> pd.DataFrame:
    """Return what other priors on the spread would do; see `Posterior.spread_sensitivity`."""
    import pandas as pd
    from scipy.stats import beta

    concentration = pooled_concentration(posterior)
    source = posterior.model.prevalence_source
    assert isinstance(source, PooledPrevalence)
    spread = np.clip(spread_of(concentration), 1e-12, 1.0 - 1e-12).ravel()
    units = posterior.prevalence_draws.reshape(spread.size, -1)
    a, b = source.spread_prior
    asked = {
        "as stated": (a, b),
        "half as strong": (a / 2, b / 2),
        "twice as strong": (2 * a, 2 * b),
        "favours alike": (a, b + 3.0),
        "favours different": (a + 1.0, b),
    }
    tail = (1.0 - interval) / 2.0
    stated = units.mean(axis=0)
    rows: list[dict[str, object]] = []
    for name, parameters in asked.items():
        logs = beta.logpdf(spread, *parameters) - beta.logpdf(spread, a, b)
        weight = np.exp(logs - logs.max())
        weight /= weight.sum()
        lower, median, upper = _weighted_quantiles(spread, weight, (tail, 0.5, 1.0 - tail))
        rows.append(
            {
                "prior": f"{name}: Beta({parameters[0]:g}, {parameters[1]:g})",
                "median": median,
                "lower": lower,
                "upper": upper,
                "largest_change": float(np.abs(weight @ units - stated).max()) if rows else 0.0,
                "draws_that_count": float(1.0 / np.sum(weight**2)),
            }
        )
    frame = pd.DataFrame(rows)
    frame.attrs["interval"] = interval
    return frame


def _weighted_quantiles(values: Floats, weight: Floats, at: tuple[float, ...]) -> list[float]:
    order = np.argsort(values)
    cumulative = np.cumsum(weight[order])
    places = np.minimum(np.searchsorted(cumulative, at), values.size - 1)
    return [float(v) for v in values[order][places]]
