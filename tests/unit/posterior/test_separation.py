"""Separation and assignment error, draw by draw."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.model.probabilities import membership
from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.summary import SUMMARY_COLUMNS


@pytest.fixture(scope="module")
def shares(posterior: Posterior) -> np.ndarray:
    """P(class | answers) of all 88 cases, shape (S, case, K)."""
    draws = membership(
        posterior.table, posterior.unit_table, posterior.draws.elements, posterior.draws.prevalence
    )
    draws = draws.reshape(-1, *draws.shape[2:])
    return np.repeat(draws, posterior.units.count, axis=1)


def test_separation_is_the_relative_entropy(posterior: Posterior, shares: np.ndarray) -> None:
    # The usual definition: 1 - sum of entropies of the cases / (N log K).
    entropy = -(shares * np.log(shares)).sum(axis=(1, 2))
    expected = 1 - entropy / (88 * np.log(2))
    frame = posterior.separation(0.9)
    assert list(frame.columns) == ["quantity", *SUMMARY_COLUMNS, "note"]
    (row,) = frame.to_dict("records")
    assert row["quantity"] == "separation"
    assert row["mean"] == pytest.approx(expected.mean())
    assert row["upper"] == pytest.approx(np.quantile(expected, 0.95))
    assert row["note"] == ""


def test_assignment_error(posterior: Posterior, shares: np.ndarray) -> None:
    frame = posterior.assignment_error()
    keys = ["latent_class", "assigned_class"]
    assert list(frame.columns) == [*keys, "share", *SUMMARY_COLUMNS]
    modal = shares.mean(axis=0).argmax(axis=1)
    by_draw = shares[:, modal == 1, 0].sum(axis=1) / shares[:, :, 0].sum(axis=1)
    row = frame.set_index(keys).loc[("1", "2")]
    assert row["share"] == pytest.approx(by_draw.mean())
    assert row["median"] == pytest.approx(np.median(by_draw))
    assert row["lower"] == pytest.approx(np.quantile(by_draw, 0.025))
    np.testing.assert_allclose(frame.groupby("latent_class")["share"].sum(), 1)


def test_one_class_has_no_separation_and_says_why(single: Posterior) -> None:
    (row,) = single.separation().to_dict("records")
    assert np.isnan([row["mean"], row["lower"], row["r_hat"]]).all()
    assert row["note"] == "with one class there is nothing to separate"
    (error,) = single.assignment_error().to_dict("records")
    assert error["share"] == pytest.approx(1)
