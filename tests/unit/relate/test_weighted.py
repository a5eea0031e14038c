"""Weighted fits: closed formulas, an independent sandwich, the ordinary posterior, and words."""

from __future__ import annotations

import threading
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.relate.weighted.sample_weighted import sample_weighted
from bayeslca.relate.weighted.weighted_likelihood import weighted_maximum_likelihood
from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior

SEED = 43
ITEMS = [f"item_{j}" for j in range(6)]
NAMED = ["first is where P(item_0=yes) is highest"]


def fitted(frame: pd.DataFrame, n_items: int = 6, **roles: str) -> Any:
    """Return responses and a model of two named classes."""
    responses = lca.Responses.from_frame(frame, items=ITEMS[:n_items], **roles)
    return responses, lca.LatentClassModel(responses.items, ["first", "second"], statements=NAMED)


@cache
def clustered(high: float) -> tuple[pd.DataFrame, np.ndarray]:
    """Draw 40 clusters of 10 in 4 strata; cases of a cluster are alike, weights informative."""
    rng = np.random.default_rng(SEED)
    stratum = np.repeat(np.arange(4), 100)
    cluster = np.repeat(np.arange(40), 10)
    member = rng.random(400) < rng.beta(2.0, 2.0 + np.arange(40) // 10)[cluster]
    weight = (1.0 + stratum) * rng.uniform(0.8, 1.2, 400)
    p = np.where(member, high, 1.0 - high)[:, None]
    answers = np.where(rng.random((400, 6)) < p, "yes", "no")
    frame = pd.DataFrame(answers, columns=ITEMS).assign(w=weight, c=cluster, s=stratum)
    return frame, member


def linearised(y: np.ndarray, frame: pd.DataFrame) -> tuple[float, float]:
    """Weighted mean and its standard error: Lohr (2010), section 9.3, from memory, in loops."""
    weight = frame["w"].to_numpy()
    mean = float(weight @ y / weight.sum())
    variance = 0.0
    for _, rows in frame.assign(e=weight * (y - mean) / weight.sum()).groupby("s"):
        totals = rows.groupby("c")["e"].sum()
        n = len(totals)
        variance += n / (n - 1) * ((totals - totals.mean()) ** 2).sum()
    return mean, variance**0.5


DESIGN = {"weight": "w", "cluster": "c", "stratum": "s"}


def test_separate_classes_are_a_weighted_proportion_with_its_textbook_error() -> None:
    frame, member = clustered(1.0)
    responses, model = fitted(frame, **DESIGN)
    mean, error = linearised(member.astype(float), frame)
    row = weighted_maximum_likelihood(model, responses, seed=1).prevalence.iloc[0]
    assert row["estimate"] == pytest.approx(mean, abs=1e-7)
    assert row["standard_error"] == pytest.approx(error, rel=1e-5)
    # n cases drawn one by one: p (1 - p) / n.
    assert row["standard_error_if_random"] == pytest.approx((mean * (1 - mean) / 400) ** 0.5)
    assert row["design_effect"] == pytest.approx(error**2 / (mean * (1 - mean) / 400), rel=1e-4)


@pytest.mark.parametrize("roles", [DESIGN, {"weight": "w"}], ids=["all", "weights alone"])
def test_pooled_draws_have_the_textbook_error_too(roles: dict[str, str]) -> None:
    frame, member = clustered(1.0)
    responses, model = fitted(frame, **roles)
    df = 36
    if roles == {"weight": "w"}:  # cases are their own clusters, in one stratum
        frame, df = frame.assign(c=range(400), s=0), 399
    mean, error = linearised(member.astype(float), frame)
    n = 400
    found = sample_weighted(model, responses, pseudo_samples=n, seed=2, progress=False)
    row = found.prevalence().iloc[0]
    near = mean + (0.5 - mean) * 2 / 402  # the uniform prior adds a case to each class
    assert abs(row["mean"] - near) < 4 * row["mcse"]
    # Between pseudo-samples Student's t with clusters less strata for its degrees of freedom. The
    # standard deviation of n is known to 1/sqrt(2 (n - 1)), a little more for t.
    within = (mean * (1 - mean) / 402) ** 0.5
    expected = (within**2 + (error**2 - within**2) * df / (df - 2)) ** 0.5
    assert row["sd"] == pytest.approx(expected, rel=4 * 1.1 / (2 * (n - 1)) ** 0.5)
    assert row["design_effect"] == pytest.approx(row["sd"] ** 2 / within**2, rel=0.05)


def _log_likelihood(at: np.ndarray, answers: np.ndarray) -> np.ndarray:
    """Log likelihood of each case at logits: the class, then the answers class by class."""
    share = 1 / (1 + np.exp(-at[0]))
    p = 1 / (1 + np.exp(-at[1:].reshape(2, -1)))
    given = [np.prod(np.where(answers, row, 1 - row), axis=1) for row in p]
    return np.log(share * given[0] + (1 - share) * given[1])


def test_sandwich_by_finite_differences() -> None:
    frame, _ = clustered(0.8)
    responses, model = fitted(frame, 4, **DESIGN)
    fit = weighted_maximum_likelihood(model, responses, seed=1)
    yes = fit.response_probability.query("category == 'yes'")
    values = np.concatenate([fit.prevalence["estimate"].iloc[:1], yes["estimate"]])
    at, answers = np.log(values / (1 - values)), frame[ITEMS[:4]].to_numpy() == "yes"
    weight = frame["w"].to_numpy() / frame["w"].sum()
    step, n = 1e-4, at.size
    shifts = step * np.eye(n)
    score = np.stack(
        [(_log_likelihood(at + e, answers) - _log_likelihood(at - e, answers)) for e in shifts]
    ).T / (2 * step)
    np.testing.assert_allclose(weight @ score, 0.0, atol=1e-6)  # it is the maximum
    information = np.empty((n, n))
    for i, j in np.ndindex(n, n):
        moved = [
            sign * (weight @ _log_likelihood(at + a * shifts[i] + b * shifts[j], answers))
            for a, b, sign in ((1, 1, 1), (1, -1, -1), (-1, 1, -1), (-1, -1, 1))
        ]
        information[i, j] = -sum(moved) / (4 * step**2)
    meat = np.zeros((n, n))
    totals = pd.DataFrame(weight[:, None] * score).assign(c=frame["c"], s=frame["s"])
    for _, rows in totals.groupby("s"):
        sums = rows.drop(columns="s").groupby("c").sum().to_numpy()
        apart = sums - sums.mean(axis=0)
        meat += len(sums) / (len(sums) - 1) * apart.T @ apart
    bread = np.linalg.inv(information)
    errors = np.sqrt(np.diag(bread @ meat @ bread)) * values * (1 - values)  # delta method
    mine = np.concatenate([fit.prevalence["standard_error"].iloc[:1], yes["standard_error"]])
    np.testing.assert_allclose(mine, errors, rtol=2e-4)


@cache
def middling() -> tuple[Any, Any, Any]:
    frame = clustered(0.8)[0].iloc[::3].assign(one=3.0)
    responses, model = fitted(frame, weight="one")
    return responses, model, model.sample(responses, seed=3, progress=False)


def test_equal_weights_without_clusters_give_the_ordinary_posterior() -> None:
    responses, model, ordinary = middling()
    found = sample_weighted(model, responses, seed=4, unweighted=ordinary, progress=False)
    for mine, other in (
        (found.prevalence(), ordinary.prevalence()),
        (found.response_probabilities(), ordinary.response_probabilities()),
    ):
        # All pseudo-samples are the sample: draws of 100 independent chains.
        error = np.hypot(mine["mcse"], other["mcse"])
        z = (mine["mean"] - other["mean"]) / error
        assert np.abs(z).max() < 4.5
        np.testing.assert_allclose(mine["sd"], other["sd"], rtol=0.12)
        assert mine["design_effect"].max() < 1.25
    assert not found.beside_unweighted()["differs"].any()
    assert "Cases weigh alike" in repr(found)


@cache
def weighted() -> WeightedPosterior:
    frame, member = clustered(0.85)
    informative = frame.assign(w=frame["w"] * np.where(member, 0.2, 1.0))
    responses, model = fitted(informative, **DESIGN)
    return sample_weighted(model, responses, pseudo_samples=40, seed=5, progress=False)


def test_results_depend_on_the_seed_only() -> None:
    one = weighted()
    again = sample_weighted(
        one.unweighted.model,
        one.responses,
        pseudo_samples=40,
        seed=5,
        unweighted=one.unweighted,
        threads=1,
        progress=False,
    )
    np.testing.assert_array_equal(one.draws.elements, again.draws.elements)


def test_tables_and_words() -> None:
    found = weighted()
    beside = found.beside_unweighted()
    assert list(beside["latent_class"]) == ["first", "second"]
    assert beside["differs"].all()
    assert (beside["design_effect"] > 1.2).all()
    error = beside["standard_error"]
    assert (abs(beside["weighted"] - beside["estimate"]) < error).all()
    patterns = found.membership()
    assert patterns["weighted_count"].sum() == pytest.approx(400)
    assert patterns["count"].sum() == 400
    assert len(found.membership(rows="cases")) == 400
    assert found.response_probabilities(0.5).attrs["interval"] == 0.5
    words = repr(found)
    assert "40 clusters (c), 4 strata (s)" in words
    assert "The weights change the answer: first" in words
    assert max(map(len, words.splitlines())) <= 80
    assert "Unweighted" in repr(found.unweighted)


def test_groups_are_weighted_by_what_they_stand_for() -> None:
    frame = clustered(1.0)[0]
    responses = lca.Responses.from_frame(
        frame.assign(s=frame["s"].astype(str)), items=ITEMS, group="s", **DESIGN
    )
    model = lca.LatentClassModel(
        responses.items, ["first", "second"], statements=NAMED, groups=responses.groups
    )
    found = sample_weighted(model, responses, pseudo_samples=40, seed=6, progress=False)
    mean, error = linearised(clustered(1.0)[1].astype(float), frame)
    overall = found.prevalence().query("group == 'overall'").iloc[0]
    assert overall["mean"] == pytest.approx(mean, abs=4 * overall["mcse"] + 0.01)
    assert overall["sd"] == pytest.approx(error, rel=0.5)
    assert np.isnan(found.beside_unweighted().query("group == 'overall'")["estimate"]).all()


def test_few_clusters_are_said() -> None:
    responses, model = fitted(clustered(0.9)[0].query("c % 10 < 3"), **DESIGN)
    found = sample_weighted(model, responses, pseudo_samples=20, seed=7, progress=False)
    (finding,) = [f for f in found.findings if f.kind == "few_clusters"]
    assert "12 clusters in 4 strata leave 8" in finding.message


def test_constraints_that_em_cannot_keep_leave_the_pooled_draws() -> None:
    responses, _ = fitted(clustered(0.9)[0], **DESIGN)
    fork = ["P(item_0=yes | a) > P(item_0=yes | b)", "P(item_0=yes | a) > P(item_1=yes | b)"]
    model = lca.LatentClassModel(responses.items, ["a", "b"], statements=fork)
    found = sample_weighted(model, responses, pseudo_samples=20, seed=8, progress=False)
    assert found.likelihood is None
    assert found.beside_unweighted()["standard_error"].isna().all()
    assert np.isfinite(found.prevalence()["sd"]).all()


def test_what_is_refused() -> None:
    responses, model = fitted(clustered(0.9)[0])
    with pytest.raises(ModelError, match="no weights, clusters or strata"):
        sample_weighted(model, responses, progress=False)
    with pytest.raises(ModelError, match="no weights, clusters or strata"):
        weighted_maximum_likelihood(model, responses)
    with pytest.raises(SamplingError, match="at least 20"):
        sample_weighted(model, responses, pseudo_samples=5)


def test_a_saved_posterior_keeps_the_design(tmp_path: Any) -> None:
    responses, _, ordinary = middling()
    ordinary.save(tmp_path / "fit.nc")
    design = lca.Posterior.load(tmp_path / "fit.nc").responses.design
    assert design is not None
    np.testing.assert_array_equal(design.weight, responses.design.weight)
    assert (design.weight_name, design.cluster_name) == ("one", None)


def test_comparisons_say_that_they_are_unweighted() -> None:
    _, _, ordinary = middling()
    found = lca.compare({"this": ordinary})
    assert [f.kind for f in found.findings if "unweighted" in f.kind] == ["comparison_unweighted"]


def test_interrupting_ends_all_threads() -> None:
    one, before = weighted(), threading.active_count()

    def interrupt(_: object) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        sample_weighted(
            one.unweighted.model,
            one.responses,
            pseudo_samples=500,
            draws=4000,
            seed=9,
            unweighted=one.unweighted,
            progress=interrupt,
        )
    assert threading.active_count() == before
