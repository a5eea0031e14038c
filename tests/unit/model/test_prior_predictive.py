"""What the priors imply, against closed forms: Beta margins, order statistics, enumeration."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from bayeslca import Groups, Item, ItemSpec, LatentClassModel, Responses
from bayeslca.exceptions import ModelError
from bayeslca.model.prior_predictive import SUMMARY, PriorPredictive
from bayeslca.model.prior_predictive_text import as_text

FEES = Item("fees", ("no", "yes"))
MEETS = Item("meets", ("yes", "no"), yes="yes")
TRUST = Item("trust", ("low", "middle", "high"), ordered=True)
TYPE = Item("type", ("tap", "well", "spring"))
RULE = "managed is where P(fees=yes) is highest"
POINTS = {"lower_95": 0.025, "lower_50": 0.25, "median": 0.5, "upper_50": 0.75, "upper_95": 0.975}
MANY = 3_000
ERRORS = 4.5


def row(frame: pd.DataFrame, **keys: object) -> pd.Series:
    for name, value in keys.items():
        frame = frame[frame[name] == value]
    (only,) = (one for _, one in frame.iterrows())
    return only


def assert_distributed(found: pd.Series, exact: object, n: int) -> None:
    """Quantiles and mean of n draws: within so many Monte Carlo standard errors (delta method)."""
    for name, p in POINTS.items():
        q = exact.ppf(p)  # type: ignore[attr-defined]
        error = np.sqrt(p * (1 - p) / n) / exact.pdf(q)  # type: ignore[attr-defined]
        assert abs(found[name] - q) < ERRORS * error, name
    error = exact.std() / np.sqrt(n)  # type: ignore[attr-defined]
    assert abs(found["mean"] - exact.mean()) < ERRORS * error  # type: ignore[attr-defined]


@pytest.fixture(scope="module")
def stated() -> PriorPredictive:
    model = LatentClassModel(
        (FEES, TYPE),
        ("managed", "lapsed"),
        statements=(
            "P(managed, lapsed) ~ Dirichlet(3, 2)",
            "P(fees=yes | managed) ~ Beta(9, 2)",
            "P(type=tap, well, spring | lapsed) ~ Dirichlet(1, 2, 4)",
        ),
    )
    return model.prior_predictive(1, draws=MANY, seed=1)


def test_margins_of_the_priors_are_those_of_scipy(stated: PriorPredictive) -> None:
    """Margins of a Dirichlet are Betas: SciPy's quantiles."""
    of = stated.response_probabilities
    n = stated.draws
    assert_distributed(row(stated.prevalence, latent_class="managed"), stats.beta(3, 2), n)
    yes = row(of, latent_class="managed", item="fees", category="yes")
    assert_distributed(yes, stats.beta(9, 2), n)
    default = row(of, latent_class="lapsed", item="fees", category="no")
    assert_distributed(default, stats.uniform(), n)
    well = row(of, latent_class="lapsed", item="type", category="well")
    assert_distributed(well, stats.beta(2, 5), n)


def test_an_items_margin_is_what_its_priors_mean(stated: PriorPredictive) -> None:
    """The answer of one case is yes with probability sum of E[share] E[P(yes)]."""
    expected = 3 / 5 * 9 / 11 + 2 / 5 * 1 / 2
    error = np.sqrt(expected * (1 - expected) / stated.draws)
    found = row(stated.item_margins, item="fees", category="yes")["mean"]
    assert abs(found - expected) < ERRORS * error
    tap = 3 / 5 / 3 + 2 / 5 * 1 / 7
    found = row(stated.item_margins, item="type", category="tap")["mean"]
    assert abs(found - tap) < ERRORS * np.sqrt(tap * (1 - tap) / stated.draws)


def test_orders_between_classes_are_order_statistics() -> None:
    """Three ordered uniforms are order statistics: Beta(3, 1), Beta(2, 2), Beta(1, 3)."""
    model = LatentClassModel(
        (FEES, MEETS),
        ("a", "b", "c"),
        statements=("P(fees=yes | a) > P(fees=yes | b) > P(fees=yes | c)",),
    )
    n = 2000
    found = model.prior_predictive(1, draws=n, seed=2).response_probabilities
    for name, exact in {"a": (3, 1), "b": (2, 2), "c": (1, 3)}.items():
        one = row(found, latent_class=name, item="fees", category="yes")
        assert_distributed(one, stats.beta(*exact), n)
        free = row(found, latent_class=name, item="meets", category="yes")
        assert_distributed(free, stats.uniform(), n)


def test_bounds_and_known_values_are_kept() -> None:
    model = LatentClassModel(
        (FEES, MEETS),
        ("managed", "lapsed"),
        statements=("P(fees=yes | managed) >= 0.8", "P(fees=yes | lapsed) = 0"),
    )
    found = model.prior_predictive(30, draws=2000, seed=3)
    of = found.response_probabilities
    high = row(of, latent_class="managed", item="fees", category="yes")
    assert_distributed(high, stats.uniform(0.8, 0.2), 2000)
    known = row(of, latent_class="lapsed", item="fees", category="yes")
    assert known[list(SUMMARY)].tolist() == [0.0] * len(SUMMARY)


def test_naming_rules_name_the_classes_of_every_draw() -> None:
    """The larger of two uniforms is a Beta(2, 1), the smaller a Beta(1, 2)."""
    model = LatentClassModel((FEES, MEETS), ("managed", "lapsed"), statements=(RULE,))
    n = 2000
    found = model.prior_predictive(1, draws=n, seed=4)
    for name, exact in {"managed": (2, 1), "lapsed": (1, 2)}.items():
        one = row(found.response_probabilities, latent_class=name, item="fees", category="yes")
        assert_distributed(one, stats.beta(*exact), n)
        assert_distributed(row(found.prevalence, latent_class=name), stats.uniform(), n)


def test_classes_without_names_all_have_the_same_prior() -> None:
    model = LatentClassModel((FEES, MEETS), 3)
    found = model.prior_predictive(1, draws=2000, seed=5)
    assert found.exploratory
    for frame in (found.prevalence, found.response_probabilities):
        parts = [
            frame[frame["latent_class"] == name].drop(columns="latent_class").reset_index(drop=True)
            for name in model.class_names
        ]
        pd.testing.assert_frame_equal(parts[0], parts[1])
        pd.testing.assert_frame_equal(parts[0], parts[2])
    assert_distributed(row(found.prevalence, latent_class="2"), stats.beta(1, 2), 2000)
    assert repr(found).count("any class") == 1 + 2  # a share, and an answer of each item


def test_groups_have_rows_of_their_own_and_overall_is_weighted_by_size() -> None:
    """The overall share has the variance of the weighted mean of independent uniforms."""
    groups = Groups("district", ("hill", "plain"))
    model = LatentClassModel(
        (FEES, MEETS),
        ("a", "b"),
        groups=groups,
        statements=("P(fees=yes | a) > P(fees=yes | b)",),
        free_by_group=("meets",),
    )
    n = 2000
    found = model.prior_predictive((30, 10), draws=n, seed=6)
    assert found.n_cases == 40
    assert list(found.prevalence["group"].unique()) == ["hill", "plain", "overall"]
    hill = row(found.prevalence, group="hill", latent_class="a")
    assert_distributed(hill, stats.uniform(), n)
    # 0.75 U + 0.25 V: a trapezoid with its ends at 0 and 1, its shoulders at 1/4 and 3/4
    overall = row(found.prevalence, group="overall", latent_class="a")
    assert_distributed(overall, stats.trapezoid(0.25, 0.75), n)
    of = found.response_probabilities
    assert list(of["group"].unique()) == ["hill", "plain"]
    shared = of[of["item"] == "fees"]
    one, two = (shared[shared["group"] == name][list(SUMMARY)].to_numpy() for name in groups.levels)
    np.testing.assert_array_equal(one, two)
    free = of[(of["item"] == "meets") & (of["category"] == "yes") & (of["latent_class"] == "a")]
    assert free["median"].nunique() == 2


def test_distinct_patterns_and_scores_of_a_tiny_study_by_enumeration() -> None:
    """Two cases, two items, one class with known P(yes) = 1/4 and 1/10: all 16 outcomes."""
    model = LatentClassModel(
        (FEES, MEETS),
        ("all",),
        statements=("P(fees=yes | all) = 0.25", "P(meets=yes | all) = 0.1"),
    )
    n = 3000
    found = model.prior_predictive(2, draws=n, seed=7)
    one_case = {
        (f, m): (0.25 if f else 0.75) * (0.1 if m else 0.9)
        for f, m in itertools.product((0, 1), repeat=2)
    }
    patterns, scores, means, sds = 0.0, np.zeros(3), 0.0, 0.0
    for (a, p), (b, q) in itertools.product(one_case.items(), repeat=2):
        patterns += p * q * len({a, b})
        for case in (a, b):
            scores[sum(case)] += p * q
        means += p * q * np.mean([sum(a), sum(b)])
        sds += p * q * np.std([sum(a), sum(b)])
    error = ERRORS * np.sqrt(0.25 / n)  # the number is 1 or 2
    assert abs(row(found.patterns, quantity="distinct_patterns")["mean"] - patterns) < error
    assert abs(row(found.patterns, quantity="sum_score_mean")["mean"] - means) < error
    assert abs(row(found.patterns, quantity="sum_score_sd")["mean"] - sds) < 2 * error
    assert list(found.sum_scores["score"]) == [0, 1, 2]
    np.testing.assert_allclose(found.sum_scores["mean"], scores, atol=2 * error)


@pytest.fixture
def observed() -> Responses:
    frame = pd.DataFrame(
        {
            "fees": ["yes", "no", "yes", None, "no"],
            "meets": ["yes", "yes", "yes", "no", None],
            "trust": ["low", "high", "low", "middle", "high"],
        }
    )
    trust = ItemSpec("trust", categories=TRUST.categories, ordered=True)
    return Responses.from_frame(frame, items=["fees", ItemSpec("meets", yes="yes"), trust])


def test_what_was_observed_stands_beside_it_only_when_asked_for(observed: Responses) -> None:
    model = LatentClassModel(observed.items, 2)
    alone = model.prior_predictive(5, draws=50, seed=8)
    assert "observed" not in alone.table
    assert "seen" not in repr(alone)
    beside = model.prior_predictive(responses=observed, draws=50, seed=8)
    assert beside.n_cases == 5
    # counted by hand from the frame above
    seen = beside.item_margins
    assert row(seen, item="fees", category="yes")["observed"] == pytest.approx(2 / 4)
    assert row(seen, item="trust", category="high")["observed"] == pytest.approx(2 / 5)
    scores = [2, 3, 2, 1, 2]  # yes, yes, low; no, yes, high; yes, yes, low; -, no, middle; ...
    assert beside.sum_scores["observed"].tolist() == [0, 1, 3, 1, 0]
    patterns = beside.patterns.set_index("quantity")["observed"]
    assert patterns["distinct_patterns"] == 4
    assert patterns["sum_score_mean"] == pytest.approx(np.mean(scores))
    assert patterns["sum_score_sd"] == pytest.approx(np.std(scores))
    assert "seen" in repr(beside)


def test_missing_answers_are_missing_in_the_simulated_studies_too() -> None:
    """Cases that answer one item each have one point at most, and two patterns differ."""
    frame = pd.DataFrame({"fees": ["yes", "no", None], "meets": [None, None, "yes"]})
    specs = [ItemSpec("fees", categories=("no", "yes")), ItemSpec("meets", ("no", "yes"))]
    responses = Responses.from_frame(frame, items=specs)
    found = LatentClassModel(responses.items, 1).prior_predictive(
        responses=responses, draws=200, seed=9
    )
    assert row(found.sum_scores, score=2)["upper_95"] == 0
    assert row(found.sum_scores, score=1)["upper_95"] == 3
    assert row(found.patterns, quantity="distinct_patterns")["lower_95"] >= 2


def test_an_item_that_nobody_answers_has_no_margin() -> None:
    codes = np.array([[0, -1], [1, -1]], dtype=np.int16)
    responses = Responses(items=(FEES, MEETS), codes=codes, counts=np.ones(2, dtype=np.int64))
    with np.errstate(all="raise"):
        found = LatentClassModel(responses.items, 1).prior_predictive(
            responses=responses, draws=20, seed=9
        )
    margins = found.item_margins.set_index("item")
    assert margins.loc["meets"].drop(columns="category").isna().all(axis=None)
    assert not margins.loc["fees"].isna().any(axis=None)


def test_groups_of_the_responses_are_those_of_the_simulated_studies() -> None:
    """Hill has no fees, plain nothing but fees: each case's group decides what it answers."""
    frame = pd.DataFrame({"fees": ["yes"] * 3 + ["no"], "district": ["hill"] * 3 + ["plain"]})
    responses = Responses.from_frame(frame, items=["fees"], group="district")
    model = LatentClassModel(
        responses.items,
        ("all",),
        groups=responses.groups,
        free_by_group=True,
        statements=(
            "P(fees=yes | all, district=hill) = 0",
            "P(fees=yes | all, district=plain) = 1",
        ),
    )
    found = model.prior_predictive(responses=responses, draws=20, seed=1)
    margin = row(found.item_margins, item="fees", category="yes")
    assert margin["lower_95"] == margin["upper_95"] == 1 / 4
    assert margin["observed"] == 3 / 4


def test_items_without_an_order_add_nothing_to_a_sum_score() -> None:
    found = LatentClassModel((TYPE,), 1).prior_predictive(10, draws=20, seed=1)
    assert found.sum_scores.empty
    assert list(found.patterns["quantity"]) == ["distinct_patterns"]
    assert "Cases with each sum score" not in repr(found)


def test_patterns_of_more_items_than_a_whole_number_holds_are_told_apart() -> None:
    """40 items in base 4 are 80 bits: only the last item differs between cases."""
    items = [Item(f"item_{j}", ("low", "middle", "high")) for j in range(40)]
    known = tuple(f"P(item_{j}=low | all) = 1" for j in range(39))
    model = LatentClassModel(items, ("all",), statements=known)
    found = row(model.prior_predictive(50, draws=40, seed=1).patterns, quantity="distinct_patterns")
    assert found["upper_95"] == 3
    assert found["lower_50"] >= 2


def test_one_table_has_stable_columns_and_no_holes_in_its_keys() -> None:
    groups = Groups("district", ("hill", "plain"))
    model = LatentClassModel((FEES, TRUST), 2, groups=groups)
    table = model.prior_predictive(10, draws=20, seed=1).table
    keys = ["quantity", "group", "latent_class", "item", "category", "score"]
    assert list(table.columns) == [*keys, *SUMMARY]
    assert not table[keys[:-1]].isna().any().any()
    assert set(table["quantity"]) == {
        "prevalence", "response_probability", "item_margin", "distinct_patterns",
        "sum_score_mean", "sum_score_sd", "cases_with_sum_score",
    }  # fmt: skip
    values = table[["lower_95", "lower_50", "median", "upper_50", "upper_95"]].to_numpy()
    assert (np.diff(values, axis=1) >= 0).all()


def test_text_fits_a_terminal_and_is_cut_only_in_the_repr() -> None:
    items = [Item(f"a rather long name of an item, number {j}", ("no", "yes")) for j in range(12)]
    names = ("managed", "informal")
    rule = f'managed is where P("{items[0].name}"=yes) is highest'
    found = LatentClassModel(items, names, statements=(rule,)).prior_predictive(
        12_345, draws=5, seed=1
    )
    for text in (repr(found), str(found), as_text(found, most=1)):
        assert max(len(line) for line in text.splitlines()) <= 80
    assert "12 more rows" in repr(found)
    assert "more rows" not in str(found)
    assert "12,345 cases" in repr(found)
    assert "=yes | informal" in str(found)
    assert "=no" not in str(found)


def test_the_same_seed_gives_the_same_tables() -> None:
    model = LatentClassModel((FEES, MEETS), 2)
    one, two, other = (model.prior_predictive(9, draws=30, seed=s).table for s in (1, 1, 2))
    pd.testing.assert_frame_equal(one, two)
    assert not one.equals(other)


@pytest.mark.parametrize(
    ("given", "says"),
    [
        ({}, "either n_cases, or responses"),
        ({"n_cases": 0}, "Give 1 or more"),
        ({"n_cases": -3}, "Give 1 or more"),
        ({"n_cases": (3, 4)}, "2 group sizes"),
        ({"n_cases": 5, "draws": 1}, "Give 2 draws or more"),
    ],
)
def test_what_cannot_be_simulated_is_refused(given: dict[str, object], says: str) -> None:
    model = LatentClassModel((FEES, MEETS), 2)
    with pytest.raises(ModelError, match=says):
        model.prior_predictive(**given)  # type: ignore[arg-type]


def test_size_and_responses_together_are_refused(observed: Responses) -> None:
    with pytest.raises(ModelError, match="either n_cases, or responses"):
        LatentClassModel(observed.items, 2).prior_predictive(5, responses=observed)
