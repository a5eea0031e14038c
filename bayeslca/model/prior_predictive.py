"""What the priors imply, constraints and naming rules kept: for the parameters and for answers.

Parameters are drawn from the prior, and from each draw the answers of a study of the given size.
So a prior can be argued about in the terms of the study, before its answers are seen.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Bools, Floats, Ints, Seed
from bayeslca.exceptions import ModelError
from bayeslca.model.evaluate import ParameterDraws
from bayeslca.model.pooled_prevalence import new_unit_name
from bayeslca.model.prior_draws import draw_prior
from bayeslca.model.simulate import draw_answers, draw_classes, group_sizes
from bayeslca.responses.item import Item
from bayeslca.responses.units import MISSING, Units, collapse

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

OVERALL = "overall"
DISTINCT_PATTERNS, SCORE_MEAN, SCORE_SD = "distinct_patterns", "sum_score_mean", "sum_score_sd"
POINTS = {
    "lower_95": 0.025,
    "lower_50": 0.25,
    "median": 0.5,
    "upper_50": 0.75,
    "upper_95": 0.975,
}
SUMMARY = ("median", "mean", "lower_50", "upper_50", "lower_95", "upper_95")
"""Columns of every table: ends of the equal-tailed 50 % and 95 % intervals, median and mean."""
_RADIX_LIMIT = 1 << 62


@dataclass(frozen=True, eq=False)
class PriorPredictive:
    """What the priors of a model imply, constraints and naming rules kept.

    All tables have the columns of ``SUMMARY`` after their keys: median, mean, and the ends of the
    50 % and 95 % intervals (lower_50, upper_50, lower_95, upper_95). Tables of answers end with
    the column ``observed`` when responses were given.

    Attributes
    ----------
    prevalence : DataFrame
        Keys: group (where the model has groups; the last rows are "overall"), latent_class.
    response_probabilities : DataFrame
        Keys: group (where they differ by group), latent_class, item, category.
    item_margins : DataFrame
        Share of each answer among those who answer the item. Keys: item, category.
    patterns : DataFrame
        Keys: quantity, which is ``distinct_patterns`` (different patterns of answers among the
        cases) and, where items add to a sum score, ``sum_score_mean`` and ``sum_score_sd``.
    sum_scores : DataFrame
        Cases with each sum score: an item with two answers adds 1 for yes (the declared one, or
        the last), an ordered item the place of its answer from 0. Key: score. Empty where no item
        adds.
    items : tuple of Item
    n_cases : int
        Cases of a simulated study.
    draws : int
        Simulated studies.
    exploratory : bool
        True when classes are interchangeable, so that the rows of all classes say the same.
    """

    prevalence: pd.DataFrame
    response_probabilities: pd.DataFrame
    item_margins: pd.DataFrame
    patterns: pd.DataFrame
    sum_scores: pd.DataFrame
    items: tuple[Item, ...]
    n_cases: int
    draws: int
    exploratory: bool

    @property
    def table(self) -> pd.DataFrame:
        """All tables as one: quantity, then the keys (empty where they do not apply)."""
        import pandas as pd

        parts = [
            self.prevalence.assign(quantity="prevalence"),
            self.response_probabilities.assign(quantity="response_probability"),
            self.item_margins.assign(quantity="item_margin"),
            self.patterns,
            self.sum_scores.assign(quantity="cases_with_sum_score"),
        ]
        frame = pd.concat([part for part in parts if not part.empty], ignore_index=True)
        keys = ["quantity", "group", "latent_class", "item", "category", "score"]
        columns = [name for name in (*keys, *SUMMARY, "observed") if name in frame]
        frame = frame[columns]
        texts = [name for name in keys[1:5] if name in frame]
        frame[texts] = frame[texts].fillna("")
        if "score" in frame:
            frame["score"] = frame["score"].astype("Int64")
        return frame

    def __repr__(self) -> str:
        from bayeslca.model.prior_predictive_text import as_text

        return as_text(self, most=12)

    def __str__(self) -> str:
        from bayeslca.model.prior_predictive_text import as_text

        return as_text(self)


def prior_predictive(
    model: LatentClassModel,
    n_cases: int | Sequence[int] | None = None,
    *,
    draws: int = 1000,
    seed: Seed = None,
    responses: Responses | None = None,
) -> PriorPredictive:
    """Return what the priors imply; see `LatentClassModel.prior_predictive`."""
    if draws < 2:
        msg = f"draws={draws} gives no interval. Give 2 draws or more; 1000 is usual."
        raise ModelError(msg)
    cases = _cases(model, n_cases, responses)
    rng = np.random.default_rng(seed)
    share = np.bincount(cases.group, minlength=model.n_groups) / cases.group.size
    parameters = draw_prior(model, draws, rng, share)
    simulated = _simulated(model, parameters, cases, rng)
    observed = None if cases.codes is None else _measured(model, cases.codes, cases.answered)
    return PriorPredictive(
        prevalence=_prevalence_table(model, parameters),
        response_probabilities=_response_table(model, parameters),
        item_margins=_margins_table(model, simulated, observed),
        patterns=_patterns_table(simulated, observed),
        sum_scores=_scores_table(simulated, observed),
        items=model.items,
        n_cases=int(cases.group.size),
        draws=draws,
        exploratory=model.exploratory and model.n_classes > 1,
    )


@dataclass(frozen=True, eq=False)
class _Cases:
    """The cases of a study: their groups, who answers what, and the answers where given."""

    group: Ints
    answered: Bools
    codes: Ints | None


def _cases(
    model: LatentClassModel, n_cases: int | Sequence[int] | None, responses: Responses | None
) -> _Cases:
    if (n_cases is None) == (responses is None):
        msg = (
            "the answers of how many cases? Give either n_cases, or responses to have the number "
            "of cases, groups and missing answers from them and what was observed beside it."
        )
        raise ModelError(msg)
    if responses is not None:
        units: Units = model.units(responses)
        codes = np.repeat(units.pattern, units.count, axis=0)
        return _Cases(np.repeat(units.group, units.count), codes != MISSING, codes)
    assert n_cases is not None  # one of the two is given
    sizes = group_sizes(n_cases, model.n_groups)
    if min(sizes) < 0 or sum(sizes) < 1:
        msg = f"n_cases={n_cases} is no number of cases. Give 1 or more."
        raise ModelError(msg)
    group = np.repeat(np.arange(model.n_groups), sizes)
    return _Cases(group, np.ones((group.size, len(model.items)), dtype=bool), None)


Measured = Mapping[str, Floats]
"""Of one study: ``margins`` (A,), ``distinct_patterns``, ``scores`` (points,) and moments."""


def _simulated(
    model: LatentClassModel, draws: ParameterDraws, cases: _Cases, rng: np.random.Generator
) -> Measured:
    """Simulate a study at each draw; every entry has an axis of draws in front."""
    found = []
    for elements, prevalence in zip(draws.elements, draws.prevalence, strict=True):
        latent_class = draw_classes(prevalence, cases.group, rng)
        codes = draw_answers(model.table, elements, latent_class, cases.group, rng)
        found.append(_measured(model, codes, cases.answered))
    return {name: np.stack([one[name] for one in found]) for name in found[0]}


def _measured(model: LatentClassModel, codes: Ints, answered: Bools) -> dict[str, Floats]:
    """Measure the answers (case, item) of one study."""
    start = model.table.item_start
    n_answers = int(start[-1])
    at = (codes + start[:-1])[answered]
    counts = np.bincount(at, minlength=n_answers).astype(np.float64)
    out_of = np.repeat(answered.sum(axis=0), np.diff(start))
    margins = np.divide(counts, out_of, out=np.full(n_answers, np.nan), where=out_of > 0)
    out = {
        "margins": margins,
        DISTINCT_PATTERNS: np.array(float(_n_patterns(codes, answered, np.diff(start)))),
    }
    points = _answer_points(model.items)
    if any(points):
        scores = np.zeros(len(codes), dtype=np.int64)
        for j, one in enumerate(points):
            if one:
                scores += np.where(answered[:, j], np.array(one)[codes[:, j]], 0)
        most = sum(max(one, default=0) for one in points)
        out["scores"] = np.bincount(scores, minlength=most + 1).astype(np.float64)
        out[SCORE_MEAN], out[SCORE_SD] = np.array(scores.mean()), np.array(scores.std())
    return out


def _n_patterns(codes: Ints, answered: Bools, n_categories: Ints) -> int:
    """Return the number of distinct patterns of answers, whatever the group."""
    codes = np.where(answered, codes, MISSING)
    sizes = tuple(int(n) for n in n_categories)
    possible = 1.0
    for n in sizes:
        possible *= n + 1
    if possible > _RADIX_LIMIT:
        nobody, each = np.zeros(len(codes), dtype=np.int32), np.ones(len(codes), dtype=np.int64)
        return collapse(codes.astype(np.int16), nobody, each, sizes).n_units
    radix = np.cumprod([1, *(n + 1 for n in sizes[:-1])])
    return int(np.unique((codes.astype(np.int64) + 1) @ radix).size)


def _answer_points(items: Sequence[Item]) -> list[list[int]]:
    """Return what each answer of each item adds to a sum score; an empty list where nothing."""
    points: list[list[int]] = []
    for item in items:
        if item.n_categories == 2:
            yes = item.yes or item.categories[-1]
            points.append([int(category == yes) for category in item.categories])
        else:
            points.append(list(range(item.n_categories)) if item.ordered else [])
    return points


def _prevalence_table(model: LatentClassModel, draws: ParameterDraws) -> pd.DataFrame:
    values = draws.prevalence
    rows: list[dict[str, object]] = [{}]
    if model.groups is not None:
        overall = np.einsum("g,sgk->sk", draws.group_share, values)[:, None]
        levels = model.groups.levels
        if model.pooled:  # units are alike beforehand: one stands for all
            values, levels = values[:, :1], (new_unit_name(model.groups.name),)
        values = np.concatenate([values, overall], axis=1)
        rows = [{"group": level} for level in (*levels, OVERALL)]
    keys = [{**row, "latent_class": name} for row in rows for name in model.class_names]
    return _table(keys, _interchanged(model, values, axis=2))


def _response_table(model: LatentClassModel, draws: ParameterDraws) -> pd.DataFrame:
    groups: list[dict[str, object]] = [{}]
    first = [0]
    if model.groups is not None and model.table.n_response_groups > 1:
        groups = [{"group": level} for level in model.groups.levels]
        first = list(range(model.n_groups))
    values = draws.response_probability[:, first]
    answers = [(item.name, category) for item in model.items for category in item.categories]
    keys = [
        {**group, "latent_class": name, "item": item, "category": category}
        for group in groups
        for name in model.class_names
        for item, category in answers
    ]
    return _table(keys, _interchanged(model, values, axis=2))


def _interchanged(model: LatentClassModel, values: Floats, axis: int) -> Floats:
    """Let every class have the draws of all classes where they are interchangeable."""
    if not model.exploratory:
        return values
    shifts = range(model.n_classes)
    return np.concatenate([np.roll(values, shift, axis=axis) for shift in shifts])


def _margins_table(
    model: LatentClassModel, simulated: Measured, observed: Measured | None
) -> pd.DataFrame:
    keys = [
        {"item": item.name, "category": category}
        for item in model.items
        for category in item.categories
    ]
    return _table(keys, simulated["margins"], None if observed is None else observed["margins"])


def _patterns_table(simulated: Measured, observed: Measured | None) -> pd.DataFrame:
    names = [name for name in (DISTINCT_PATTERNS, SCORE_MEAN, SCORE_SD) if name in simulated]
    values = np.stack([simulated[name] for name in names], axis=1)
    seen = None if observed is None else np.array([observed[name] for name in names])
    return _table([{"quantity": name} for name in names], values, seen)


def _scores_table(simulated: Measured, observed: Measured | None) -> pd.DataFrame:
    import pandas as pd

    if "scores" not in simulated:
        return pd.DataFrame(columns=["score", *SUMMARY])
    values = simulated["scores"]
    keys = [{"score": score} for score in range(values.shape[1])]
    return _table(keys, values, None if observed is None else observed["scores"])


def _table(
    keys: Sequence[Mapping[str, object]], values: Floats, observed: Floats | None = None
) -> pd.DataFrame:
    """Return a row of keys and summaries for each quantity of draws (S, ...)."""
    import pandas as pd

    flat = values.reshape(len(values), -1)
    found = dict(zip(POINTS, np.quantile(flat, list(POINTS.values()), axis=0), strict=True))
    found["mean"] = flat.mean(axis=0)
    frame = pd.DataFrame(list(keys))
    for name in SUMMARY:
        frame[name] = found[name]
    if observed is not None:
        frame["observed"] = observed
    return frame
