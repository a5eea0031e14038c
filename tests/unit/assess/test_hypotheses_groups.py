"""Hypotheses on groups, on exchangeable classes, and on items with an order."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import StatementError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

QUICK = {"seed": 1, "draws": 500, "ess": 400, "progress": False}


@pytest.fixture(scope="module")
def responses() -> Responses:
    rng = np.random.default_rng(4)
    kind = rng.integers(0, 2, 120)
    yes = rng.random((120, 3)) < np.where(kind[:, None], 0.85, 0.2)
    frame = pd.DataFrame(np.where(yes, "yes", "no"), columns=["fees", "accounts", "meets"])
    trust = np.array(["low", "some", "high"])
    frame["trust"] = trust[np.clip(kind + rng.integers(0, 2, 120), 0, 2)]
    frame["district"] = rng.choice(["north", "south"], 120)
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in frame.columns[:3]]
    items.append(ItemSpec("trust", categories=tuple(trust), ordered=True))
    return Responses.from_frame(frame, items=items, group="district")


@pytest.fixture(scope="module")
def named(responses: Responses) -> Posterior:
    rule = "managed is where P(fees=yes) is highest"
    model = LatentClassModel(
        responses.items, ("managed", "lapsed"), (rule,), groups=responses.groups
    )
    return model.sample(responses, **QUICK)


def test_classes_of_free_groups_are_not_compared(responses: Responses) -> None:
    # Class 1 of the north is not class 1 of the south (rule 6).
    model = LatentClassModel(responses.items, 2, groups=responses.groups, free_by_group=True)
    posterior = model.sample(responses, **QUICK)
    with pytest.raises(StatementError, match="nothing tells the classes") as error:
        posterior.test("P(fees=yes | ., district=north) > P(fees=yes | ., district=south)")
    assert "names" in error.value.remedy
    every = posterior.test("P(fees=yes | .) > 0.1")  # all classes, all groups: no label matters
    assert every.prior_probability == pytest.approx(0.9**4, rel=1e-6)


def test_without_a_group_it_must_hold_in_every_group(named: Posterior) -> None:
    found = named.test("P(managed) > 0.4")
    assert found.prior_probability == pytest.approx(0.6**2, rel=1e-6)
    north = named.prevalence_draws[:, :, 0, 0] > 0.4
    south = named.prevalence_draws[:, :, 1, 0] > 0.4
    assert found.posterior_probability == pytest.approx((north & south).mean(), abs=0.06)


def test_equal_prevalences_are_more_probable_than_the_model_thinks(named: Posterior) -> None:
    found = named.test("P(managed | district=north) = P(managed | district=south)")
    assert found.log_bayes_factor > 0  # groups were drawn at random
    assert math.isnan(found.posterior_probability)
    # Savage and Dickey by a histogram of the difference: triangular before, density 1 at 0.
    gap = np.diff(named.prevalence_draws[..., 0], axis=2)
    density = np.mean(np.abs(gap) < 0.05) / 0.1
    assert math.exp(found.log_bayes_factor) == pytest.approx(density, rel=0.15)


@pytest.mark.parametrize("sign", [">=", ">"])
def test_ordered_items_are_compared_by_their_upper_answers(named: Posterior, sign: str) -> None:
    event = f"trust{sign}{'some' if sign == '>=' else 'low'}"
    found = named.test(f"P({event} | lapsed) > 0.4")
    assert found.method == "weighed"
    assert found.prior_probability == pytest.approx(1 - 0.4**2, rel=1e-6)  # Beta(2, 1)
    draws = named.response_probability_draws[:, :, 0, 1, 7:9].sum(axis=-1)
    assert found.posterior_probability == pytest.approx((draws > 0.4).mean(), abs=0.06)
    quantity = named.quantity(f"P({event} | lapsed)")
    assert quantity.mean == pytest.approx(draws.mean(), rel=1e-12)
    assert quantity.prior_median == pytest.approx(math.sqrt(0.5), abs=0.01)


def test_two_orders_within_one_item_are_counted(named: Posterior) -> None:
    found = named.test(
        "P(trust=some | managed) > P(trust=some | lapsed)",
        "P(trust=high | managed) > P(trust=high | lapsed)",
    )
    assert found.method == "counted"
    assert found.prior_probability == pytest.approx(0.166, abs=0.005)  # 4 million draws
