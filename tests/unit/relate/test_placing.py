"""Placing cases by cost, and drawn classes, against exact memberships."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from bayeslca import Item, LatentClassModel, Responses, place_cases, plausible_values
from bayeslca.exceptions import ModelError
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.placing import UNASSIGNED, PlacingRule
from bayeslca.relate.plausible_values import ATTENUATED

ITEMS = tuple(Item(name, ("no", "yes"), yes="yes") for name in ("fees", "accounts", "meets"))
PATTERNS = pd.DataFrame(
    {
        "committee": ["a", "b", "c", "d", "e"],
        "fees": ["yes", "yes", "no", "no", None],
        "accounts": ["yes", "no", "no", "yes", None],
        "meets": ["yes", "yes", "no", None, None],
    }
)
COSTS = {"managed": {"lapsed": 5.0}}


@pytest.fixture(scope="module")
def posterior() -> Posterior:
    rng = np.random.default_rng(5)
    kind = rng.random(60) < 0.6
    said = rng.random((60, 3)) < np.where(kind, 0.85, 0.2)[:, None]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=["fees", "accounts", "meets"])
    frame["committee"] = [f"w{i}" for i in range(60)]
    whole = pd.concat([PATTERNS, frame])
    responses = Responses.from_frame(whole, items=ITEMS, case="committee")
    model = LatentClassModel(
        ITEMS, ("managed", "lapsed"), statements=("managed is where P(fees=yes) is highest",)
    )
    return model.sample(responses, seed=3, draws=200, ess=100, r_hat=1.05, progress=False)


def by_hand(posterior: Posterior, row: pd.Series) -> np.ndarray:
    """P(class | answers) in every draw, by Bayes' theorem from the named draws."""
    p = posterior.prevalence_draws.reshape(-1, 2)
    response = posterior.response_probability_draws.reshape(len(p), 2, -1)
    joint = p.copy()
    for j, name in enumerate(("fees", "accounts", "meets")):
        if isinstance(row[name], str):
            joint = joint * response[:, :, 2 * j + (row[name] == "yes")]
    return np.asarray(joint / joint.sum(axis=1, keepdims=True))


@pytest.mark.parametrize(("at_most", "costs"), [(0.2, {}), (0.4, COSTS), (0.05, COSTS), (9, {})])
def test_cases_go_where_the_expected_cost_is_lowest(
    posterior: Posterior, at_most: float, costs: dict[str, dict[str, float]]
) -> None:
    table = place_cases(posterior, at_most=at_most, costs=costs).set_index("case")
    cost = np.array([[0.0, costs.get("managed", {}).get("lapsed", 1.0)], [1.0, 0.0]])

    def placed(p: np.ndarray) -> np.ndarray:
        expected = p @ cost
        cheap = np.array(["managed", "lapsed"], dtype=object)[expected.argmin(axis=-1)]
        return np.where(expected.min(axis=-1) <= at_most, cheap, UNASSIGNED)

    for _, row in PATTERNS.iterrows():
        draws = by_hand(posterior, row)
        mine = table.loc[row["committee"]]
        assert mine["placed_in"] == placed(draws.mean(axis=0))
        assert mine["expected_cost"] == pytest.approx((draws.mean(axis=0) @ cost).min())
        assert mine["steady"] == pytest.approx(np.mean(placed(draws) == mine["placed_in"]))


def test_a_dear_error_moves_cases_and_a_low_bound_leaves_them(posterior: Posterior) -> None:
    plain = place_cases(posterior, at_most=1.0)["placed_in"].value_counts()
    dear = place_cases(posterior, at_most=1.0, costs={"managed": {"lapsed": 50.0}})
    assert dear["placed_in"].value_counts()["managed"] > plain["managed"]
    none = place_cases(posterior, at_most=0.0)
    assert (none["placed_in"] == UNASSIGNED).all()


@pytest.mark.parametrize(
    ("rule", "said"),
    [
        (PlacingRule(costs={"manged": {"lapsed": 1.0}}), "near names: 'managed'"),
        (PlacingRule(costs={"managed": {"lost": 1.0}}), "'lost', which the model does not have"),
        (PlacingRule(costs={"managed": {"managed": 1.0}}), "the right class costs 0"),
        (PlacingRule(costs={"managed": {"lapsed": -1.0}}), "a cost is 0 or more"),
        (PlacingRule(costs={"managed": {"lapsed": float("nan")}}), "a cost is 0 or more"),
        (PlacingRule(at_most=-0.1), "a number from 0 up"),
    ],
)
def test_wrong_rules_are_named(rule: PlacingRule, said: str) -> None:
    with pytest.raises(ModelError, match=said):
        rule.matrix(("managed", "lapsed"))


def test_drawn_classes_have_the_memberships_as_their_frequencies(posterior: Posterior) -> None:
    number = 800
    table = plausible_values(posterior, number=number, seed=4)
    assert table["made"].unique().tolist() == [ATTENUATED]
    share = (table.filter(like="draw_") == "managed").mean(axis=1).to_numpy()
    mean = posterior.membership()["probability_managed"].to_numpy()
    error = np.sqrt(mean * (1 - mean) / number)
    # 65 cases: four standard errors of each, of which none should be passed.
    assert np.all(np.abs(share - mean) <= 4 * error + 1e-3)
    again = plausible_values(posterior, number=number, seed=4)
    pd.testing.assert_frame_equal(table, again)


def test_a_table_of_patterns_has_a_row_for_each_of_its_cases() -> None:
    frame = pd.DataFrame(
        {"fees": ["yes", "no", "yes"], "accounts": ["yes", "no", "no"], "n": [12, 9, 4]}
    )
    responses = Responses.from_frame(frame, items=ITEMS[:2], counts="n")
    model = LatentClassModel(responses.items, 1)
    posterior = model.sample(responses, seed=1, draws=100, ess=100, progress=False)
    table = plausible_values(posterior, number=2, seed=1)
    assert len(table) == 25
    assert table["case"].value_counts().tolist() == [12, 9, 4]


def test_a_given_relation_draws_the_classes_and_says_so(posterior: Posterior) -> None:
    class Relation:
        made_with = "made with the predictors age"

        def draw_classes(self, number: int, rng: np.random.Generator) -> np.ndarray:
            return np.ones((number, posterior.responses.n_rows), dtype=np.int64)

    table = plausible_values(posterior, number=3, given=Relation())
    assert (table[["draw_1", "draw_3"]] == "lapsed").all(axis=None)
    assert table["made"].iloc[0] == Relation.made_with


def test_numbers_and_impossible_answers_are_refused(posterior: Posterior) -> None:
    for number in (0, 801):
        with pytest.raises(ModelError, match="from 1 to 800"):
            plausible_values(posterior, number=number)
    draws = posterior.relabelled.draws
    never = replace(draws, elements=np.where(np.arange(draws.elements.shape[-1]) % 2, 0.0, 1.0)
                    * np.ones(draws.elements.shape))  # fmt: skip
    broken = Posterior(
        posterior.model, posterior.responses, replace(posterior.relabelled, draws=never)
    )
    with pytest.raises(ModelError, match="probability 0 in every class"):
        plausible_values(broken, number=2)
    with pytest.warns(Warning, match="probability 0"):
        broken.membership()
    placed = place_cases(broken)
    assert (placed["placed_in"] == UNASSIGNED).sum() >= 4
    assert placed["expected_cost"].isna().any()
