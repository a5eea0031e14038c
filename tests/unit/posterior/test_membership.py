"""Membership of the cases of the fit and of new ones."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import BayesLCAError, BayesLCAWarning, ModelError
from bayeslca.posterior import membership as memberships
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses


def by_hand(posterior: Posterior, codes: np.ndarray, group: int) -> np.ndarray:
    """P(class | answers) of one case in each draw (S, K), by Bayes' rule."""
    prevalence = posterior.prevalence_draws[:, :, group].reshape(-1, posterior.model.n_classes)
    response = posterior.response_probability_draws[:, :, 0]
    response = response.reshape(-1, *response.shape[2:])
    joint = prevalence.copy()
    for j, code in enumerate(codes):
        if code >= 0:
            joint *= response[:, :, posterior.table.item_start[j] + code]
    return joint / joint.sum(axis=1, keepdims=True)


@pytest.mark.parametrize("name", ["posterior", "grouped"])
def test_membership_is_bayes_rule_averaged_over_draws(
    name: str, request: pytest.FixtureRequest
) -> None:
    posterior: Posterior = request.getfixturevalue(name)
    frame = posterior.membership(interval=0.9)
    responses = posterior.responses
    assert frame["case"].tolist() == [f"WP{i:03d}" for i in range(90)]
    for row in (0, 4, 6, 50):  # 4 and 6 have missing answers
        group = int(responses.group_codes[row]) if posterior.model.groups else 0
        draws = by_hand(posterior, responses.codes[row], group)
        for k, latent_class in enumerate(posterior.model.class_names):
            found = frame.loc[row]
            assert found[f"probability_{latent_class}"] == pytest.approx(draws[:, k].mean())
            lower, upper = np.quantile(draws[:, k], [0.05, 0.95])
            assert found[f"lower_{latent_class}"] == pytest.approx(lower)
            assert found[f"upper_{latent_class}"] == pytest.approx(upper)
        best = draws.mean(axis=0).argmax()
        assert found["modal_class"] == posterior.model.class_names[best]
        assert found["modal_probability"] == pytest.approx(draws.mean(axis=0).max())


def test_columns(grouped: Posterior, posterior: Posterior) -> None:
    of_class = ["probability_{0}", "lower_{0}", "upper_{0}"]
    expected = ["case", "group", "modal_class", "modal_probability"]
    for name in ("managed", "lapsed"):
        expected += [column.format(name) for column in of_class]
    assert list(grouped.membership().columns) == expected
    assert "group" not in posterior.membership()  # this model has no groups
    assert grouped.membership(interval=0.8).attrs["interval"] == 0.8


def test_a_case_without_an_answer_has_its_groups_prevalence(grouped: Posterior) -> None:
    frame = grouped.membership()
    for row in (10, 20):
        group = grouped.responses.group_codes[row]
        draws = grouped.prevalence_draws[:, :, group].reshape(-1, 2)
        assert frame.loc[row, "probability_managed"] == pytest.approx(draws[:, 0].mean())
        assert frame.loc[row, "upper_lapsed"] == pytest.approx(np.quantile(draws[:, 1], 0.975))
    assert frame.loc[10, "group"] == grouped.model.groups.levels[grouped.responses.group_codes[10]]


def test_a_row_per_pattern(posterior: Posterior) -> None:
    frame = posterior.membership(rows="patterns")
    assert list(frame.columns[:5]) == ["fees", "accounts", "type", "meets", "count"]
    assert frame["count"].sum() == 88
    assert not frame.duplicated(["fees", "accounts", "type", "meets"]).any()
    assert frame["fees"].isna().sum() == 2
    cases = posterior.membership()
    answers = posterior.responses.to_frame()
    full = answers.merge(
        frame.drop(columns="count"), on=["fees", "accounts", "type", "meets"], how="left"
    )
    at = full["probability_1"].notna().to_numpy()
    assert at.sum() >= 84
    np.testing.assert_allclose(full["probability_1"][at], cases["probability_1"][at])


def test_memory_stays_bounded_without_a_change(
    posterior: Posterior, monkeypatch: pytest.MonkeyPatch
) -> None:
    whole = posterior.membership()
    monkeypatch.setattr(memberships, "PIECE", 1000)
    pd.testing.assert_frame_equal(posterior.membership(), whole)


def test_assigning_the_old_cases_gives_what_they_had(grouped: Posterior) -> None:
    pd.testing.assert_frame_equal(grouped.assign(grouped.responses), grouped.membership())


def new_cases(posterior: Posterior, rows: list[dict[str, object]]) -> Responses:
    return Responses.from_frame(
        pd.DataFrame(rows), items=posterior.model.items, case="committee",
        group=posterior.model.groups,
    )  # fmt: skip


def test_new_cases(grouped: Posterior) -> None:
    rows = [
        {"committee": "a", "district": "west", "fees": "yes", "accounts": "yes",
         "type": "pump", "meets": "yes"},
        {"committee": "b", "district": "north", "fees": "no", "accounts": None,
         "type": "spring", "meets": "no"},
    ]  # fmt: skip
    frame = grouped.assign(new_cases(grouped, rows))
    assert frame["case"].tolist() == ["a", "b"]
    assert frame["modal_class"].tolist() == ["managed", "lapsed"]
    west = grouped.model.groups.levels.index("west")
    draws = by_hand(grouped, np.array([1, 1, 0, 1]), west)
    assert frame.loc[0, "probability_managed"] == pytest.approx(draws[:, 0].mean())
    assert frame.attrs["impossible_cases"] == ()


def test_new_cases_of_another_model_are_refused(posterior: Posterior) -> None:
    frame = pd.DataFrame({"fees": ["yes", "no"], "audits": ["yes", "no"]})
    other = Responses.from_frame(frame, items=["fees", "audits"])
    with pytest.raises(ModelError, match="the model has the item 'accounts'"):
        posterior.assign(other)


def test_answers_that_no_class_gives_get_no_membership(posterior: Posterior) -> None:
    # Known probabilities of 0 come with constraints; here every draw is made to say it.
    draws = posterior.draws
    elements = draws.elements.copy()
    row = posterior.table.response_row[0, 6]  # type=spring
    elements[..., posterior.table.direct_element[row]] = 0.0
    relabelled = dataclasses.replace(
        posterior.relabelled, draws=dataclasses.replace(draws, elements=elements)
    )
    strict = Posterior(posterior.model, posterior.responses, relabelled)
    items = posterior.model.items
    frame = pd.DataFrame(
        {"case": ["one", "two", "three"], "fees": ["yes"] * 3, "accounts": ["yes"] * 3,
         "type": ["spring", "well", "spring"], "meets": ["yes"] * 3}
    )  # fmt: skip
    new = Responses.from_frame(frame, items=items, case="case")
    with pytest.warns(BayesLCAWarning, match="2 cases gave answers .*'one', 'three'"):
        found = strict.assign(new)
    assert found.attrs["impossible_cases"] == ("one", "three")
    assert found["modal_class"].isna().tolist() == [True, False, True]
    numbers = found.drop(columns=["case", "modal_class"])
    assert numbers.loc[[0, 2]].isna().all(axis=None)
    assert numbers.loc[1].notna().all()


def test_rows_are_cases_or_patterns(posterior: Posterior) -> None:
    with pytest.raises(BayesLCAError, match="one of 'cases' or 'patterns'"):
        posterior.membership(rows="pattern")  # type: ignore[arg-type]


def test_a_table_of_patterns_has_counts(posterior: Posterior) -> None:
    frame = pd.DataFrame(
        {"fees": ["yes", "no"], "accounts": ["yes", "no"], "type": ["well", "well"],
         "meets": ["no", "no"], "n": [3, 5]}
    )  # fmt: skip
    table = Responses.from_frame(frame, items=posterior.model.items, counts="n")
    found = posterior.assign(table)
    assert found["count"].tolist() == [3, 5]


def test_one_class(single: Posterior) -> None:
    frame = single.membership()
    assert (frame["modal_class"] == "1").all()
    np.testing.assert_allclose(frame[["modal_probability", "lower_1", "upper_1"]], 1)
