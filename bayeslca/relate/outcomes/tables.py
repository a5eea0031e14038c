"""Tables of what follows from class: the ways one under another, with the same columns."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from itertools import combinations
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.special import expit, logit
from scipy.stats import norm

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, near_names
from bayeslca.posterior.summary import SUMMARY_COLUMNS, Quantities, check_interval
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.relate.outcomes.quantities import (
    category_probabilities,
    class_means,
    effects,
    is_ratio,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes
    from bayeslca.relate.outcomes.draws import OutcomeDraws

Function = Callable[[OutcomeModel, Floats, Floats], Floats]
"""Of a model, by_class (..., K, M) and shared (..., S), giving quantities (..., Q)."""

Scale = Literal["identity", "log", "logit"]
"""On which scale a normal interval of an estimate is made."""

EDGE = 1e-4
"""A probability or mean nearer than this to its edge has no normal interval."""


def way_table(
    found: ClassOutcomes,
    keys: pd.DataFrame,
    function: Function,
    interval: float,
    scale: Scale | Sequence[Scale] = "identity",
) -> pd.DataFrame:
    """Return the summary of some quantities, way by way.

    Of the three-step ways ``median`` and ``mean`` are the estimate, ``sd`` its standard error and
    ``lower`` and ``upper`` a normal interval on the given scale; nan where the correction had no
    estimate, or one at its edge.
    """
    import pandas as pd

    check_interval(interval)
    scales: Sequence[Scale] = [scale] * len(keys) if isinstance(scale, str) else scale
    parts = []
    for way, drawn in found.drawn.items():
        summary = Quantities(function(found.model, drawn.by_class, drawn.shared)).summary(interval)
        parts.append(_keyed(way, keys, summary))
    for way, steps in found.steps.items():
        estimate, error = np.full(len(keys), np.nan), np.full(len(keys), np.nan)
        if steps is not None:
            estimate, error = steps.quantities(function)
        parts.append(_keyed(way, keys, _normal_summary(estimate, error, interval, scales)))
    frame = pd.concat(parts, ignore_index=True)
    frame.attrs["interval"] = interval
    return frame


def _keyed(way: str, keys: pd.DataFrame, summary: Mapping[str, Floats]) -> pd.DataFrame:
    frame = keys.assign(**summary)
    frame.insert(0, "way", way)
    return frame


def _normal_summary(
    estimate: Floats, error: Floats, interval: float, scales: Sequence[Scale]
) -> dict[str, Floats]:
    half = float(norm.ppf(0.5 + interval / 2.0)) * error
    ends = [_ends(*one) for one in zip(estimate, half, scales, strict=True)]
    lower, upper = np.array(ends, dtype=np.float64).reshape(-1, 2).T
    nothing = np.full(estimate.size, np.nan)
    values = {"median": estimate, "mean": estimate, "sd": error, "lower": lower, "upper": upper}
    return {name: values.get(name, nothing) for name in SUMMARY_COLUMNS}


def _ends(estimate: float, half: float, scale: Scale) -> tuple[float, float]:
    """Return the ends of an interval, made where the estimate may go anywhere."""
    if scale == "identity":
        return estimate - half, estimate + half
    if not estimate > EDGE or (scale == "logit" and not estimate < 1.0 - EDGE):
        return np.nan, np.nan
    if scale == "log":
        away = half / estimate
        return estimate * float(np.exp(-away)), estimate * float(np.exp(away))
    away, at = half / (estimate * (1.0 - estimate)), float(logit(estimate))
    return float(expit(at - away)), float(expit(at + away))


def _scale_of_mean(found: ClassOutcomes) -> Scale:
    scales: dict[str, Scale] = {"binary": "logit", "count": "log"}
    return scales.get(found.outcome.kind, "identity")


def means_table(found: ClassOutcomes, interval: float) -> pd.DataFrame:
    """Return the mean of each class; see `ClassOutcomes.means`."""
    import pandas as pd

    keys = pd.DataFrame({"latent_class": found.class_names})
    frame = way_table(found, keys, class_means, interval, _scale_of_mean(found))
    frame["cases"] = np.tile(found.expected_cases, len(found.ways))
    return frame


def pairs(n: int) -> list[tuple[int, int]]:
    """Return all pairs of classes, the earlier first."""
    return list(combinations(range(n), 2))


def differences_table(found: ClassOutcomes, interval: float) -> pd.DataFrame:
    """Return all differences of means; see `ClassOutcomes.differences`."""
    import pandas as pd

    names = found.class_names
    chosen = pairs(len(names))
    keys = pd.DataFrame(
        {
            "latent_class": [names[a] for a, _ in chosen],
            "other_class": [names[b] for _, b in chosen],
        }
    )

    def gaps(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
        means = class_means(model, by_class, shared)
        return np.stack([means[..., a] - means[..., b] for a, b in chosen], axis=-1)

    def sizes(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
        return np.stack([effects(model, by_class, shared, a, b) for a, b in chosen], axis=-1)

    frame = way_table(found, keys, gaps, interval)
    larger = [_larger(found, drawn, gaps) for drawn in found.drawn.values()]
    nothing = np.full(len(chosen), np.nan)
    frame["probability_larger"] = np.concatenate([*larger, *([nothing] * len(found.steps))])
    scale: Scale = "log" if is_ratio(found.model) else "identity"
    if found.outcome.kind == "ordered":
        scale = "logit"
    effect = way_table(found, keys, sizes, interval, scale)
    for column, of in (("effect", "median"), ("effect_lower", "lower"), ("effect_upper", "upper")):
        frame[column] = effect[of]
    return frame


def _larger(found: ClassOutcomes, drawn: OutcomeDraws, gaps: Function) -> Floats:
    return np.asarray((gaps(found.model, drawn.by_class, drawn.shared) > 0.0).mean(axis=(0, 1)))


def categories_table(found: ClassOutcomes, interval: float) -> pd.DataFrame:
    """Return the probability of each category in each class, of an ordered outcome."""
    import pandas as pd

    levels = found.outcome.levels
    if found.outcome.kind != "ordered":
        msg = f"outcome {found.outcome.name!r} is {found.outcome.kind}: it has no categories."
        raise ModelError(msg)
    keys = pd.DataFrame(
        [
            {"latent_class": name, "category": level}
            for name in found.class_names
            for level in levels
        ]
    )

    def flat(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
        p = category_probabilities(model, by_class, shared)
        return p.reshape(*p.shape[:-2], -1)

    return way_table(found, keys, flat, interval, "logit")


def parameters_table(found: ClassOutcomes, interval: float) -> pd.DataFrame:
    """Return what there is beside means: spreads by class, and slopes of covariates."""
    import pandas as pd

    model = found.model
    rows: list[dict[str, str]] = []
    if model.has_spread:
        word = "standard deviation" if found.outcome.kind == "numeric" else "size"
        rows += [{"parameter": word, "latent_class": name} for name in found.class_names]
    rows += [{"parameter": name, "latent_class": ""} for name in found.covariate_names]

    frame = pd.DataFrame(rows, columns=["parameter", "latent_class"])
    if frame.empty:
        return frame.assign(way=pd.Series(dtype=object))[["way", *frame.columns]]

    def flat(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
        parts = [shared[..., : model.n_slopes]]
        if model.has_spread:
            second = by_class[..., 1]
            parts.insert(0, np.sqrt(second) if found.outcome.kind == "numeric" else second)
        elif found.model.has_spread:  # a correction that needs no spread
            parts.insert(0, np.full(by_class.shape[:-1], np.nan))
        return np.concatenate(parts, axis=-1)

    n_slopes = len(found.covariate_names)
    of_spread: Scale = "log"
    of_slope: Scale = "identity"
    scales = [of_spread] * (len(frame) - n_slopes) + [of_slope] * n_slopes
    return way_table(found, frame, flat, interval, scales)


def order_table(found: ClassOutcomes, text: str) -> pd.DataFrame:
    """Return the probability that class means stand in an order; see `ClassOutcomes.order`."""
    import pandas as pd

    chain = read_order(text, found.class_names)
    rows = []
    prior = 1.0 / float(np.prod(np.arange(1, len(chain) + 1)))
    for way, drawn in found.drawn.items():
        means = class_means(found.model, drawn.by_class, drawn.shared)[..., chain]
        holds = np.all(np.diff(means, axis=-1) > 0.0, axis=-1).astype(np.float64)
        error = float(Quantities(holds[..., None]).monte_carlo()["mcse"][0])
        rows.append(
            {
                "way": way,
                "order": text,
                "posterior_probability": float(holds.mean()),
                "posterior_mcse": 0.0 if np.isnan(error) else error,
                "prior_probability": prior,
            }
        )
    return pd.DataFrame(rows)


def likeliest_order(found: ClassOutcomes, way: str) -> tuple[str, float]:
    """Return the order of class means that most draws have, and its posterior probability."""
    drawn = found.drawn[way]
    means = class_means(found.model, drawn.by_class, drawn.shared)
    orders = np.argsort(means.reshape(-1, means.shape[-1]), axis=1)
    distinct, times = np.unique(orders, axis=0, return_counts=True)
    best = distinct[times.argmax()]
    text = " < ".join(found.class_names[k] for k in best.tolist())
    return text, float(times.max() / times.sum())


def read_order(text: str, class_names: tuple[str, ...]) -> list[int]:
    """Read an order such as ``managed < informal < lapsed``; the lowest first.

    Raises
    ------
    ModelError
        When it is no chain of classes joined by one sign.
    """
    where = f"order {text!r}"
    has = [sign for sign in "<>" if sign in text]
    if len(has) != 1 or "=" in text:
        msg = f"{where}: write classes joined by '<' alone, or by '>' alone: 'a < b < c'."
        raise ModelError(msg)
    chain = [part.strip().strip("\"'") for part in text.split(has[0])]
    for name in chain:
        if name not in class_names:
            msg = (
                f"{where}: there is no class {name!r}{near_names(name, class_names)}. The classes "
                f"are {', '.join(class_names)}."
            )
            raise ModelError(msg)
    if len(set(chain)) < len(chain):
        msg = f"{where}: names a class twice."
        raise ModelError(msg)
    positions = [class_names.index(name) for name in chain]
    return positions if has[0] == "<" else positions[::-1]


def moved_table(found: ClassOutcomes) -> pd.DataFrame:
    """Return how far each case's membership moved; see `ClassOutcomes.membership_moved`."""
    import pandas as pd

    names = np.asarray(found.class_names, dtype=object)
    columns: dict[str, object] = {"case": list(found.case_names)}
    memberships = dict(_memberships(found))
    for way, share in memberships.items():
        columns[f"modal_class_{way}"] = names[share.argmax(axis=1)]
    for way, share in memberships.items():
        for k, name in enumerate(names):
            columns[f"probability_{name}_{way}"] = share[:, k]
    if "joint" in memberships:
        base = "cut" if "cut" in memberships else "answers"
        joint, other = memberships["joint"], memberships[base]
        columns["moved"] = 0.5 * np.abs(joint - other).sum(axis=1)
        columns["changed"] = joint.argmax(axis=1) != other.argmax(axis=1)
    return pd.DataFrame(columns)


def _memberships(found: ClassOutcomes) -> Iterator[tuple[str, Floats]]:
    yield "answers", found.answers_membership
    for way in ("cut", "joint"):
        if way in found.drawn:
            yield way, found.drawn[way].membership
