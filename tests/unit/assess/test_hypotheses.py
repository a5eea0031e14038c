"""Hypotheses against closed forms: one class, where every Bayes factor is known exactly."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.stats import beta, betabinom

from bayeslca.assess.hypothesis.order_probability import forest, log_probability
from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

N, FEES, ACCOUNTS, MEETS = 60, 17, 30, 28
FEES_PRIOR = (2.0, 3.0)


def binary(*names: str) -> list[ItemSpec]:
    return [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in names]


def answers(**yes: int) -> Responses:
    frame = pd.DataFrame({item: ["yes"] * n + ["no"] * (N - n) for item, n in yes.items()})
    return Responses.from_frame(frame, items=binary(*yes))


@pytest.fixture(scope="module")
def one_class() -> Posterior:
    responses = answers(fees=FEES, accounts=ACCOUNTS, meets=MEETS)
    model = LatentClassModel(responses.items, ["all"], ["P(fees=yes | all) ~ Beta(2, 3)"])
    return model.sample(responses, seed=1, progress=False)


@pytest.mark.parametrize("bound", [0.05, 0.1, 0.3, 0.5, 0.6, 0.7, 0.8])
def test_one_beta_over_many_orders_of_magnitude(one_class: Posterior, bound: float) -> None:
    # Bayes factors from 1.9e-17 to 5e9 (against the complement), all by regularised beta functions.
    found = one_class.test(f"P(fees=yes | all) > {bound}")
    before, after = beta(*FEES_PRIOR), beta(FEES_PRIOR[0] + FEES, FEES_PRIOR[1] + N - FEES)
    assert found.prior_probability == pytest.approx(before.sf(bound), rel=1e-12)
    assert found.posterior_probability == pytest.approx(after.sf(bound), rel=1e-9)
    assert found.log_bayes_factor == pytest.approx(after.logsf(bound) - before.logsf(bound))
    odds = after.logsf(bound) - after.logcdf(bound) - before.logsf(bound) + before.logcdf(bound)
    assert found.log_bayes_factor_against_complement == pytest.approx(odds)
    assert found.log_bayes_factor_mcse < 1e-9


def test_two_betas_in_order(one_class: Posterior) -> None:
    found = one_class.test("P(fees=yes | all) > P(accounts=yes | all)")
    fees = beta(FEES_PRIOR[0] + FEES, FEES_PRIOR[1] + N - FEES)
    accounts = beta(1 + ACCOUNTS, 1 + N - ACCOUNTS)
    after = quad(lambda x: fees.pdf(x) * accounts.cdf(x), 0, 1, epsabs=0, epsrel=1e-10)[0]
    assert found.posterior_probability == pytest.approx(after, rel=1e-3)
    assert found.prior_probability == pytest.approx(0.4, rel=1e-4)  # P(Beta(2, 3) > U) = 2 / 5


def test_chain_of_three_under_one_prior_has_one_sixth_before() -> None:
    responses = answers(fees=FEES, accounts=ACCOUNTS, meets=MEETS)
    posterior = LatentClassModel(responses.items, ["all"]).sample(
        responses, seed=1, draws=500, progress=False
    )
    found = posterior.test(
        "P(accounts=yes | all) > P(meets=yes | all) > P(fees=yes | all)",
        "P(accounts=yes | all) > P(fees=yes | all)",  # implied by the chain: changes nothing
    )
    assert found.prior_probability == pytest.approx(1 / 6, rel=1e-6)
    rng = np.random.default_rng(3)
    a, m, f = (rng.beta(1 + n, 1 + N - n, 400_000) for n in (ACCOUNTS, MEETS, FEES))
    share = np.mean((a > m) & (m > f))
    assert found.posterior_probability == pytest.approx(share, abs=5 * (share / 400_000) ** 0.5)


def test_equality_with_a_number_is_the_ratio_of_densities(one_class: Posterior) -> None:
    found = one_class.test("P(fees=yes | all) = 0.3")
    after = beta(FEES_PRIOR[0] + FEES, FEES_PRIOR[1] + N - FEES).logpdf(0.3)
    assert found.log_bayes_factor == pytest.approx(after - beta(*FEES_PRIOR).logpdf(0.3))
    assert math.isnan(found.posterior_probability)
    assert math.isnan(found.prior_probability)
    assert found.log_bayes_factor_against_complement == found.log_bayes_factor


def test_equality_of_two_is_the_ratio_of_evidences(one_class: Posterior) -> None:
    # Rule 8: under equality the prior is Beta(2 + 1 - 1, 3 + 1 - 1) = Beta(2, 3).
    found = one_class.test("P(fees=yes | all) = P(accounts=yes | all)")

    def evidence(yes: int, n: int, a: float, b: float) -> float:
        return betabinom.logpmf(yes, n, a, b) - math.log(math.comb(n, yes))

    together = evidence(FEES + ACCOUNTS, 2 * N, 2, 3)
    apart = evidence(FEES, N, 2, 3) + evidence(ACCOUNTS, N, 1, 1)
    assert found.log_bayes_factor == pytest.approx(together - apart)


def test_equalities_and_orders_together(one_class: Posterior) -> None:
    # Rule 10: BF(E) x P(I | E, y) / P(I | E); the two speak of different blocks here.
    both = one_class.test("P(accounts=yes | all) = 0.5 and P(fees=yes | all) < 0.5")
    one, two = (one_class.test(t) for t in both.text.split(" and "))
    assert both.log_bayes_factor == pytest.approx(one.log_bayes_factor + two.log_bayes_factor)
    assert math.isnan(both.prior_probability)


def test_statement_of_several_is_the_same_as_and(one_class: Posterior) -> None:
    texts = ("P(fees=yes | all) < 0.4", "P(meets=yes | all) < 0.5")
    assert (
        one_class.test(*texts).log_bayes_factor
        == one_class.test(" and ".join(texts)).log_bayes_factor
    )


def test_difference_is_counted(one_class: Posterior) -> None:
    found = one_class.test("P(accounts=yes | all) - P(fees=yes | all) > 0.1")
    rng = np.random.default_rng(5)
    fees = rng.beta(FEES_PRIOR[0] + FEES, FEES_PRIOR[1] + N - FEES, 400_000)
    share = np.mean(rng.beta(1 + ACCOUNTS, 1 + N - ACCOUNTS, 400_000) - fees > 0.1)
    assert found.method == "counted"
    assert 0 < found.posterior_mcse < 0.01
    assert found.posterior_probability == pytest.approx(share, abs=5 * found.posterior_mcse)


def test_weighed_agrees_with_counted_draws(one_class: Posterior) -> None:
    # The same claim, once as an order and once as a difference, goes through different code.
    weighed = one_class.test("P(accounts=yes | all) > P(meets=yes | all)")
    counted = one_class.test("P(accounts=yes | all) - P(meets=yes | all) > 0")
    assert (weighed.method, counted.method) == ("weighed", "counted")
    assert weighed.posterior_probability == pytest.approx(
        counted.posterior_probability, abs=4 * counted.posterior_mcse
    )
    assert weighed.prior_probability == pytest.approx(0.5, rel=1e-6)
    assert counted.prior_probability == pytest.approx(0.5, abs=4 * counted.prior_mcse)


def test_too_few_draws_give_a_bound_not_a_number(one_class: Posterior) -> None:
    found = one_class.test("P(fees=yes | all) - P(meets=yes | all) > 0.2")  # about 5e-6
    assert found.bound == "below"
    assert found.log_bayes_factor < math.log(0.05)
    assert "Bayes factor below" in repr(found)
    fees = beta(FEES_PRIOR[0] + FEES, FEES_PRIOR[1] + N - FEES)
    meets = beta(1 + MEETS, 1 + N - MEETS)
    exact = quad(lambda x: fees.pdf(x) * meets.cdf(x - 0.2), 0.2, 1, epsabs=0)[0]
    assert math.log(exact / found.prior_probability) < found.log_bayes_factor


def test_what_the_model_implies_is_true_by_definition(grouped_by_rule: Posterior) -> None:
    for text in ("P(fees=yes | managed) > P(fees=yes | lapsed)", "P(fees=yes | managed) >= 0"):
        found = grouped_by_rule.test(text)
        assert found.true_by_definition
        assert (found.posterior_probability, found.log_bayes_factor) == (1.0, 0.0)
        assert "no result" in repr(found)
    counted = grouped_by_rule.test("P(fees=yes | managed) - P(fees=yes | lapsed) > 0")
    assert counted.true_by_definition


@pytest.fixture(scope="module")
def grouped_by_rule() -> Posterior:
    rng = np.random.default_rng(8)
    kind = rng.random(60) < 0.5
    yes = rng.random((60, 3)) < np.where(kind[:, None], 0.85, 0.2)
    frame = pd.DataFrame(np.where(yes, "yes", "no"), columns=["fees", "accounts", "meets"])
    responses = Responses.from_frame(frame, items=binary("fees", "accounts", "meets"))
    model = LatentClassModel(
        responses.items, ["managed", "lapsed"], ["managed is where P(fees=yes) is highest"]
    )
    return model.sample(responses, seed=2, draws=500, ess=400, progress=False)


def test_order_named_by_a_rule_agrees_with_counting(grouped_by_rule: Posterior) -> None:
    text = "P(meets=yes | lapsed) {} P(accounts=yes | lapsed)"
    weighed = grouped_by_rule.test(text.format(">"))
    counted = grouped_by_rule.test(text.format("-") + " > 0")
    assert weighed.prior_probability == pytest.approx(0.5, rel=1e-6)
    assert counted.posterior_probability == pytest.approx(
        weighed.posterior_probability,
        abs=4 * np.hypot(weighed.posterior_mcse, counted.posterior_mcse),
    )


def test_a_predictive_value_is_counted_and_equals_the_prevalence_it_stands_for() -> None:
    # With known response probabilities P(a | fees=yes) = .9 p / (.9 p + .3 (1 - p)), which is above
    # one half just where p > 1/4 (Bayes' theorem), in each group and overall alike.
    rng = np.random.default_rng(8)
    frame = pd.DataFrame(
        {"fees": np.where(rng.random(80) < 0.45, "yes", "no"), "herd": ["A", "B"] * 40}
    )
    responses = Responses.from_frame(frame, items=binary("fees"), group="herd")
    model = LatentClassModel(
        responses.items,
        ("a", "b"),
        ("P(fees=yes | a) = 0.9", "P(fees=yes | b) = 0.3"),
        groups=responses.groups,
    )
    posterior = model.sample(responses, seed=2, progress=False)
    for where in ("herd=A", "overall"):
        found = posterior.test(f"P(a | fees=yes, {where}) > 0.5")
        same = posterior.test(f"P(a | {where}) > 0.25")
        assert found.method == "counted"
        error = math.hypot(found.posterior_mcse, same.posterior_mcse)
        assert abs(found.posterior_probability - same.posterior_probability) < 4 * error + 1e-12
        error = math.hypot(found.prior_mcse, same.prior_mcse)
        assert abs(found.prior_probability - same.prior_probability) < 4 * error + 1e-12
        p = posterior.prevalence_draws[..., 0]
        p = p[..., 0] if where == "herd=A" else p @ [0.5, 0.5]
        value = posterior.quantity(f"P(a | fees=yes, {where})").median
        assert value == pytest.approx(np.median(0.9 * p / (0.9 * p + 0.3 * (1 - p))), rel=1e-6)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("P(fees=yes | all)", "claims nothing"),
        ("P(fees=yes | all) ~ Beta(1, 1)", "claims nothing"),
        ("P(fees=yes | al) > 0.5", "near names: 'all'"),
        ("P(fees=yes | all) == 0.5", "="),
        ("P(fees=yes | all) > 50", "between 0 and 1"),
        ("P(fees=yes | all) - P(meets=yes | all) = 0", "equality cannot be tested"),
        ("P(all | fees=yes) = 0.5", "equality cannot be tested"),
    ],
)
def test_what_is_no_hypothesis_is_refused(one_class: Posterior, text: str, message: str) -> None:
    with pytest.raises(StatementError, match=message) as error:
        one_class.test(text)
    assert "^" in str(error.value)
    assert error.value.remedy


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("P(fees=yes | all) = 0", "prior density at 0 is 0"),
        ("P(fees=yes | all) = 1", "prior density at 1 is 0"),
        ("P(fees=yes | all) > 0.5 and P(fees=yes | all) < 0.4", "rules it out"),
    ],
)
def test_where_a_bayes_factor_has_no_meaning(one_class: Posterior, text: str, message: str) -> None:
    with pytest.raises(ModelError, match=message):
        one_class.test(text)


def test_what_the_data_rule_out_is_refused_by_case(one_class: Posterior) -> None:
    with pytest.raises(ModelError, match="28 cases gave answers that no class allows"):
        one_class.test("P(meets=yes | all) = 0")  # somebody meets


def test_it_reads_as_a_sentence(one_class: Posterior) -> None:
    text = repr(one_class.test("P(fees=yes | all) < 0.4"))
    assert text.startswith("P(fees=yes | all) < 0.4 has the probability 0.9")
    assert "against its opposite" in text
    assert "Kass & Raftery (1995)" in text


def test_renaming_classes_and_items_changes_nothing(grouped_by_rule: Posterior) -> None:
    responses = grouped_by_rule.responses
    names = {"fees": "dues", "accounts": "books", "meets": "sits"}
    frame = pd.DataFrame(
        {
            names[item.name]: np.array(item.categories)[responses.codes[:, j]]
            for j, item in enumerate(responses.items)
        }
    )
    renamed = Responses.from_frame(frame, items=binary(*names.values()))
    model = LatentClassModel(
        renamed.items, ["run", "left"], ["run is where P(dues=yes) is highest"]
    )
    other = model.sample(renamed, seed=2, draws=500, ess=400, progress=False)
    one = grouped_by_rule.test("P(meets=yes | managed) > 0.8")
    two = other.test("P(sits=yes | run) > 0.8")
    assert one.log_bayes_factor == two.log_bayes_factor


@pytest.mark.parametrize(
    ("one", "two"),
    [((10, 90), (60, 40)), ((5, 200), (30, 20)), ((200, 300), (250, 250)), ((0.5, 0.5), (0.5, 30))],
)
def test_order_of_two_betas_far_into_the_tail(
    one: tuple[float, float], two: tuple[float, float]
) -> None:
    # Down to 8e-22; by adaptive quadrature of SciPy. Elements: no, yes of each item.
    pair = BlockArrays(
        block_start=np.array([0, 2, 4]),
        element_prior=np.ones(4),
        element_lower=np.zeros(4),
        element_upper=np.ones(4),
        order_above=np.array([1]),
        order_below=np.array([3]),
    )
    exact = quad(
        lambda x: beta.pdf(x, *one) * beta.cdf(x, *two),
        0,
        1,
        epsabs=0,
        epsrel=1e-10,
        limit=2000,
        points=[one[0] / sum(one), two[0] / sum(two)],
    )[0]
    parameters = np.array([[one[1], one[0], two[1], two[0]]], dtype=float)
    orders = forest(pair)
    assert orders is not None
    assert np.exp(log_probability(orders, parameters))[0] == pytest.approx(exact, rel=3e-3)
