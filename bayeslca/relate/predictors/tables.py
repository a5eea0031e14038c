"""Tables of predictors of class: odds ratios, marginal effects, probabilities along a covariate."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError
from bayeslca.posterior.summary import Quantities, check_interval, summary_frame

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.predictors.class_predictors import ClassPredictors
    from bayeslca.relate.predictors.covariates import Design

MONTE_CARLO = ("mcse", "ess_bulk", "ess_tail", "r_hat")
THREE_STEPS = "three_steps"
MOST_CASES = 1000
"""Means over cases are over evenly chosen ones where there are more."""
MOST_DRAWS = 1000
"""And over evenly chosen draws."""


def odds_ratio_table(
    found: ClassPredictors, against: int, interval: float, ways: Sequence[str]
) -> pd.DataFrame:
    """Return odds ratios; see `ClassPredictors.odds_ratios`."""
    import pandas as pd

    check_interval(interval)
    names, columns = found.class_names, found.design.columns
    others = [k for k in range(len(names)) if k != against]
    frames = []
    for way in ways:
        keys = pd.DataFrame(
            [
                {
                    "way": way,
                    "covariate": column.name,
                    "meaning": column.meaning,
                    "latent_class": names[k],
                    "against": names[against],
                }
                for column in columns
                for k in others
            ]
        )
        draws = found.coefficients[way]
        contrast = draws[:, :, others] - draws[:, :, against : against + 1]
        by_column = np.swapaxes(contrast, 2, 3).reshape(*draws.shape[:2], -1)
        frame = _summary(keys, by_column, interval, way)
        if way == THREE_STEPS:
            frame = _exact(frame, found, others, against, interval)
        frames.append(frame.assign(probability_above_1=(by_column > 0).mean(axis=(0, 1))))
    table = pd.concat(frames, ignore_index=True)
    for name, column in (
        ("odds_ratio", "median"),
        ("odds_ratio_lower", "lower"),
        ("odds_ratio_upper", "upper"),
    ):
        table.insert(table.columns.get_loc("median"), name, np.exp(table[column]))  # type: ignore[arg-type]
    table.insert(
        table.columns.get_loc("median"),  # type: ignore[arg-type]
        "probability_above_1",
        table.pop("probability_above_1"),
    )
    table.loc[table["way"] == THREE_STEPS, "probability_above_1"] = np.nan
    table.attrs["interval"] = interval
    return table


def _exact(
    frame: pd.DataFrame, found: ClassPredictors, others: list[int], against: int, interval: float
) -> pd.DataFrame:
    """Put the three steps' estimate, standard error and normal interval in place of draws."""
    from scipy.stats import norm

    steps = found.three_steps
    assert steps is not None
    n_columns = steps.coefficients.shape[1]
    estimate, error = [], []
    for p in range(n_columns):
        for k in others:
            weights = np.zeros(steps.coefficients.size)
            weights[k * n_columns + p] = 1.0
            weights[against * n_columns + p] = -1.0
            estimate.append(weights @ steps.coefficients.ravel())
            error.append(np.sqrt(weights @ steps.covariance @ weights))
    value, sd = np.array(estimate), np.array(error)
    reach = norm.ppf(0.5 + interval / 2.0) * sd
    return frame.assign(median=value, mean=value, sd=sd, lower=value - reach, upper=value + reach)


def _summary(keys: pd.DataFrame, draws: Floats, interval: float, way: str) -> pd.DataFrame:
    """Return the summary of draws; no Monte Carlo columns for three steps, which have no chain."""
    if way != THREE_STEPS:
        return summary_frame(keys, Quantities(draws), interval)
    flat = draws.reshape(-1, draws.shape[-1])
    tail = (1.0 - interval) / 2.0
    lower, median, upper = np.quantile(flat, [tail, 0.5, 1.0 - tail], axis=0)
    frame = keys.assign(
        median=median, mean=flat.mean(axis=0), sd=flat.std(axis=0), lower=lower, upper=upper
    )
    return frame.assign(**dict.fromkeys(MONTE_CARLO, np.nan))


def probabilities(matrix: Floats, coefficients: Floats) -> Floats:
    """Return class probabilities (..., n, K) of rows (n, P) at coefficients (..., K, P)."""
    predictor = np.einsum("np,...kp->...nk", matrix, coefficients, optimize=True)
    predictor -= predictor.max(axis=-1, keepdims=True)
    np.exp(predictor, out=predictor)
    predictor /= predictor.sum(axis=-1, keepdims=True)
    return np.asarray(predictor)


def _mean_probabilities(found: ClassPredictors, frame: pd.DataFrame, draws: Floats) -> Floats:
    """Return the mean over cases of class probabilities, shape (chain, draw, K)."""
    matrix = found.design.matrix_of(frame)
    out = np.empty(draws.shape[:3])
    for c in range(draws.shape[0]):
        for first in range(0, draws.shape[1], 100):
            piece = slice(first, first + 100)
            out[c, piece] = probabilities(matrix, draws[c, piece]).mean(axis=1)
    return out


def _cases(design: Design) -> pd.DataFrame:
    n = len(design.frame)
    at = np.unique(np.linspace(0, n - 1, min(n, MOST_CASES)).astype(int))
    return design.frame.iloc[at].reset_index(drop=True)


def _draws(found: ClassPredictors, way: str) -> Floats:
    draws = found.coefficients[way]
    step = max(1, draws.shape[0] * draws.shape[1] // MOST_DRAWS)
    return draws[:, ::step]


def marginal_effect_table(
    found: ClassPredictors, interval: float, ways: Sequence[str]
) -> pd.DataFrame:
    """Return mean changes in class probabilities; see `ClassPredictors.marginal_effects`."""
    import pandas as pd

    check_interval(interval)
    cases, frames = _cases(found.design), []
    for way in ways:
        draws = _draws(found, way)
        for covariate in found.design.covariates:
            for change, low, high in _changes(found.design, cases, covariate):
                difference = _mean_probabilities(
                    found, cases.assign(**{covariate: high}), draws
                ) - _mean_probabilities(found, cases.assign(**{covariate: low}), draws)
                keys = pd.DataFrame(
                    [
                        {"way": way, "covariate": covariate, "change": change, "latent_class": k}
                        for k in found.class_names
                    ]
                )
                frames.append(_summary(keys, difference, interval, way))
    table = pd.concat(frames, ignore_index=True)
    table.attrs["interval"] = interval
    return table


def _changes(design: Design, cases: pd.DataFrame, covariate: str) -> list[tuple[str, Any, Any]]:
    """Return what is compared: words, lower and higher values of the covariate."""
    levels = design.levels_of(covariate)
    if levels:
        is_number = cases[covariate].dtype.kind == "f"
        as_held = [float(level) if is_number else level for level in levels]
        return [
            (f"{level} against {levels[0]}", as_held[0], value)
            for level, value in zip(levels[1:], as_held[1:], strict=True)
        ]
    values = cases[covariate].to_numpy(dtype=np.float64)
    smallest, largest = design.frame[covariate].min(), design.frame[covariate].max()
    if set(np.unique(values)) <= {0.0, 1.0}:
        return [("1 against 0", np.zeros_like(values), np.ones_like(values))]
    step = design.spread_of(covariate)
    low = np.maximum(values - step / 2.0, smallest)  # within what was seen
    high = np.minimum(low + step, largest)
    return [(f"a rise by {step:.3g}", np.minimum(low, high - step), high)]


def probability_table(
    found: ClassPredictors, along: str, interval: float, way: str, points: int
) -> pd.DataFrame:
    """Return class probabilities along a covariate; see `ClassPredictors.class_probabilities`."""
    import pandas as pd

    check_interval(interval)
    if points < 2:
        msg = f"points={points}: a line takes two points or more."
        raise ModelError(msg)
    cases, draws = _cases(found.design), _draws(found, way)
    frames = []
    for value in _values(found.design, along, points):
        mean = _mean_probabilities(found, cases.assign(**{along: value}), draws)
        keys = pd.DataFrame({"value": value, "latent_class": list(found.class_names)})
        frames.append(_summary(keys, mean, interval, way))
    table = pd.concat(frames, ignore_index=True)
    table.attrs.update(interval=interval, along=along, way=way)
    return table


def _values(design: Design, along: str, points: int) -> list[Any]:
    levels = design.levels_of(along)
    column = design.frame[along]
    if levels:
        return [float(level) for level in levels] if column.dtype.kind == "f" else list(levels)
    values = column.to_numpy(dtype=np.float64)
    return [float(value) for value in np.linspace(values.min(), values.max(), points)]


def prediction_table(found: ClassPredictors, data: Any, interval: float, way: str) -> pd.DataFrame:
    """Return class probabilities of new cases; see `ClassPredictors.predict`."""
    import pandas as pd

    check_interval(interval)
    frame = pd.DataFrame(data).reset_index(drop=True)
    matrix = found.design.matrix_of(frame)
    draws = _draws(found, way)
    shares = probabilities(matrix, draws)  # (chain, draw, n, K)
    keys = pd.DataFrame(
        [{"row": i + 1, "latent_class": k} for i in range(len(frame)) for k in found.class_names]
    )
    table = _summary(keys, shares.reshape(*draws.shape[:2], -1), interval, way)
    table.attrs["interval"] = interval
    return table
