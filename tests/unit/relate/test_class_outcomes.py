"""What follows from class: tables, orders, findings, and what cannot be asked."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.exceptions import ModelError
from bayeslca.model.symmetry import element_map
from bayeslca.relate.outcomes.checks import distribution, outcome_checks
from bayeslca.relate.outcomes.column import Outcome
from bayeslca.relate.outcomes.joint import with_own_names
from bayeslca.relate.outcomes.model import outcome_model
from bayeslca.relate.outcomes.overdispersion import overdispersion
from bayeslca.relate.outcomes.words import priors_in_words
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.outcome_step import BY_CLASS, SHARED
from bayeslca.sampling.relabel import Relabelled

CLASSES = ["kept", "left"]
WAYS = ("joint", "cut", "inverse_error_matrix", "fixed_error_likelihood")


def survey(n: int = 80, seed: int = 4) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    z = (rng.random(n) < 0.4).astype(int)
    yes = np.where(z[:, None] == 0, 0.9, 0.15)
    answers = np.where(rng.random((n, 5)) < yes, "yes", "no").astype(object)
    answers[3, :2] = None
    answers[5] = None  # no answer at all: still has an outcome
    frame = pd.DataFrame(answers, columns=[f"i{j}" for j in range(5)])
    frame["case"] = [f"c{i}" for i in range(n)]
    frame["days"] = rng.negative_binomial(2, 2 / (2 + np.where(z == 0, 4.0, 20.0)))
    frame["cost"] = rng.normal(np.where(z == 0, 10.0, 14.0), 2.0)
    frame["paid"] = np.where(rng.random(n) < np.where(z == 0, 0.8, 0.3), "yes", "no")
    frame["grade"] = np.clip(np.round(rng.normal(2 + z, 1.0)), 1, 4).astype(int)
    frame["truth"] = z
    frame.loc[7, "cost"] = None
    return frame


@pytest.fixture(scope="module")
def data() -> pd.DataFrame:
    return survey()


@pytest.fixture(scope="module")
def posterior(data: pd.DataFrame) -> lca.Posterior:
    responses = lca.Responses.from_frame(data, items=[f"i{j}" for j in range(5)], case="case")
    model = lca.LatentClassModel(
        responses.items, CLASSES, statements=["P(i0=yes | kept) > P(i0=yes | left)"]
    )
    return model.sample(responses, seed=1, progress=False, draws=300, ess=300, r_hat=1.05)


@pytest.fixture(scope="module")
def cost(posterior: lca.Posterior, data: pd.DataFrame) -> lca.ClassOutcomes:
    shuffled = data.sample(frac=1.0, random_state=2)
    return lca.class_outcomes(
        posterior,
        shuffled,
        "cost",
        kind="numeric",
        seed=3,
        draws=250,
        ess=200,
        held=400,
        max_sweeps=4000,
    )


def test_means_differences_and_effects(cost: lca.ClassOutcomes, data: pd.DataFrame) -> None:
    means = cost.means()
    assert tuple(dict.fromkeys(means["way"])) == WAYS
    assert means.attrs["interval"] == 0.95
    assert means["cases"].iloc[:2].sum() == pytest.approx(79.0)  # one is missing
    for way in WAYS:
        mine = means[means["way"] == way].set_index("latent_class")
        # The means of those who truly are in a class lie well within three standard errors.
        for name, mean in zip(CLASSES, data.groupby("truth")["cost"].mean(), strict=True):
            assert abs(mine.loc[name, "mean"] - mean) < 3 * mine.loc[name, "sd"]
    gaps = cost.differences()
    pairs = gaps[["latent_class", "other_class"]].drop_duplicates().to_numpy().tolist()
    assert pairs == [["kept", "left"]]
    np.testing.assert_allclose(
        gaps["mean"], means.groupby("way", sort=False)["mean"].agg(lambda m: m.iloc[0] - m.iloc[1])
    )
    assert np.all(gaps["probability_larger"].iloc[:2] < 0.01)
    assert gaps["probability_larger"].iloc[2:].isna().all()
    assert np.all((gaps["effect"] > -3.5) & (gaps["effect"] < -1.0))  # made with -2


def test_orders(cost: lca.ClassOutcomes) -> None:
    table = cost.order("kept < left")
    assert table["way"].tolist() == ["joint", "cut"]
    assert np.all(table["posterior_probability"] > 0.99)
    assert np.all(table["prior_probability"] == 0.5)
    backwards = cost.order("left > kept")
    np.testing.assert_array_equal(
        table["posterior_probability"], backwards["posterior_probability"]
    )
    with pytest.raises(ModelError, match=r"no class 'lef' \(near names: 'left'\)"):
        cost.order("kept < lef")
    with pytest.raises(ModelError, match="joined by '<' alone"):
        cost.order("kept = left")
    with pytest.raises(ModelError, match="names a class twice"):
        cost.order("kept < kept")


def test_membership_moved(cost: lca.ClassOutcomes, posterior: lca.Posterior) -> None:
    moved = cost.membership_moved()
    assert moved["case"].tolist() == list(posterior.responses.row_names)
    for way in ("answers", "cut", "joint"):
        columns = [f"probability_{name}_{way}" for name in CLASSES]
        np.testing.assert_allclose(moved[columns].sum(axis=1), 1.0)
    known = posterior.membership()
    np.testing.assert_allclose(
        moved["probability_kept_answers"], known["probability_kept"], atol=0.01
    )
    # A case without an answer is placed by its outcome alone; one without an outcome does not move.
    empty = moved[moved["case"] == "c5"].iloc[0]
    assert abs(empty["probability_kept_cut"] - empty["probability_kept_answers"]) > 0.05
    missing = moved[moved["case"] == "c7"].iloc[0]
    assert missing["probability_kept_cut"] == pytest.approx(
        missing["probability_kept_answers"], abs=0.01
    )


def test_findings_checks_and_words(cost: lca.ClassOutcomes) -> None:
    kinds = {one.kind for one in cost.findings}
    assert "outcome_missing" in kinds
    assert not any(one.level == "problem" for one in cost.findings)
    checks = cost.checks
    assert set(checks["way"]) == {"joint", "cut"}
    assert np.all(checks["p"] > 0.01)
    shares = cost.distribution.groupby("way")["observed"].sum()
    np.testing.assert_allclose(shares, 1.0)
    assert any("2.5 standard deviations" in text for text in priors_in_words(cost))
    text = repr(cost)
    assert "cost (numeric; 79 cases)" in text
    assert max(map(len, text.splitlines()[:20])) <= 80


@pytest.mark.parametrize(
    ("column", "kind", "within"),
    [("paid", "binary", (0.3, 0.8)), ("grade", "ordered", (2.0, 3.0)), ("days", "count", (4, 20))],
)
def test_other_kinds(
    posterior: lca.Posterior, data: pd.DataFrame, column: str, kind: str, within: tuple[float, ...]
) -> None:
    found = lca.class_outcomes(
        posterior, data, column, kind=kind, seed=3, draws=100, ess=50, held=200, max_sweeps=1200  # type: ignore[arg-type]
    )  # fmt: skip
    means = found.means()
    for way in ("joint", "cut", "fixed_error_likelihood"):
        mine = np.sort(means[means["way"] == way]["median"])
        assert np.all(np.abs(np.log(mine / np.sort(within))) < 0.6), way
    if kind == "ordered":
        shares = found.categories()
        wide = shares.groupby(["way", "latent_class"], sort=False)["mean"].sum()
        np.testing.assert_allclose(wide[["joint", "cut"]], 1.0)
        assert found.parameters().empty
    if kind == "count":
        assert found.count_model == "negative_binomial"
        assert "counts_overdispersed" in {one.kind for one in found.findings}
        assert set(found.parameters()["parameter"]) == {"size"}


def test_same_seed_same_numbers_whatever_the_threads(
    posterior: lca.Posterior, data: pd.DataFrame
) -> None:
    one, two = (
        lca.class_outcomes(
            posterior,
            data,
            "paid",
            kind="binary",
            seed=5,
            draws=50,
            ess=20,
            held=100,
            max_sweeps=800,
            threads=n,
        ).means()
        for n in (1, 2)
    )
    pd.testing.assert_frame_equal(one, two)


def test_exploratory_classes_keep_the_measurement_models_names(data: pd.DataFrame) -> None:
    responses = lca.Responses.from_frame(data, items=[f"i{j}" for j in range(5)], case="case")
    posterior = lca.LatentClassModel(responses.items, 2).sample(
        responses, seed=1, progress=False, draws=200, ess=100, r_hat=1.1
    )
    # The other names: class 1 is what was class 2.
    flipped = posterior.relabelled.draws
    draws = replace(
        flipped,
        elements=flipped.elements[..., element_map(posterior.table, np.array([[1, 0]]))],
        prevalence=flipped.prevalence[..., ::-1],
    )
    other = lca.Posterior(
        posterior.model, responses, Relabelled(draws, posterior.relabelled.permutations)
    )
    means = [
        lca.class_outcomes(
            one,
            data,
            "cost",
            kind="numeric",
            ways=["joint"],
            seed=2,
            draws=100,
            ess=50,
            held=100,
            max_sweeps=1200,
        )
        .means()
        .query("way == 'joint'")["mean"]
        .to_numpy()
        for one in (posterior, other)
    ]
    assert abs(means[0][0] - means[0][1]) > 2.0
    np.testing.assert_allclose(means[0], means[1][::-1], atol=0.5)


def test_draws_with_switched_labels_are_matched(data: pd.DataFrame) -> None:
    responses = lca.Responses.from_frame(data, items=[f"i{j}" for j in range(5)], case="case")
    posterior = lca.LatentClassModel(responses.items, 2).sample(
        responses, seed=1, progress=False, draws=50, ess=20, r_hat=1.2
    )
    draws = posterior.draws
    elements, prevalence = draws.elements.copy(), draws.prevalence.copy()
    by_class = np.tile([[1.0], [2.0]], (*draws.log_prior.shape, 1, 1))
    mapped = element_map(posterior.table, np.array([[1, 0]]))
    elements[:, ::2] = elements[:, ::2][..., mapped]
    prevalence[:, ::2] = prevalence[:, ::2, :, ::-1]
    by_class[:, ::2] = by_class[:, ::2, ::-1]
    joint = JointDraws(
        elements,
        prevalence,
        draws.log_likelihood,
        draws.log_prior,
        {BY_CLASS: by_class, SHARED: np.zeros((*draws.log_prior.shape, 0))},
    )
    found = with_own_names(posterior, joint)
    np.testing.assert_array_equal(found.by_class, np.broadcast_to([[1.0], [2.0]], by_class.shape))
    np.testing.assert_allclose(found.prevalence, draws.prevalence)


def test_what_cannot_be_asked(posterior: lca.Posterior, data: pd.DataFrame) -> None:
    ask = lambda **options: lca.class_outcomes(posterior, data, "cost", kind="numeric", **options)  # noqa: E731
    with pytest.raises(ModelError, match=r"ways: there is no 'joined' \(near names: 'joint'\)"):
        ask(ways=["joined"])
    with pytest.raises(ModelError, match="ways is empty"):
        ask(ways=[])
    with pytest.raises(ModelError, match="count_model: there is no 'normal'"):
        ask(count_model="normal")
    with pytest.raises(ModelError, match="corrections: there is no 'none'"):
        ask(corrections=["none"])
    one_class = lca.LatentClassModel(posterior.model.items, 1).sample(
        posterior.responses, seed=1, progress=False, draws=50, ess=20, r_hat=1.1
    )
    with pytest.raises(ModelError, match="one class"):
        lca.class_outcomes(one_class, data, "cost", kind="numeric")


def test_few_cases_in_a_class_are_named() -> None:
    frame = survey(60, seed=8)
    frame.loc[frame["i0"].eq("no") | frame["i1"].eq("no"), "cost"] = None
    responses = lca.Responses.from_frame(frame, items=[f"i{j}" for j in range(5)], case="case")
    posterior = lca.LatentClassModel(
        responses.items, CLASSES, statements=["P(i0=yes | kept) > P(i0=yes | left)"]
    ).sample(responses, seed=1, progress=False, draws=100, ess=50, r_hat=1.1)
    found = lca.class_outcomes(
        posterior, frame, "cost", kind="numeric", ways=["cut"], seed=1, held=100
    )
    (few,) = [one for one in found.findings if one.kind == "few_cases_in_class"]
    assert few.about == ("left",)


def test_checks_find_a_wrong_distribution() -> None:
    rng = np.random.default_rng(2)
    value = rng.exponential(10.0, 300)
    outcome = Outcome("days", "", "numeric", value)
    model = outcome_model("numeric", value, 1)
    replicates = rng.normal(value.mean(), value.std(), (400, 300))
    table = outcome_checks(outcome, model, replicates, np.ones((300, 1)), ("all",))
    p = table.set_index(["feature", "latent_class"])["p"]
    assert p["skewness", "overall"] < 0.01
    assert p["smallest", "overall"] < 0.01
    assert p["mean", "overall"] > 0.2
    right = rng.permuted(np.tile(value, (400, 1)), axis=1)
    table = outcome_checks(outcome, model, right, np.ones((300, 1)), ("all",))
    assert np.all(table["p"] > 0.9)
    ranges = distribution(outcome, model, right)
    np.testing.assert_allclose(ranges["observed"], ranges["expected"])
    assert ranges["observed"].sum() == pytest.approx(1.0)


def test_overdispersion_is_found_and_only_where_it_is() -> None:
    rng = np.random.default_rng(3)
    z = rng.random(150) < 0.4
    sign = np.where(rng.random(150) < 0.85, z, ~z)
    share = np.where(sign, 0.85 * 0.4, 0.15 * 0.4)
    share = share / (share + np.where(sign, 0.15 * 0.6, 0.85 * 0.6))
    membership = np.column_stack([1 - share, share])
    rate = np.where(z, 20.0, 5.0)
    poisson = overdispersion(rng.poisson(rate).astype(float), membership, rng)
    assert poisson.p > 0.05
    assert 0.6 < poisson.ratio < 1.5
    wide = rng.poisson(rng.gamma(1.0, rate)).astype(float)
    assert overdispersion(wide, membership, rng).p < 0.01


def test_one_way_alone_is_printed(posterior: lca.Posterior, data: pd.DataFrame) -> None:
    """The width of a column once came from the names of the ways, and was negative for one."""
    found = lca.class_outcomes(posterior, data, "cost", kind="numeric", ways="cut", seed=1)  # type: ignore[arg-type]
    assert found.ways == ("cut",)
    assert "    kept " in repr(found)


def test_a_way_without_an_estimate_prints_no_nan(
    posterior: lca.Posterior, data: pd.DataFrame
) -> None:
    found = lca.class_outcomes(posterior, data, "cost", kind="numeric", ways=("cut",), seed=1)
    gone = found.means().assign(median=np.nan)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(type(found), "means", lambda _: gone)
        assert "no estimate" in repr(found)
        assert "nan" not in repr(found)
