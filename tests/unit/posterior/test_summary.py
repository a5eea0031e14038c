"""The summary columns, against NumPy and ArviZ."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import BayesLCAError
from bayeslca.posterior.summary import SUMMARY_COLUMNS, Quantities, summary_frame


@pytest.fixture
def draws() -> np.ndarray:
    rng = np.random.default_rng(5)
    out = rng.gamma(2.0, size=(4, 250, 3))
    out[:, :, 1] = np.cumsum(out[:, :, 1] - 2.0, axis=1) * 0.1  # slow to mix
    out[:, :, 2] = 0.25
    return out


def test_columns_and_their_values(draws: np.ndarray) -> None:
    import arviz_stats as azs

    frame = summary_frame(pd.DataFrame({"quantity": list("abc")}), Quantities(draws), 0.8)
    assert list(frame.columns) == ["quantity", *SUMMARY_COLUMNS]
    assert frame.attrs["interval"] == 0.8
    flat = draws[:, :, 0].ravel()
    assert frame.loc[0, "median"] == np.median(flat)
    assert frame.loc[0, "mean"] == pytest.approx(flat.mean())
    assert frame.loc[0, "sd"] == pytest.approx(flat.std(ddof=1))
    assert frame.loc[0, "lower"] == pytest.approx(np.quantile(flat, 0.1))
    assert frame.loc[0, "upper"] == pytest.approx(np.quantile(flat, 0.9))
    for at in (0, 1):
        one = draws[:, :, at]
        assert frame.loc[at, "mcse"] == pytest.approx(azs.mcse(one, method="mean"))
        assert frame.loc[at, "ess_bulk"] == pytest.approx(azs.ess(one, method="bulk"))
        tail = azs.ess(one, method="tail", prob=(0.05, 0.95))
        assert frame.loc[at, "ess_tail"] == pytest.approx(tail)
        assert frame.loc[at, "r_hat"] == pytest.approx(azs.rhat(one))


def test_constants_are_skipped(draws: np.ndarray) -> None:
    row = Quantities(draws).summary()
    assert row["mean"][2] == 0.25
    assert row["sd"][2] == 0.0
    for name in ("mcse", "ess_bulk", "ess_tail", "r_hat"):
        assert np.isnan(row[name][2])


def test_monte_carlo_figures_are_found_once(
    draws: np.ndarray, monkeypatch: pytest.MonkeyPatch
) -> None:
    quantities = Quantities(draws)
    first = quantities.summary(0.95)
    monkeypatch.setattr("bayeslca.posterior.summary._monte_carlo", None)
    again = quantities.summary(0.5)
    assert again["ess_bulk"][0] == first["ess_bulk"][0]
    assert again["upper"][0] < first["upper"][0]


@pytest.mark.parametrize("interval", [0, 1, 95, -0.1])
def test_a_level_is_a_share(draws: np.ndarray, interval: float) -> None:
    with pytest.raises(BayesLCAError, match="a share between 0 and 1"):
        Quantities(draws).summary(interval)


def test_the_two_answers_of_an_item_have_the_figures_that_each_has_alone() -> None:
    yes = np.random.default_rng(12).beta(3, 9, size=(4, 300, 1)).cumsum(axis=1) / 300
    both = Quantities(np.concatenate([1 - yes, yes], axis=2)).monte_carlo()
    alone = Quantities(yes).monte_carlo()
    for name, values in both.items():
        assert values[0] == pytest.approx(values[1], rel=1e-9)
        assert values[1] == pytest.approx(alone[name][0], rel=1e-6)
    unrelated = Quantities(np.concatenate([yes, np.sqrt(yes)], axis=2)).monte_carlo()
    assert unrelated["mcse"][0] != unrelated["mcse"][1]
