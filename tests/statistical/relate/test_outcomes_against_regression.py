"""Outcomes by class against ordinary regression, and against two known ways to go wrong."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from known_classes import known_posterior
from scipy import stats

import bayeslca as lca
from bayeslca.model.probabilities import membership

N = 160
SURE = known_posterior(N, yes=(0.999, 0.001), shares=(0.6, 0.4), seed=1, items=6)


def survey(z: np.ndarray, seed: int) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    x = rng.normal(size=z.size) + 0.5 * z
    eta = 0.8 * z + 0.5 * x
    return pd.DataFrame(
        {
            "case": np.arange(z.size).astype(str),
            "x": x,
            "numeric": rng.normal(2.0 * z + x, 1.0 + z),
            "binary": (rng.random(z.size) < 1 / (1 + np.exp(0.5 - eta))).astype(int),
            "count": rng.poisson(np.exp(eta)),
        }
    )


@pytest.mark.parametrize("kind", ["numeric", "binary", "count"])
def test_separated_classes_give_the_regression_of_known_classes(kind: str) -> None:
    """Without covariates: closed forms. sd of the class mean (OLS) for numbers."""
    posterior, z = SURE
    frame = survey(z, 2)
    found = lca.class_outcomes(
        posterior, frame, kind, kind=kind, count_model="poisson", seed=3, max_sweeps=6000, ess=800  # type: ignore[arg-type]
    ).means()  # fmt: skip
    for k, name in enumerate(("high", "low")):
        y = frame[kind].to_numpy(dtype=float)[z == k]
        n = y.size
        if kind == "numeric":
            # t interval of OLS on dummies with a variance of its own; the prior is worth less
            # than one case in both mean and variance.
            lower, upper = stats.t.interval(0.95, n - 1, y.mean(), y.std(ddof=1) / np.sqrt(n))
            slack = 0.07 * (upper - lower)
        elif kind == "binary":
            lower, upper = stats.beta(1 + y.sum(), 1 + n - y.sum()).interval(0.95)
            slack = 0.04 * (upper - lower)
        else:
            mean = frame[kind].mean()
            prior = stats.gamma(0.5 + y.sum(), scale=1 / (0.5 / mean + n))
            lower, upper = prior.interval(0.95)
            slack = 0.04 * (upper - lower)
        for way in ("joint", "cut"):
            row = found[(found["way"] == way) & (found["latent_class"] == name)].iloc[0]
            # The ends' Monte Carlo error is about 3 % of the width at 1000 effective draws.
            assert abs(row["lower"] - lower) < slack + 0.06 * (upper - lower), (way, name)
            assert abs(row["upper"] - upper) < slack + 0.06 * (upper - lower), (way, name)


@pytest.mark.parametrize("kind", ["numeric", "binary", "count"])
def test_separated_classes_give_statsmodels_with_covariates(kind: str) -> None:
    """Against OLS and GLM: slope and standardised means, in standard errors of the fit."""
    posterior, z = SURE
    frame = survey(z, 4)
    found = lca.class_outcomes(
        posterior, frame, kind, kind=kind, adjusted_for="x", count_model="poisson", spread="equal",  # type: ignore[arg-type]
        ways=["cut"], seed=5, held=1600,
    )  # fmt: skip
    sd = frame["x"].std(ddof=0)
    x = ((frame["x"] - frame["x"].mean()) / sd).to_numpy()
    design = np.column_stack([z == 0, z == 1, x]).astype(float)
    family = {"numeric": sm.families.Gaussian(), "binary": sm.families.Binomial()}
    fit = sm.GLM(frame[kind], design, family=family.get(kind, sm.families.Poisson())).fit()
    slope = found.parameters().query("parameter == 'x' and way == 'cut'").iloc[0]
    assert abs(slope["mean"] - fit.params.iloc[2]) < 0.25 * fit.bse.iloc[2]
    assert slope["sd"] == pytest.approx(fit.bse.iloc[2], rel=0.12)
    means = found.means().query("way == 'cut'")
    for k in range(2):
        as_if = design.copy()
        as_if[:, :2] = np.eye(2)[k]
        expected = fit.predict(as_if).mean()
        assert abs(means["mean"].iloc[k] - expected) < 0.25 * means["sd"].iloc[k]


def test_the_cut_is_unbiased_where_modal_and_imputed_classes_attenuate() -> None:
    """Response probabilities known, 0.7 and 0.3; the truth is a gap of 2 (rule 1)."""
    posterior, z = known_posterior(4000, yes=(0.7, 0.3), shares=(0.5, 0.5), seed=6)
    rng = np.random.default_rng(7)
    y = rng.normal(2.0 * z, 1.0)
    frame = pd.DataFrame({"case": np.arange(z.size).astype(str), "y": y})
    found = lca.class_outcomes(
        posterior, frame, "y", kind="numeric", seed=8, held=200, ways=["cut", "three_steps"]
    )
    share = membership(
        posterior.table,
        posterior.unit_table,
        posterior.draws.elements[0, 0],
        posterior.draws.prevalence[0, 0],
    )[posterior.units.unit_of_row]

    def gap(classes: np.ndarray) -> float:
        return float(y[classes == 1].mean() - y[classes == 0].mean())

    imputed = np.mean([gap((rng.random(z.size) < share[:, 1]).astype(int)) for _ in range(50)])
    modal = gap(share.argmax(axis=1))
    gaps = found.differences().set_index("way")
    for way in ("cut", "inverse_error_matrix", "fixed_error_likelihood"):
        assert gaps.loc[way, "sd"] < 0.15
        assert abs(gaps.loc[way, "mean"] + 2.0) < 4 * gaps.loc[way, "sd"], way
    assert modal < 1.6
    assert imputed < 1.3
