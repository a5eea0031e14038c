"""Joint answers and conditional dependence, against a conjugate posterior and statsmodels."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy.special import gammaln
from statsmodels.stats.contingency_tables import Table2x2

from bayeslca import AnsweredTogether, Item, LatentClassModel, Posterior, Responses
from bayeslca.assess.evidence.log_evidence import log_evidence
from bayeslca.exceptions import ModelError
from bayeslca.model.simulate import parameters_from

SEED = 20270101
NO_YES = ("no", "yes")
COUNTS = np.array([[41, 13], [9, 37]])
"""Invented: fees (rows) by accounts (columns)."""


def table_of(counts: np.ndarray, items: tuple[Item, ...]) -> Responses:
    codes = np.argwhere(np.ones(counts.shape))
    frame = pd.DataFrame(
        {item.name: [item.categories[c] for c in codes[:, j]] for j, item in enumerate(items)}
    )
    frame["n"] = counts.ravel()
    return Responses.from_frame(frame, items=list(items), counts="n")


@pytest.fixture(scope="module")
def one_class() -> Posterior:
    items = (Item("fees", NO_YES, yes="yes"), Item("accounts", NO_YES, yes="yes"))
    model = LatentClassModel(items, 1, answered_together=[["fees", "accounts"]])
    return model.sample(table_of(COUNTS, items), seed=SEED, progress=False)


def test_the_odds_ratio_of_one_class_is_that_of_the_table(one_class: Posterior) -> None:
    """Statsmodels.

    The mean of the log of a gamma variable with parameter n + 1/2 is log n but for 1 / (24 n^2)
    (the digamma function), and its variance 1 / n likewise: the posterior of the log odds ratio
    under Dirichlet(1/2, ...) has the table's own, with its usual standard error.
    """
    frame = one_class.conditional_dependence(interval=0.95).set_index("measure")
    table = Table2x2(COUNTS)
    error = 0.08 * table.log_oddsratio_se
    row = np.log(frame.loc["odds ratio", ["median", "lower", "upper"]].astype(float))
    assert row["median"] == pytest.approx(table.log_oddsratio, abs=error)
    low, high = table.log_oddsratio_confint(0.05)
    assert row["lower"] == pytest.approx(low, abs=3 * error)
    assert row["upper"] == pytest.approx(high, abs=3 * error)
    assert frame.loc["odds ratio", ["mean", "sd", "mcse"]].isna().all()
    assert frame["positive"].min() > 0.999


def test_covariance_and_correlation_have_the_conjugate_posterior(one_class: Posterior) -> None:
    """Dirichlet(n + 1/2), drawn by NumPy."""
    drawn = np.random.default_rng(SEED).dirichlet(COUNTS.ravel() + 0.5, size=100_000)
    yes = drawn[:, 2:].sum(axis=1), drawn[:, [1, 3]].sum(axis=1)
    covariance = drawn[:, 3] - yes[0] * yes[1]
    correlation = covariance / np.sqrt(yes[0] * (1 - yes[0]) * yes[1] * (1 - yes[1]))
    frame = one_class.conditional_dependence().set_index("measure")
    for name, exact in (("covariance", covariance), ("correlation", correlation)):
        row = frame.loc[name]
        assert abs(row["mean"] - exact.mean()) < 4 * row["mcse"]
        assert row["sd"] == pytest.approx(exact.std(), rel=0.06)


def test_joint_answers_have_the_conjugate_posterior(one_class: Posterior) -> None:
    frame = one_class.joint_answers()
    assert frame["joint_answer"].tolist()[1] == "fees=no, accounts=yes"
    exact = (COUNTS.ravel() + 0.5) / (COUNTS.sum() + 2)
    assert np.all(np.abs(frame["mean"] - exact) < 4 * frame["mcse"])
    alone = one_class.response_probabilities().query("item == 'accounts' and category == 'yes'")
    assert abs(alone["mean"].item() - exact[[1, 3]].sum()) < 4 * alone["mcse"].item()


def test_the_evidence_of_one_class_is_the_dirichlet_multinomials(one_class: Posterior) -> None:
    a = np.full(4, 0.5)
    n = COUNTS.ravel()
    exact = gammaln(a.sum()) - gammaln(a.sum() + n.sum()) + np.sum(gammaln(a + n) - gammaln(a))
    found = log_evidence(one_class)
    assert found.reliable
    assert found.log_evidence == pytest.approx(exact, rel=1e-12)


def test_a_quantity_of_joint_answers_and_what_they_say_of_the_class() -> None:
    items = tuple(Item(name, NO_YES, yes="yes") for name in ("fees", "accounts", "meets"))
    model = LatentClassModel(
        items,
        ("managed", "lapsed"),
        ("P(meets=yes | managed) ~ Beta(9, 2)",),
        answered_together=[AnsweredTogether(["accounts", "fees"], ["managed"])],
    )
    simulated = model.simulate(60, seed=SEED)
    posterior = model.sample(
        simulated.responses, seed=SEED, chains=2, draws=300, ess=200, progress=False
    )
    joint = posterior.joint_answers()
    assert set(joint["latent_class"]) == {"managed"}
    both = posterior.quantity("P(fees=yes, accounts=yes | managed)")
    row = joint[joint["joint_answer"] == "accounts=yes, fees=yes"].iloc[0]
    assert both.mean == pytest.approx(row["mean"], rel=1e-10)
    # Bayes' rule, draw by draw, from the tables' own draws
    members = posterior.membership(rows="patterns").query(
        "fees == 'yes' and accounts == 'yes' and meets == 'yes'"
    )
    found = posterior.quantity("P(managed | fees=yes, accounts=yes, meets=yes)")
    assert found.mean == pytest.approx(members["probability_managed"].item(), rel=1e-6)
    independent = posterior.quantity("P(fees=yes, accounts=yes | lapsed)")
    apart = posterior.quantity("P(fees=yes | lapsed) * P(accounts=yes | lapsed)")
    assert independent.mean == pytest.approx(apart.mean, rel=1e-10)


def test_no_set_no_rows() -> None:
    items = (Item("fees", NO_YES), Item("accounts", NO_YES))
    posterior = LatentClassModel(items, 1).sample(
        table_of(COUNTS, items), seed=SEED, chains=2, draws=200, ess=200, progress=False
    )
    assert posterior.joint_answers().empty
    assert posterior.conditional_dependence().empty


def test_ordered_answers_agree_or_disagree_and_unordered_ones_are_left_out() -> None:
    items = (
        Item("fees", NO_YES),
        Item("trust", ("low", "middle", "high"), ordered=True),
        Item("type", ("well", "spring", "tank")),
    )
    model = LatentClassModel(items, 1, answered_together=[["type", "trust", "fees"]])
    counts = np.random.default_rng(SEED).integers(5, 30, size=(2, 3, 3))
    posterior = model.sample(
        table_of(counts, items), seed=SEED, chains=2, draws=300, ess=300, progress=False
    )
    frame = posterior.conditional_dependence()
    assert frame[["item_1", "item_2"]].drop_duplicates().values.tolist() == [["trust", "fees"]]
    two_way = counts.sum(axis=2)  # fees by trust
    agree = two_way[0, 0] * two_way[1, 1:].sum() + two_way[0, 1] * two_way[1, 2]
    disagree = two_way[1, 0] * two_way[0, 1:].sum() + two_way[1, 1] * two_way[0, 2]
    median = frame.set_index("measure").loc["odds ratio", "median"]
    assert np.log(median) == pytest.approx(np.log(agree / disagree), abs=0.1)


def test_each_measure_has_its_own_probability_of_more_than_by_chance() -> None:
    """Dirichlet(n + 1), drawn by NumPy: agreeing pairs and covariance need not go along."""
    items = tuple(
        Item(name, ("never", "seldom", "always"), ordered=True) for name in ("visits", "phones")
    )
    counts = np.array([[120, 60, 20], [40, 60, 0], [20, 0, 0]])
    together = AnsweredTogether(["visits", "phones"], prior=1.0)
    model = LatentClassModel(items, 1, answered_together=[together])
    posterior = model.sample(table_of(counts, items), seed=SEED, progress=False)
    p = np.random.default_rng(SEED).dirichlet(counts.ravel() + 1.0, 100_000).reshape(-1, 3, 3)
    pairs = [(a, b, c, d) for a, b, c, d in np.ndindex(3, 3, 3, 3) if a < c]
    agree = sum(p[:, a, b] * p[:, c, d] for a, b, c, d in pairs if b < d)
    disagree = sum(p[:, a, b] * p[:, c, d] for a, b, c, d in pairs if b > d)
    score = np.arange(3)
    covariance = np.einsum("nab,a,b->n", p, score, score) - (p.sum(axis=2) @ score) * (
        p.sum(axis=1) @ score
    )
    found = posterior.conditional_dependence().set_index("measure")["positive"]
    exact = {"odds ratio": (agree > disagree).mean(), "covariance": (covariance > 0).mean()}
    assert abs(exact["odds ratio"] - exact["covariance"]) > 0.2
    for measure, probability in exact.items():
        assert found[measure] == pytest.approx(probability, abs=4 * np.sqrt(0.25 / 4000))


def test_parameters_of_joint_answers_are_given_as_a_table() -> None:
    items = tuple(Item(name, NO_YES) for name in ("fees", "accounts", "meets"))
    model = LatentClassModel(
        items,
        ("managed", "lapsed"),
        ("P(meets=yes | managed) ~ Beta(9, 2)",),
        answered_together=[AnsweredTogether(["fees", "accounts"], ["managed"])],
    )
    alone = {
        "fees": {"lapsed": 0.2},
        "accounts": {"lapsed": 0.1},
        "meets": {"managed": 0.9, "lapsed": 0.3},
    }
    joint = [[0.2, 0.1], [0.15, 0.55]]
    parameters = parameters_from(
        model, [1.0, 0.0], alone, {("fees", "accounts"): {"managed": joint}}
    )
    codes = model.simulate(20_000, seed=SEED, parameters=parameters).responses.codes
    observed = np.bincount(2 * codes[:, 0] + codes[:, 1], minlength=4) / 20_000
    np.testing.assert_allclose(observed, np.ravel(joint), atol=4 * 0.5 / np.sqrt(20_000))
    with pytest.raises(ModelError, match="joint_answers has no entry"):
        parameters_from(model, [1.0, 0.0], alone)
    with pytest.raises(ModelError, match=r"needs an axis for each item, \(2, 2\)"):
        parameters_from(
            model, [1.0, 0.0], alone, {("fees", "accounts"): {"managed": [0.2, 0.1, 0.15, 0.55]}}
        )
