"""Prevalences and response probabilities as tables."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.summary import SUMMARY_COLUMNS

CASES = ["cases", "cases_lower", "cases_upper"]


def test_prevalence(posterior: Posterior) -> None:
    frame = posterior.prevalence()
    assert list(frame.columns) == ["latent_class", *SUMMARY_COLUMNS, *CASES]
    assert frame["latent_class"].tolist() == ["1", "2"]
    np.testing.assert_allclose(frame["mean"], posterior.prevalence_draws.mean(axis=(0, 1))[0])
    assert frame["mean"].sum() == pytest.approx(1)
    assert frame["mean"].is_monotonic_decreasing  # exploratory classes stand in that order
    # 90 cases, two of them without an answer
    np.testing.assert_allclose(frame["cases"], 88 * frame["median"])
    np.testing.assert_allclose(frame["cases_lower"], 88 * frame["lower"])
    np.testing.assert_allclose(frame["cases_upper"], 88 * frame["upper"])


def test_a_wider_interval_holds_the_narrower(posterior: Posterior) -> None:
    wide, narrow = posterior.prevalence(0.99), posterior.prevalence(0.5)
    assert (wide["lower"] < narrow["lower"]).all()
    assert (wide["upper"] > narrow["upper"]).all()
    assert narrow.attrs["interval"] == 0.5


def test_prevalence_by_group_and_overall(grouped: Posterior) -> None:
    frame = grouped.prevalence()
    assert list(frame.columns) == ["group", "latent_class", *SUMMARY_COLUMNS, *CASES]
    assert frame["group"].tolist() == sorted(["north", "south", "west"] * 2) + ["overall"] * 2
    assert frame["latent_class"].tolist() == ["managed", "lapsed"] * 4
    units = grouped.units
    sizes = np.array([units.count[units.group == g].sum() for g in range(3)])
    by_draw = np.average(grouped.prevalence_draws, axis=2, weights=sizes)
    overall = frame[frame["group"] == "overall"]
    np.testing.assert_allclose(overall["mean"], by_draw.mean(axis=(0, 1)))
    np.testing.assert_allclose(overall["upper"], np.quantile(by_draw, 0.975, axis=(0, 1)))
    np.testing.assert_allclose(overall["cases"], 88 * overall["median"])
    north = frame[frame["group"] == "north"]
    np.testing.assert_allclose(north["cases"], sizes[0] * north["median"])


def test_response_probabilities(posterior: Posterior) -> None:
    frame = posterior.response_probabilities()
    keys = ["latent_class", "item", "category"]
    assert list(frame.columns) == [*keys, *SUMMARY_COLUMNS]
    assert len(frame) == 2 * 9
    sums = frame.groupby(["latent_class", "item"])["mean"].sum()
    np.testing.assert_allclose(sums, 1)
    row = frame.set_index(keys).loc[("2", "type", "spring")]
    # classes: group, class; columns fees no yes, accounts no yes, type pump well spring, ...
    draws = posterior.response_probability_draws[:, :, 0, 1, 6]
    assert row["mean"] == pytest.approx(draws.mean())
    assert row["lower"] == pytest.approx(np.quantile(draws, 0.025))


def test_response_probabilities_find_the_planted_classes(posterior: Posterior) -> None:
    # The answers were made with P(fees=yes) = .9 and .15 in classes of 70 % and 30 %.
    frame = posterior.response_probabilities(0.999).set_index(["latent_class", "item", "category"])
    for name, truth in (("1", 0.9), ("2", 0.15)):
        row = frame.loc[(name, "fees", "yes")]
        assert row["lower"] < truth < row["upper"]
        assert row["upper"] - row["lower"] < 0.6


def test_shared_response_probabilities_have_no_group(grouped: Posterior) -> None:
    assert "group" not in grouped.response_probabilities()
    assert grouped.response_probability_draws.shape[2] == 1


def test_one_class_has_a_constant_prevalence(single: Posterior) -> None:
    (row,) = single.prevalence().to_dict("records")
    assert (row["median"], row["lower"], row["upper"], row["cases"]) == (1, 1, 1, 88)
    assert np.isnan(row["r_hat"])
