"""Items that are answered together: their joint answers, and how they go together in a class.

How two items go together within a class has several measures. For two answers each, the odds
ratio of their 2 x 2 table; for ordered answers, pairs of cases that agree over pairs that
disagree (Agresti 1980, Journal of the Royal Statistical Society C 29, 120-125). For diagnostic
tests it is usual to give the conditional covariance, P(both positive | class) less what it would
be under independence (Vacek 1985, Biometrics 41, 959-968; Dendukuri & Joseph 2001, Biometrics 57,
158-167), and the correlation, which is that over both standard deviations.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.joint_answers import joint_of
from bayeslca.model.pair_measures import answer_scores, concordance, has_order
from bayeslca.model.probabilities import row_probability
from bayeslca.posterior.summary import (
    SUMMARY_COLUMNS,
    Quantities,
    check_interval,
    summary_frame,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.answered_together import ItemSet
    from bayeslca.posterior.posterior import Posterior

MEASURES = ("odds ratio", "covariance", "correlation")
NO_DEPENDENCE = {"odds ratio": 1.0, "covariance": 0.0, "correlation": 0.0}


class _Place(NamedTuple):
    """A set in a class, where it is answered together."""

    group: int
    latent_class: int
    of: ItemSet


def joint_answers_table(posterior: Posterior, interval: float) -> pd.DataFrame:
    """Return the probability of each joint answer; see `Posterior.joint_answers`."""
    import pandas as pd

    items, rows, draws = posterior.model.items, [], []
    for place in _places(posterior):
        names = [items[j].name for j in place.of.items]
        joint = _joint_draws(posterior, place, place.of.items)
        for at in np.ndindex(*place.of.sizes):
            said = (
                f"{name}={items[j].categories[c]}"
                for name, j, c in zip(names, place.of.items, at, strict=True)
            )
            named = {"items": ", ".join(names), "joint_answer": ", ".join(said)}
            rows.append(_keys(posterior, place) | named)
            draws.append(joint[(..., *at)])
    keys = pd.DataFrame(rows, columns=None if rows else ["latent_class", "items", "joint_answer"])
    return _summarised(posterior, keys, draws, interval)


def dependence_table(posterior: Posterior, interval: float) -> pd.DataFrame:
    """Return how pairs go together; see `Posterior.conditional_dependence`."""
    import pandas as pd

    items, rows, draws, above = posterior.model.items, [], [], []
    for place in _places(posterior):
        for one, two in combinations(place.of.items, 2):
            if not (has_order(items[one]) and has_order(items[two])):
                continue
            joint = _joint_draws(posterior, place, (one, two))
            found = _measures(joint, *(_scores(posterior, j) for j in (one, two)))
            pair = _keys(posterior, place) | {"item_1": items[one].name, "item_2": items[two].name}
            for name, values in zip(MEASURES, found, strict=True):
                rows.append(pair | {"measure": name})
                draws.append(values)
                # With three answers or more the signs of the measures need not agree.
                above.append(float((values > NO_DEPENDENCE[name]).mean()))
    columns = ["latent_class", "item_1", "item_2", "measure"]
    keys = pd.DataFrame(rows, columns=None if rows else columns)
    frame = _summarised(posterior, keys, draws, interval)
    # The mean of an odds ratio need not exist: a joint answer may be next to impossible.
    frame.loc[frame["measure"] == "odds ratio", ["mean", "sd", "mcse"]] = np.nan
    frame["positive"] = above
    return frame


def _summarised(
    posterior: Posterior, keys: pd.DataFrame, draws: list[Floats], interval: float
) -> pd.DataFrame:
    if draws:
        return summary_frame(keys, Quantities(np.stack(draws, axis=-1)), interval)
    check_interval(interval)
    frame = keys.assign(**{name: np.zeros(0) for name in SUMMARY_COLUMNS})
    frame.attrs["interval"] = interval
    return frame


def _places(posterior: Posterior) -> Iterator[_Place]:
    model = posterior.model
    for one in model.item_sets:
        for g in range(model.n_response_groups if one.first in model.free_items else 1):
            for k in sorted(one.classes):
                yield _Place(g, k, one)


def _keys(posterior: Posterior, place: _Place) -> dict[str, str]:
    model = posterior.model
    keys = {"latent_class": model.class_names[place.latent_class]}
    if model.groups is not None and model.free_items:
        free = place.of.first in model.free_items
        keys = {"group": model.groups.levels[place.group] if free else ""} | keys
    return keys


def _joint_draws(posterior: Posterior, place: _Place, items: tuple[int, ...]) -> Floats:
    """Return draws of the joint answers to some items of a set, (chain, draw, sizes...)."""
    table = posterior.table
    joint = joint_of(table, set(items))
    assert joint is not None  # every part of a set has joint answers
    rows = table.joint_row[place.group, joint.columns]
    probability = row_probability(table, posterior.draws.elements)[..., place.latent_class]
    return probability[..., rows].reshape(*probability.shape[:2], *joint.sizes)


def _scores(posterior: Posterior, item: int) -> Ints:
    return answer_scores((posterior.model.items[item],))


def _measures(joint: Floats, first: Ints, second: Ints) -> tuple[Floats, Floats, Floats]:
    """Return odds ratio, covariance and correlation (chain, draw) of joint answers."""
    ordered = joint[..., np.argsort(first), :][..., np.argsort(second)]
    ratio = concordance(ordered)
    one, two = joint.sum(axis=-1), joint.sum(axis=-2)
    mean_one, mean_two = one @ first, two @ second
    covariance = np.einsum("...ab,a,b->...", joint, first, second) - mean_one * mean_two
    variance = (one @ first**2 - mean_one**2) * (two @ second**2 - mean_two**2)
    varies = variance > 0
    correlation = np.where(varies, covariance / np.sqrt(np.where(varies, variance, 1.0)), 0.0)
    return ratio, covariance, correlation
