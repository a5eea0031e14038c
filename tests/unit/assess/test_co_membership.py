"""Who is together with whom: look-ups, tables, words, refusals; averages weighed by hand."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.class_count.averaged import Averaged, averaged, shared_out
from bayeslca.assess.class_count.class_counts import ClassCounts, class_counts
from bayeslca.assess.comparison.comparison import comparison_of
from bayeslca.assess.together import co_membership as module
from bayeslca.assess.together.co_membership import CoMembership, set_name
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import membership
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261204
QUICK: dict[str, Any] = {"draws": 300, "ess": 200, "r_hat": 1.05, "progress": False}
ITEMS = ["fees", "accounts", "fenced", "meets"]


@cache
def responses() -> Responses:
    rng = np.random.default_rng(SEED)
    managed = rng.random(60) < 0.4
    said = rng.random((60, len(ITEMS))) < np.where(managed, 0.9, 0.15)[:, None]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=ITEMS)
    frame.loc[3, "fees"] = None
    frame.loc[7, :] = None
    frame["committee"] = [f"W{i}" for i in range(60)]
    return Responses.from_frame(frame, items=ITEMS, case="committee")


@cache
def fitted(classes: int) -> Posterior:
    return LatentClassModel(responses().items, classes).sample(responses(), seed=SEED, **QUICK)


@cache
def counts() -> ClassCounts:
    return class_counts({k: fitted(k) for k in (1, 2, 3)})


@cache
def together() -> CoMembership:
    return fitted(2).co_membership()


def test_probability_is_the_mean_over_draws_of_shared_membership() -> None:
    posterior = fitted(2)
    share = membership(
        posterior.table, posterior.unit_table, posterior.draws.elements, posterior.draws.prevalence
    )
    expected = np.einsum("cduk,cdvk->uv", share, share) / np.prod(share.shape[:2])
    np.testing.assert_allclose(together().probability, expected, rtol=1e-10)
    assert np.all(together().mcse < 0.05)


def test_cases_are_looked_up_by_their_answers() -> None:
    found = together()
    unit = found.units.unit_of_row
    assert found.between("W0", "W1") == found.probability[unit[0], unit[1]]
    assert found.between("W0", "W0") == 1.0
    near = found.with_case("W0")
    assert len(near) == 58  # neither the case itself nor the one without an answer
    assert near["probability"].is_monotonic_decreasing
    row = near.set_index("case").loc["W5"]
    assert row["probability"] == found.probability[unit[0], unit[5]]
    cases = found.cases().set_index("case")
    assert cases.loc["W7", "set"] is None or pd.isna(cases.loc["W7", "set"])
    assert cases.loc["W5", "set"] == found.patterns["set"].iloc[unit[5]]
    with pytest.raises(ModelError, match=r"no case 'W99'.*W9"):
        found.between("W0", "W99")
    with pytest.raises(ModelError, match="'W7' gave no answer"):
        found.with_case("W7")


def test_means_within_and_between_sets_are_those_over_pairs_of_cases() -> None:
    found = together()
    unit = found.units.unit_of_row[found.units.unit_of_row >= 0]
    by_case = found.probability[np.ix_(unit, unit)]
    labels = found.partition.labels[unit]
    pairs = ~np.eye(len(unit), dtype=bool)
    for s, row in enumerate(found.sets.to_dict("records")):
        mine = labels == s
        assert row["cases"] == mine.sum()
        inside = np.outer(mine, mine) & pairs
        assert row["within"] == pytest.approx(by_case[inside].mean())
        assert row["between"] == pytest.approx(by_case[np.outer(mine, ~mine)].mean())
    first = int(np.flatnonzero(labels == 0)[0])
    others = (labels == 0) & (np.arange(len(labels)) != first)
    pattern = found.patterns.iloc[unit[first]]
    assert pattern["within"] == pytest.approx(by_case[first, others].mean())
    assert pattern["other"] == pytest.approx(by_case[first, labels == 1].mean())
    assert (pattern["set"], pattern["other_set"]) == ("A", "B")


def test_words_say_the_sets_and_how_sure_they_are() -> None:
    said = together().verdict
    assert said.startswith("With two classes, the cases fall into two sets: A with ")
    assert "variation of information" in said
    one = fitted(1).co_membership()
    assert one.partition.n_sets == 1
    assert "With one class, no way to part the cases is nearer" in one.verdict
    assert one.between("W0", "W1") == 1.0
    assert repr(one).endswith(one.verdict)
    assert [set_name(at) for at in (0, 25, 26)] == ["A", "Z", "A2"]


def test_too_many_patterns_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "MOST_TOGETHER", 3)
    with pytest.raises(ModelError, match=r"distinct response patterns.*up to 3"):
        fitted(2).co_membership()


def test_averages_weigh_each_number_by_its_probability() -> None:
    found = averaged(counts(), {k: fitted(k) for k in (1, 2, 3)})
    assert isinstance(found, Averaged)
    chance = counts().table["probability"]
    expected = sum(
        chance[k] * np.exp(fitted(k).log_likelihood_draws).mean(axis=(0, 1)) for k in (1, 2, 3)
    )
    table = found.pattern_probabilities()
    np.testing.assert_allclose(table["probability"], expected, rtol=1e-4)
    assert (table["mcse"] > 0).all()
    assert (table["lower"] < table["probability"]).all()
    assert (table["upper"] > table["probability"]).all()
    assert table["expected"].iloc[0] == pytest.approx(59 * table["probability"].iloc[0])
    new = found.log_predictive(responses())
    assert new["log_density"].iloc[0] == pytest.approx(
        np.log(table["probability"].iloc[responses().units.unit_of_row[0]])
    )
    assert new["log_density"].iloc[7] == 0.0  # no answer
    same = found.co_membership()
    by_hand = sum(chance[k] * fitted(k).co_membership().probability for k in (1, 2, 3))
    np.testing.assert_allclose(same.probability, by_hand, atol=1e-4)
    assert "one to three classes" in repr(found) or "two and three classes" in repr(found)


def test_the_error_of_the_weights_is_carried_along() -> None:
    sure = averaged(counts(), {k: fitted(k) for k in (1, 2, 3)})
    spread = np.array([0.0, 1.0, -1.0])[-len(sure.weight) :]
    unsure = replace(sure, covariance=0.01 * np.outer(spread, spread))
    table, more = sure.pattern_probabilities(), unsure.pattern_probabilities()
    gap = sum(
        sign * np.exp(fitted(k).log_likelihood_draws).mean(axis=(0, 1))
        for k, sign in ((2, 0.1), (3, -0.1))
    )
    of_count = np.stack(
        [np.exp(one.log_likelihood_draws).mean(axis=(0, 1)) for one in sure.posteriors.values()]
    )
    own = table["mcse"] ** 2 - np.einsum("iu,ij,ju->u", of_count, sure.covariance, of_count)
    np.testing.assert_allclose(more["mcse"] ** 2, own + gap**2, rtol=1e-6, atol=1e-15)
    assert more["mcse"].sum() > table["mcse"].sum()


def test_without_reliable_probabilities_there_is_no_average() -> None:
    table = counts().table.assign(probability=np.nan)
    unknown = replace(counts(), table=table, verdict="The evidence says nothing.")
    with pytest.raises(ModelError, match="nothing to average by: The evidence says nothing"):
        averaged(unknown, {k: fitted(k) for k in (1, 2, 3)})
    with pytest.raises(ModelError, match="none were compared"):
        comparison_of({"plain": fitted(2)}, "model").averaged()


def test_numbers_without_evidence_are_named() -> None:
    table = counts().table.copy()
    table.loc[3, "probability"] = np.nan
    table["probability"] /= table["probability"].sum()
    found = averaged(replace(counts(), table=table), {k: fitted(k) for k in (1, 2, 3)})
    assert "What three classes would say is left out" in found.verdict
    assert 3 not in found.posteriors


def test_draws_are_shared_out_by_weight() -> None:
    assert shared_out(np.array([0.5, 0.3, 0.2]), 10) == [5, 3, 2]
    assert shared_out(np.array([0.999, 0.001]), 10) == [10, 0]
    assert sum(shared_out(np.array([0.333, 0.333, 0.334]), 1000)) == 1000
