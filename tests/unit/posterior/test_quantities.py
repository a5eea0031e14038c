"""Quantities of the posterior: against the draws themselves, and what is refused."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy.stats import beta

from bayeslca.exceptions import StatementError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

FEES, ACCOUNTS, TYPE = 1, 3, slice(4, 7)  # columns: fees=yes, accounts=yes, the three types
MANAGED, LAPSED = 0, 1


def probability(posterior: Posterior) -> np.ndarray:
    return posterior.response_probability_draws[:, :, 0].reshape(-1, 2, 9)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("P(fees=yes | managed)", lambda p: p[:, 0, 1]),
        ("P(fees=yes | managed) - P(fees=yes | lapsed)", lambda p: p[:, 0, 1] - p[:, 1, 1]),
        (
            "abs(P(fees=yes | lapsed) - P(fees=yes | managed))",
            lambda p: abs(p[:, 0, 1] - p[:, 1, 1]),
        ),
        ("P(type in {pump, spring} | lapsed)", lambda p: p[:, 1, 4] + p[:, 1, 6]),
        ("P(fees=yes, accounts=no | lapsed)", lambda p: p[:, 1, 1] * p[:, 1, 2]),
        ("-P(fees=yes | managed) + 2 * 0.25", lambda p: 0.5 - p[:, 0, 1]),
        (
            "P(fees=yes | managed) / P(fees=no | managed)"
            " / (P(fees=yes | lapsed) / P(fees=no | lapsed))",
            lambda p: p[:, 0, 1] / p[:, 0, 0] * p[:, 1, 0] / p[:, 1, 1],
        ),
    ],
)
def test_expressions_are_what_the_draws_give(grouped: Posterior, text: str, expected) -> None:
    found, draws = grouped.quantity(text), expected(probability(grouped))
    assert found.mean == pytest.approx(draws.mean(), rel=1e-12)
    assert found.median == pytest.approx(np.median(draws), rel=1e-12)
    assert (found.lower, found.upper) == pytest.approx(np.quantile(draws, [0.025, 0.975]))
    assert found.mcse > 0


def test_prevalences_in_one_group_and_overall(grouped: Posterior) -> None:
    table = grouped.prevalence().set_index(["group", "latent_class"])
    for group, text in (
        ("north", "P(managed | district=north)"),
        ("overall", "P(managed | overall)"),
    ):
        assert grouped.quantity(text).mean == pytest.approx(table.loc[(group, "managed"), "mean"])


def test_class_given_answers_is_bayes_theorem(grouped: Posterior) -> None:
    p, shares = probability(grouped), grouped.prevalence_draws.reshape(-1, 3, 2)[:, 1]
    joint = shares * p[:, :, 1] * p[:, :, 2]
    found = grouped.quantity("P(managed | fees=yes, accounts=no, district=south)")
    assert found.mean == pytest.approx((joint[:, 0] / joint.sum(axis=1)).mean(), rel=1e-12)


def test_a_row_for_each_group_and_class(grouped: Posterior, posterior: Posterior) -> None:
    frame = grouped.quantities({"managed": "P(managed)", "fees": "P(fees=yes | managed)"})
    assert frame["group"].tolist() == ["north", "south", "west", ""]
    table = grouped.prevalence().set_index(["group", "latent_class"])
    assert frame["mean"][1] == pytest.approx(table.loc[("south", "managed"), "mean"])
    by_class = posterior.quantities(["P(fees=yes | .)"])
    assert by_class["latent_class"].tolist() == ["1", "2"]
    assert by_class["prior_median"].isna().all()  # the prior knows no class "1"
    wide = grouped.quantities(["P(fees=yes | managed)"], interval=0.5)
    assert wide.attrs["interval"] == 0.5
    assert "group" not in wide


def test_prior_beside_the_posterior_has_the_quantiles_of_the_beta() -> None:
    responses = Responses.from_frame(
        pd.DataFrame({"fees": ["yes"] * 7 + ["no"] * 3}),
        items=[ItemSpec("fees", categories=("no", "yes"))],
    )
    model = LatentClassModel(responses.items, ["all"], ["P(fees=yes | all) ~ Beta(2, 5)"])
    found = model.sample(responses, seed=1, draws=500, progress=False).quantity("P(fees=yes | all)")
    exact = beta.ppf([0.5, 0.025, 0.975], 2, 5)
    got = (found.prior_median, found.prior_lower, found.prior_upper)
    assert got == pytest.approx(exact, abs=0.012)  # 20,000 draws: 4 standard errors are 0.009
    assert found.mean == pytest.approx(beta.mean(9, 8), abs=5 * found.mcse)


def test_prior_draws_are_named_by_the_rule(grouped: Posterior) -> None:
    # managed is where accounts are commonest of two uniforms: its median is sqrt(1/2).
    found = grouped.quantity("P(accounts=yes | managed)")
    assert found.prior_median == pytest.approx(np.sqrt(0.5), abs=0.012)


def test_it_reads_as_a_sentence(grouped: Posterior) -> None:
    found = grouped.quantity("P(fees=yes | managed) - P(fees=yes | lapsed)", interval=0.9)
    assert repr(found).startswith(
        f"P(fees=yes | managed) - P(fees=yes | lapsed) is {found.median:.3g} (90 % interval "
    )
    assert "before the data it was" in repr(found)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("P(managed) > 0.5", "no quantity"),
        ("P(managed)", "for each group"),
        ("P(fees=yes | .)", "for each class"),
        ("P(fee=yes | managed)", "near names: 'fees'"),
        ("0.5 + 0.2", "speaks of no probability"),
        ("0 * P(fees=yes | managed) / (0 * P(fees=yes | lapsed))", "divides 0 by 0"),
        ("P(managed | overall) +", "expected|ends"),
    ],
)
def test_what_is_no_quantity_is_refused(grouped: Posterior, text: str, message: str) -> None:
    with pytest.raises(StatementError, match=message) as error:
        grouped.quantity(text)
    assert "^" in str(error.value)
    assert error.value.remedy
