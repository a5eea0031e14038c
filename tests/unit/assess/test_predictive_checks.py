"""Posterior predictive checks: their tables, p-values and words."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.fit.calibrated_p import simulated_responses
from bayeslca.assess.fit.posterior_p import posterior_p, two_sided_p
from bayeslca.assess.fit.predictive_checks import PredictiveChecks, predictive_checks
from bayeslca.assess.fit.predictive_tables import CHECKS, freeman_tukey
from bayeslca.assess.fit.predictive_words import judged_p, p_text
from bayeslca.assess.fit.replicates import Both, spread_draws
from bayeslca.exceptions import BayesLCAError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.simulate import Parameters
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled

YES = [Item(f"item_{j + 1}", ("no", "yes"), yes="yes") for j in range(4)]
DISTRICT = Groups("district", ("north", "south"))
OVERALL = ["check", "observed", "expected", "lower", "upper", "p", "p_mcse"]


def at_known(
    model: LatentClassModel, responses: Responses, elements: Any, prevalence: Any
) -> Posterior:
    """Make a posterior that knows its parameters."""
    shape = (4, 100)
    prevalence = np.atleast_2d(np.asarray(prevalence, float))
    draws = Draws(
        elements=np.broadcast_to(np.asarray(elements, float), (*shape, len(elements))),
        prevalence=np.broadcast_to(prevalence, (*shape, *prevalence.shape)),
        log_likelihood=np.zeros(shape),
        log_prior=np.zeros(shape),
    )
    same = np.broadcast_to(np.arange(model.n_classes), (*shape, *prevalence.shape))
    return Posterior(model, responses, Relabelled(draws, same))


def answers(items: Any, codes: Any, group: Any = None, groups: Groups | None = None) -> Responses:
    codes = np.asarray(codes, dtype=np.int16)
    group_codes = None if group is None else np.asarray(group, dtype=np.int32)
    return Responses(
        tuple(items),
        codes,
        np.ones(len(codes), dtype=np.int64),
        groups=groups,
        group_codes=group_codes,  # type: ignore[arg-type]
    )


def independent(n: int = 120, seed: int = 3, dependent: bool = False) -> Any:
    """Four yes/no items of one class; the last two nearly always alike where asked for."""
    codes = np.random.default_rng(seed).integers(2, size=(n, 4))
    if dependent:
        codes[: int(0.8 * n), 3] = codes[: int(0.8 * n), 2]
    return codes


def one_class(codes: Any, **more: Any) -> PredictiveChecks:
    model = LatentClassModel(tuple(YES), 1)
    return predictive_checks(at_known(model, answers(YES, codes), [0.5] * 8, [1.0]), **more)


@pytest.fixture(scope="module")
def fits() -> PredictiveChecks:
    return one_class(independent())


@pytest.fixture(scope="module")
def misfits() -> PredictiveChecks:
    return one_class(independent(dependent=True))


@pytest.fixture(scope="module")
def grouped() -> PredictiveChecks:
    codes = independent()
    codes[:60, 0] = 1
    codes[5, 1:3] = -1
    model = LatentClassModel(tuple(YES), 1, groups=DISTRICT)
    responses = answers(YES, codes, [0] * 60 + [1] * 60, DISTRICT)
    return predictive_checks(at_known(model, responses, [0.5] * 8, [[1.0], [1.0]]))


def test_every_check_has_a_row(fits: PredictiveChecks) -> None:
    assert list(fits.overall.columns) == OVERALL
    assert list(fits.overall["check"]) == list(CHECKS)
    assert fits.overall.attrs["interval"] == 0.95
    assert fits.overall["p"].between(0, 1).all()
    assert (fits.overall["p_mcse"] > 0).all()
    assert fits.replicates == 400  # all draws that were kept
    assert len(fits.margins) == 8
    assert len(fits.pairs) == 6
    assert len(fits.sum_scores) == 5


def test_a_true_model_is_said_to_reproduce_the_answers(fits: PredictiveChecks) -> None:
    assert fits.reproduces
    assert fits.verdict.startswith("The model reproduces the answers in all 7 checks (smallest")
    assert not [finding for finding in fits.findings if finding.level == "warning"]


def test_a_dependent_pair_is_named_with_its_numbers(misfits: PredictiveChecks) -> None:
    assert not misfits.reproduces
    assert misfits.verdict.startswith("The model does not reproduce")
    assert "item_3 and item_4 go together more than the classes explain" in misfits.verdict
    (pair,) = [finding for finding in misfits.findings if finding.kind == "pair_missed"]
    assert pair.about == ("item_3", "item_4")
    assert pair.level == "warning"
    assert "one more class" in pair.remedy
    assert 'answered_together = [["item_3", "item_4"]]' in pair.remedy
    assert pair.value is not None
    row = misfits.pairs.query("item_1 == 'item_3' and item_2 == 'item_4'").iloc[0]
    assert row["pair_residual"] == pytest.approx(pair.value)
    assert row["pair_residual"] > 5
    assert row["odds_ratio"] > row["odds_ratio_upper"]
    assert row["p"] == 0.0
    assert row["p_mcse"] > 0
    assert "p below 0.003" in pair.message
    assert misfits.pairs["p"].drop(row.name).min() > 0.001


def test_a_pair_that_goes_together_less_is_said_so() -> None:
    codes = independent()
    codes[:, 1] = 1 - codes[:, 0]
    found = one_class(codes)
    assert "item_1 and item_2 go together less than" in found.verdict
    assert "pair residual −" in found.verdict
    assert found.overall.set_index("check").loc["item_pairs", "p"] == 0.0


def test_observed_counts_are_the_data(fits: PredictiveChecks) -> None:
    codes = independent()
    margins = fits.margins.set_index(["item", "category"])
    assert margins.loc[("item_2", "yes"), "observed"] == codes[:, 1].sum()
    assert margins.loc[("item_2", "yes"), "expected"] == pytest.approx(60.0)
    error = (codes[:, 1].sum() - 60) / np.sqrt(120 / 4)
    assert margins.loc[("item_2", "yes"), "residual"] == pytest.approx(error)
    assert fits.sum_scores["observed"].tolist() == np.bincount(codes.sum(axis=1)).tolist()
    assert fits.pairs["cases"].tolist() == [120] * 6


def test_patterns_stand_with_their_binomial_tail(fits: PredictiveChecks) -> None:
    from scipy.stats import binom

    frame = fits.patterns
    assert frame["observed"].sum() == 120
    assert frame["expected"].unique() == pytest.approx([120 / 16])
    assert frame["residual"].is_monotonic_decreasing
    top = frame.iloc[0]
    assert top["p"] == pytest.approx(binom.sf(top["observed"] - 1, 120, 1 / 16))


def test_groups_have_rows_of_their_own(grouped: PredictiveChecks) -> None:
    assert list(grouped.overall.columns) == ["check", "group", *OVERALL[1:]]
    assert list(grouped.overall["group"].unique()) == ["north", "south", "overall"]
    first = grouped.margins.query("item == 'item_1' and category == 'yes'").set_index("group")
    assert first.loc["north", "observed"] == 60
    assert first.loc["north", "p"] == 0.0
    assert first.loc["south", "p"] > 0.01
    pair = grouped.pairs.query("item_1 == 'item_2' and item_2 == 'item_3'").set_index("group")
    assert pair["cases"].tolist() == [59, 60, 119]
    missed = [finding for finding in grouped.findings if finding.kind == "group_missed"]
    assert any(finding.about[0] == "north" for finding in missed)
    assert not any(finding.about[0] == "south" for finding in missed)
    assert "free_by_group" in missed[0].remedy
    assert "group" in grouped.patterns


def test_what_every_group_misses_is_not_laid_on_groups() -> None:
    codes = independent(dependent=True)
    codes[:, 3] = codes[:, 2]
    model = LatentClassModel(tuple(YES), 1, groups=DISTRICT)
    responses = answers(YES, codes, [0, 1] * 60, DISTRICT)
    found = predictive_checks(at_known(model, responses, [0.5] * 8, [[1.0], [1.0]]))
    pairs = found.overall[found.overall["check"] == "item_pairs"]
    assert (pairs["p"] == 0).all()
    assert not [f for f in found.findings if f.kind == "group_missed" and "item_pairs" in f.about]


def test_a_missed_item_is_named(grouped: PredictiveChecks) -> None:
    (item,) = [finding for finding in grouped.findings if finding.kind == "item_missed"]
    assert item.about == ("item_1",)
    assert item.message.startswith("item_1: 60 cases in north answered yes, where the model")


def test_missing_answers_are_mentioned_where_something_is_missed(
    grouped: PredictiveChecks, misfits: PredictiveChecks
) -> None:
    (note,) = [f for f in grouped.findings if f.kind == "replicates_keep_missing"]
    assert note.value == 2
    assert "the same 2 answers" in note.message
    assert not [f for f in misfits.findings if f.kind == "replicates_keep_missing"]


def test_a_pattern_is_named_only_where_several_cases_gave_it() -> None:
    items = [Item(f"item_{j}", ("no", "yes")) for j in range(12)]
    codes = np.random.default_rng(1).integers(2, size=(60, 12))
    model = LatentClassModel(tuple(items), 1)

    def named(times: int) -> list[str]:
        codes[:times] = 1
        posterior = at_known(model, answers(items, codes), [0.5] * 24, [1.0])
        found = predictive_checks(posterior).findings
        return [finding.message for finding in found if finding.kind == "pattern_missed"]

    assert named(4) == []  # significant, but four cases could be known
    (message,) = named(5)
    assert message.startswith("5 cases gave the pattern item_0=yes, item_1=yes")


def test_one_item_has_no_pairs_and_no_sum_score() -> None:
    model = LatentClassModel((YES[0],), 1)
    codes = independent()[:, :1]
    found = predictive_checks(at_known(model, answers(YES[:1], codes), [0.5, 0.5], [1.0]))
    assert not {"item_pairs", "sum_scores"} & set(found.overall["check"])
    assert found.pairs.empty
    assert found.sum_scores.empty
    assert "pair" not in found.verdict
    assert found.reproduces


def test_unordered_items_have_residuals_but_no_odds_ratio() -> None:
    items = [Item(name, ("pump", "well", "spring")) for name in ("first", "second")]
    codes = np.random.default_rng(1).integers(3, size=(90, 2))
    codes[:60, 1] = codes[:60, 0]
    model = LatentClassModel(tuple(items), 1)
    found = predictive_checks(at_known(model, answers(items, codes), [1 / 3] * 6, [1.0]))
    assert found.pairs["odds_ratio"].isna().all()
    assert found.pairs["pair_residual"].iloc[0] > 5
    assert found.sum_scores.empty
    assert "first and second go together otherwise than" in found.verdict
    assert "odds ratio" not in found.verdict


def test_the_same_seed_gives_the_same_tables() -> None:
    one, two, other = (one_class(independent(), seed=seed).overall for seed in (1, 1, 2))
    pd.testing.assert_frame_equal(one, two)
    assert not one["p"].equals(other["p"])


def test_the_posterior_hands_over_to_it() -> None:
    model = LatentClassModel(tuple(YES), 1)
    posterior = at_known(model, answers(YES, independent()), [0.5] * 8, [1.0])
    found = posterior.predictive_checks(seed=4, replicates=200, interval=0.8)
    assert (found.seed, found.replicates, found.calibrated_in) == (4, 200, 0)
    assert found.margins.attrs["interval"] == 0.8
    pd.testing.assert_frame_equal(
        found.overall, one_class(independent(), seed=4, replicates=200, interval=0.8).overall
    )


def test_it_shows_itself(misfits: PredictiveChecks) -> None:
    text = repr(misfits)
    assert max(map(len, text.splitlines())) <= 80
    assert "pairs of items" in text
    assert "- warning: " in text
    assert "<table>" in misfits._repr_html_()


@pytest.mark.parametrize(
    "options",
    [{"replicates": 0}, {"calibrate": -1}, {"calibrate_from": "data"}, {"interval": 1.0}],
)
def test_wrong_options_are_refused(options: dict[str, Any]) -> None:
    with pytest.raises(BayesLCAError, match=next(iter(options))):
        one_class(independent(), **options)


def test_p_is_a_share_of_replicates_with_its_error() -> None:
    rng = np.random.default_rng(6)
    both = Both(np.zeros((1, 2)), rng.normal([0.5, 40.0], 1.0, size=(1000, 2)))
    found = posterior_p(both, (4, 250))
    assert found.p[0] == (both.replicated[:, 0] >= 0).mean()
    binomial = np.sqrt(found.p[0] * (1 - found.p[0]) / 1000)
    assert binomial * 0.95 < found.mcse[0] < 1.3 * binomial
    assert found.p[1] == 1.0
    assert 0.0005 < found.mcse[1] < 0.001


def test_the_error_knows_of_draws_that_hang_together() -> None:
    rng = np.random.default_rng(6)
    slow = np.repeat(rng.normal(size=(4, 25)), 10, axis=1).reshape(1000, 1)
    found = posterior_p(Both(np.zeros((1, 1)), slow), (4, 250))
    assert found.mcse[0] > 2 * np.sqrt(found.p[0] * (1 - found.p[0]) / 1000)


def test_a_two_sided_p_is_small_at_both_ends() -> None:
    replicated = np.random.default_rng(6).normal(10, 1, size=(400, 1))
    low, middle, high = (
        two_sided_p(Both(np.full((1, 1), at), replicated), (4, 100)).p[0]
        for at in (7.0, 10.0, 13.0)
    )
    assert max(low, high) < 0.02
    above = (replicated >= 11.0).mean()
    assert two_sided_p(Both(np.full((1, 1), 11.0), replicated), (4, 100)).p[0] == 2 * above
    assert middle > 0.9


def test_freeman_tukey_is_nought_where_counts_are_as_expected() -> None:
    assert freeman_tukey(np.array([4.0, 9.0]), np.array([4.0, 9.0])) == 0.0
    assert freeman_tukey(np.array([4.0, 0.0]), np.array([1.0, 1.0])) == pytest.approx(8.0)


def test_draws_are_spread_over_the_chains() -> None:
    assert spread_draws(1000, 4, 1000).tolist()[:2] == [0, 4]
    assert spread_draws(1000, 4, 1000).size == 250
    assert spread_draws(10, 4, 1000).tolist() == list(range(10))


def test_a_p_of_nought_is_shown_as_a_bound() -> None:
    assert p_text(0.0, 1000) == "below 0.001"
    assert p_text(0.0123, 1000) == "0.012"
    assert p_text(0.42, 1000) == "0.42"


def test_simulated_studies_keep_cases_groups_and_missing_answers() -> None:
    codes = independent()
    codes[::7, 2] = -1
    codes[3] = -1
    model = LatentClassModel(tuple(YES), 2, groups=DISTRICT)
    responses = answers(YES, codes, [0] * 50 + [1] * 70, DISTRICT)
    sure = Parameters(np.array([0.0, 1.0, 1.0, 0.0] * 4), np.array([[1.0, 0.0], [0.0, 1.0]]))
    drawn = simulated_responses(model, responses, sure, np.random.default_rng(1))
    assert np.array_equal(drawn.codes < 0, codes < 0)
    assert np.array_equal(drawn.group_codes, responses.group_codes)
    north = drawn.codes[:50]
    assert set(north[north >= 0].tolist()) == {1}
    south = drawn.codes[50:]
    assert set(south[south >= 0].tolist()) == {0}


@pytest.mark.parametrize("source", ["posterior", "prior"])
def test_calibrated_p_values_are_ranks_among_simulated_studies(source: Any) -> None:
    seen: list[tuple[int, int]] = []
    found = one_class(
        independent(dependent=True),
        calibrate=3,
        calibrate_from=source,
        progress=lambda *at: seen.append(at),
    )
    assert seen == [(0, 3), (1, 3), (2, 3), (3, 3)]
    assert found.calibrated_in == 3
    p = found.overall.set_index("check")["p_calibrated"]
    assert set(p) <= {0.25, 0.5, 0.75, 1.0}
    assert p["item_pairs"] == 0.25  # smaller than all three
    assert not found.reproduces  # three studies cannot make it small: p itself does
    assert "pairs of items (posterior predictive p below 0.003)" in found.verdict


def test_a_calibrated_p_is_the_one_that_is_judged() -> None:
    assert judged_p({"p": 0.3, "p_calibrated": 0.02}) == 0.02
    assert judged_p({"p": 0.3}) == 0.3
