"""Comparison of models: figures against ArviZ, ties, seeds, refusals, words."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import cache
from itertools import pairwise
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.comparison.compare import (
    Comparison,
    FitProgress,
    class_count_model,
    compare,
    compare_class_counts,
    seed_of_row,
)
from bayeslca.assess.comparison.comparison import is_tie
from bayeslca.assess.comparison.words import verdict_in_words
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.responses import Responses

SEED = 20261204
QUICK: dict[str, Any] = {"draws": 300, "ess": 200, "r_hat": 1.05, "progress": False}
ITEMS = ["fees", "accounts", "fenced", "meets", "tests_water"]


@cache
def responses(n: int = 90, seed: int = SEED, grouped: bool = False) -> Responses:
    rng = np.random.default_rng(seed)
    managed = rng.random(n) < 0.4
    said = rng.random((n, len(ITEMS))) < np.where(managed, 0.85, 0.2)[:, None]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=ITEMS)
    frame.loc[3, "fees"] = None
    if grouped:
        frame["district"] = np.where(rng.random(n) < 0.5, "north", "south")
        return Responses.from_frame(frame, items=ITEMS, group="district")
    return Responses.from_frame(frame, items=ITEMS)


@cache
def counts() -> Comparison:
    return compare_class_counts(responses(), range(1, 4), seed=7, **QUICK)


@pytest.mark.filterwarnings("ignore:Estimated shape parameter")
@pytest.mark.parametrize("n", [1, 2, 3])
def test_figures_are_those_of_arviz_on_the_case_level_tree(n: int) -> None:
    import arviz_stats

    row = counts().table.loc[n]
    theirs = arviz_stats.loo(counts().posteriors[n].to_arviz(), pointwise=True)
    assert row["elpd"] == pytest.approx(float(theirs.elpd), abs=1e-6)
    assert row["p_loo"] == pytest.approx(float(theirs.p), abs=1e-6)
    assert row["pareto_k_high"] == int((theirs.pareto_k.values > theirs.good_k).sum())
    n_cases = responses().n_cases
    by_ddof = (row["elpd_se"], row["elpd_se"] * math.sqrt((n_cases - 1) / n_cases))
    assert min(abs(float(theirs.se) - se) for se in by_ddof) < 1e-6


def test_table_of_class_counts() -> None:
    table = counts().table
    assert table.index.tolist() == [1, 2, 3]
    assert table.index.name == "classes"
    assert table["weight"].sum() == pytest.approx(1)
    assert counts().best == 2
    assert table.loc[2, "elpd_diff"] == 0
    assert table.loc[1, "elpd_diff"] < -4
    assert not table.loc[1, "tied"]
    assert table.loc[2, "tied"]
    assert table.loc[1, "smallest_class"] == 1
    assert math.isnan(table.loc[1, "separation"])
    smallest = counts().posteriors[2].prevalence()["median"].min()
    assert table.loc[2, "smallest_class"] == pytest.approx(smallest)
    assert table.loc[2, "smallest_cases"] == pytest.approx(90 * smallest)
    paired = counts().loo[1].pointwise - counts().loo[2].pointwise
    cases = np.repeat(paired, responses().units.count)
    assert table.loc[1, "elpd_diff_se"] == pytest.approx(math.sqrt(90 * cases.var(ddof=1)))


def test_few_cases_are_said() -> None:
    kinds = [finding.kind for finding in counts().findings]
    assert "few_cases_for_standard_errors" in kinds
    assert "Sivula" in repr(counts())


def test_text_fits_a_terminal_and_notebooks_get_a_table() -> None:
    assert max(len(line) for line in repr(counts()).splitlines()) <= 80
    assert counts().verdict.split()[0] in repr(counts())
    assert "<table>" in counts()._repr_html_()


def test_a_row_does_not_depend_on_which_others_are_fitted() -> None:
    alone = compare_class_counts(responses(), [2], seed=7, **QUICK)
    assert alone.table.loc[2, "elpd"] == counts().table.loc[2, "elpd"]
    assert seed_of_row([7], 2) != seed_of_row([7], 3)
    assert seed_of_row([7], "a") != seed_of_row([7], "b")
    assert "nothing to compare with" in alone.verdict


def test_fits_that_are_given_are_not_done_again() -> None:
    again = compare_class_counts(
        responses(), [1, 2], seed=8, fitted={2: counts().posteriors[2]}, **QUICK
    )
    assert again.posteriors[2] is counts().posteriors[2]
    assert again.table.loc[2, "elpd"] == counts().table.loc[2, "elpd"]


def test_the_studys_own_model_is_one_more_row() -> None:
    rule = "managed is where P(fees=yes) is highest"
    own = LatentClassModel(responses().items, ("managed", "other"), statements=(rule,))
    fitted = {n: counts().posteriors[n] for n in (1, 2)}
    found = compare_class_counts(responses(), [1, 2], seed=7, fitted=fitted, own=own, **QUICK)
    assert found.table.index.tolist() == [1, 2, "this study"]
    assert found.table.loc["this study", "tied"]
    assert "study's own model" in found.verdict.lower()


def test_named_models_and_posteriors_are_compared() -> None:
    strong = ("P(fees=yes | .) ~ Beta(500, 500)",)
    found = compare(
        {"free": counts().posteriors[2], "bound": LatentClassModel(responses().items, 2, strong)},
        responses(),
        seed=7,
        **QUICK,
    )
    assert found.best == "free"
    assert found.table.index.name == "model"
    assert found.table.loc["bound", "elpd_diff"] < -4
    assert "'bound'" in found.verdict


def test_a_model_without_groups_is_compared_with_one_that_has_them() -> None:
    data = responses(grouped=True)
    with_groups, without = (class_count_model(data, 1, groups=given) for given in (True, False))
    found = compare({"with": with_groups, "without": without}, data, seed=7, **QUICK)
    # One class: the groups do not matter, unit by unit.
    gap = found.loo["with"].pointwise - found.loo["without"].pointwise
    assert gap.size == data.units.n_units
    assert np.abs(gap).max() < 0.1
    assert found.loo["without"].n_cases == 90


def test_progress_tells_which_fit_is_running() -> None:
    seen: list[FitProgress] = []
    compare_class_counts(responses(), [1, 2], seed=7, **{**QUICK, "progress": seen.append})
    assert {(one.name, one.fit, one.fits) for one in seen} == {(1, 1, 2), (2, 2, 2)}
    assert all(one.weighing or one.sampling.seconds >= 0 for one in seen)
    shares = [one.share for one in seen]
    assert all(b >= a for a, b in pairwise(shares))  # the evidences are part of the whole
    assert shares[-1] == pytest.approx(1.0)
    assert seen[-1].weighing
    assert seen[-1].seconds_left == pytest.approx(0.0, abs=1e-6)
    assert all(one.seconds_left >= 0 for one in seen if one.share > 0.05)


def test_interrupting_keeps_nothing() -> None:
    def stop(progress: FitProgress) -> None:
        if progress.name == 2:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        compare_class_counts(responses(), [1, 2], seed=7, **{**QUICK, "progress": stop})


@pytest.mark.parametrize("wrong", [[0], [2.0], ["2"], [True], []])
def test_numbers_of_classes_are_checked(wrong: Any) -> None:
    with pytest.raises(ModelError, match="whole numbers from 1"):
        compare_class_counts(responses(), wrong, **QUICK)


def test_other_answers_are_refused() -> None:
    two = counts().posteriors[2]
    with pytest.raises(ModelError, match="'two' cannot be compared with 'responses': 60 cases"):
        compare({"two": replace(two, responses=responses(n=60))}, responses())
    with pytest.raises(ModelError, match="different answers"):
        compare({"one": two, "two": replace(two, responses=responses(seed=1))})
    with pytest.raises(ModelError, match="the items differ"):
        compare({"two": two}, responses().with_items(ITEMS[:3]))
    with pytest.raises(ModelError, match="the groups differ"):
        compare({"two": two}, responses(grouped=True))


def test_what_cannot_be_compared_is_refused() -> None:
    with pytest.raises(ModelError, match="nothing to compare"):
        compare({})
    with pytest.raises(ModelError, match="no responses to fit it to"):
        compare({"model": LatentClassModel(responses().items, 2)})
    with pytest.raises(ModelError, match="is int, not a LatentClassModel"):
        compare({"model": 2})  # type: ignore[dict-item]


@pytest.mark.parametrize(
    ("gap", "error", "tie"),
    [(-3.9, 0.1, True), (-4.1, 0.1, False), (-9.9, 5.0, True), (-10.1, 5.0, False),
     (-5.0, math.nan, False), (-1.0, math.nan, True)],
)  # fmt: skip
def test_ties_are_below_four_or_within_two_errors(gap: float, error: float, tie: bool) -> None:
    # Sivula, Magnusson, Matamoros & Vehtari (2020), recommendations.
    assert is_tie(gap, error) is tie


def rows(**gaps: tuple[float, float, bool]) -> pd.DataFrame:
    index = [int(name[1:]) if name[1:].isdigit() else name for name in gaps]
    columns = ["elpd_diff", "elpd_diff_se", "tied"]
    return pd.DataFrame(list(gaps.values()), index=index, columns=columns)


def test_verdict_calls_a_tie_a_tie() -> None:
    table = rows(_1=(-30, 5, False), _2=(-1.2, 0.8, True), _3=(0, 0, True), _4=(-9, 3, False))
    assert verdict_in_words(table, 3) == (
        "Three classes predict best, but two classes (1.2 ± 0.8 behind) are tied with that: the "
        "differences are too small to tell. The smallest number within the tie is two classes. "
        "Of the others, four classes lie nearest, 9.0 ± 3.0 behind."
    )


def test_verdict_without_a_tie() -> None:
    table = rows(_1=(-30, 5, False), _2=(0, 0, True))
    assert verdict_in_words(table, 2) == (
        "Two classes predict best; one class, the next best, lies 30.0 ± 5.0 behind."
    )
