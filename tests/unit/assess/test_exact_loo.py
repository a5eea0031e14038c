"""Refits without cases: which are done, reproducible, stopped cleanly, refused in words."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.comparison.compare import FitProgress, compare, compare_class_counts
from bayeslca.assess.left_out import exact_loo, refits
from bayeslca.assess.left_out.exact_loo import leave_one_out
from bayeslca.assess.left_out.folds import (
    fold_counts,
    group_standard_error,
    k_fold,
    leave_one_group_out,
)
from bayeslca.assess.left_out.one_case_bridge import one_case_bridge
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses
from bayeslca.sampling.progress import Progress

SEED = 20261222
QUICK: dict[str, Any] = {"draws": 300, "ess": 200, "r_hat": 1.05, "progress": False}
ITEMS = ["fees", "accounts", "fenced", "meets", "mechanic", "tests_water", "gate", "drain"]


@cache
def responses(grouped: bool = False, odd: bool = True) -> Responses:
    rows = [["yes"] * 8] * 8 + [["no"] * 8] * 8 + [["yes", "no"] * 4] * odd
    frame = pd.DataFrame(rows, columns=ITEMS)
    frame["district"] = ["north", "south"] * 8 + ["south"] * odd
    group = "district" if grouped else None
    return Responses.from_frame(frame, items=ITEMS, group=group)


@cache
def posterior(grouped: bool = False) -> Posterior:
    data = responses(grouped)
    statements = [f"P({name}=yes | .) ~ Beta(0.3, 0.3)" for name in ITEMS]
    model = LatentClassModel(data.items, 2, statements=statements, groups=data.groups)
    return model.sample(data, seed=SEED, **QUICK)


def test_the_odd_case_is_refitted_unasked_and_the_same_on_any_number_of_threads() -> None:
    one = leave_one_out(posterior(), progress=False, threads=1)
    two = leave_one_out(posterior(), progress=False, threads=2)
    assert one.table["refitted"].sum() == one.loo.n_refitted == 1
    assert one.table.loc[one.table["refitted"], "count"].tolist() == [1]
    assert np.array_equal(one.loo.pointwise, two.loo.pointwise)
    assert one.psis.n_unreliable == 1
    assert one.loo.n_unreliable == 0
    assert "1 pattern was refitted without one of its cases" in one.verdict
    other = leave_one_out(posterior(), progress=False, seed=SEED + 1)
    assert other.loo.elpd != one.loo.elpd
    assert other.loo.elpd == pytest.approx(one.loo.elpd, abs=4 * np.hypot(0.2, 0.2))
    none = leave_one_out(posterior(), exact=False)
    assert none.loo.elpd == none.psis.elpd
    assert none.loo.n_refitted == 0


def test_all_refits_are_as_precise_as_they_say() -> None:
    found = leave_one_out(posterior(), exact=True, progress=False)
    assert found.table["refitted"].all()
    assert found.loo.mcse == pytest.approx(
        np.hypot(
            refits.mcse_of_mean(
                sum(found.loo.counts[u] * one.given for u, one in found.refits.items())
            ),
            np.sqrt(sum((found.loo.counts[u] * r.mcse[0]) ** 2 for u, r in found.refits.items())),
        )
    )
    assert "All 3 patterns were refitted" in found.verdict


def test_at_most_a_few_are_refitted_unasked(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(exact_loo, "FEW", 1)
    poor = replace(posterior_psis(), pareto_k=np.array([0.9, 1.2, 0.8]))
    which, words = exact_loo._to_refit(posterior(), poor, None)
    assert which.tolist() == [1]
    assert "3 patterns have poor importance weights; the worst 1 were refitted" in words


def posterior_psis() -> Any:
    return leave_one_out(posterior(), exact=False).psis


def test_models_without_exact_steps_say_why(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: Any) -> None:
        msg = "prevalences come from Regression, for which there is no exact step. Use NUTS."
        raise SamplingError(msg)

    monkeypatch.setattr(refits, "make_task", refuse)
    found = leave_one_out(posterior(), progress=False)
    assert found.loo.n_refitted == 0
    assert found.loo.n_unreliable == 1
    assert "refits need the Gibbs sampler, and prevalences come from Regression" in found.verdict
    with pytest.raises(SamplingError, match="exact leave-one-out cannot be done here: refits need"):
        leave_one_out(posterior(), exact=True)
    with pytest.raises(SamplingError, match="folds cannot be left out here"):
        k_fold(posterior())
    comparison = compare({"a": posterior()}, folds=3, progress=False)
    assert comparison.folds is not None
    assert "Regression" in comparison.folds.no_refit["a"]
    (high,) = [f for f in comparison.findings if f.kind == "pareto_k_high"]
    assert "Regression" in high.message


def test_progress_counts_all_refits_and_ctrl_c_stops_them() -> None:
    seen: list[Progress] = []
    leave_one_out(posterior(), exact=True, progress=seen.append)
    assert seen
    assert seen[-1].sweeps == seen[-1].planned  # nothing is left at the end
    assert all(one.sweeps <= one.planned for one in seen)

    def stop(_: Progress) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        leave_one_out(posterior(), exact=True, progress=stop)


def test_comparison_says_how_many_were_refitted() -> None:
    seen: list[FitProgress] = []
    fitted = {2: posterior()}
    found = compare_class_counts(
        responses(), [1, 2], fitted=fitted, seed=1, folds=4, **{**QUICK, "progress": seen.append}
    )
    assert found.table["refitted"].tolist() == [0, 1]
    assert found.table.loc[2, "pareto_k_high"] == 0
    (note,) = [f for f in found.findings if f.kind == "refitted"]
    assert "1 of two classes" in note.message
    assert {one.name for one in seen if one.refitting} == {1, 2}
    assert found.folds is not None
    assert found.folds.table["elpd_diff"].max() == 0
    assert "two classes predicted best; next one class" in found.folds.verdict
    assert found.folds.left_out[1].counts.sum() == responses().n_cases


@pytest.mark.parametrize("folds", [2, 5, 17])
def test_folds_deal_out_every_case_once_and_each_group_evenly(folds: int) -> None:
    units = responses(grouped=True).units
    counts = fold_counts(units, folds, SEED)
    assert np.array_equal(counts.sum(axis=0), units.count)
    assert np.ptp(counts.sum(axis=1)) <= 1
    for g in (0, 1):
        assert np.ptp(counts[:, units.group == g].sum(axis=1)) <= 1
    assert np.array_equal(counts, fold_counts(units, folds, SEED))
    if folds < 17:
        assert not np.array_equal(counts, fold_counts(units, folds, SEED + 1))


def test_a_model_that_pools_groups_is_left_out_by_the_responses_groups() -> None:
    data = responses(grouped=True)
    pooled = LatentClassModel(data.items, 1).sample(data, seed=SEED, **QUICK)
    found = leave_one_group_out(pooled, progress=False)
    assert found.table["cases"].tolist() == [8, 9]
    assert "prior" not in found.meaning
    assert "not leave-one-case-out" in found.meaning
    assert np.isnan(found.se)
    assert "±" not in found.verdict
    assert group_standard_error(np.array([-4.0, -8.0, -12.0]), np.array([2, 4, 6])) == 0.0


def test_what_cannot_be_left_out_is_refused() -> None:
    with pytest.raises(ModelError, match="folds=18 for 17 cases"):
        k_fold(posterior(), 18)
    with pytest.raises(ModelError, match="no two groups of cases"):
        leave_one_group_out(posterior())
    frame = pd.DataFrame({"fees": ["yes"], "meets": ["no"]})
    spec = [{"name": n, "categories": ["no", "yes"]} for n in ("fees", "meets")]
    del spec
    two = Responses.from_frame(pd.concat([frame, 1 - (frame == "yes")]).astype(str), items=["fees"])
    alone = replace(
        two, codes=two.codes[:1], counts=two.counts[:1], group_codes=two.group_codes[:1]
    )
    single = LatentClassModel(alone.items, 1).sample(alone, seed=SEED, **QUICK)
    with pytest.raises(SamplingError, match="no case left"):
        leave_one_out(single, exact=True)


def test_bridge_of_two_known_densities() -> None:
    # p = exp(x) with x standard normal without the case: with it, x is normal of mean 1, and the
    # mean of p is exp(1/2) (moment generating function).
    rng = np.random.default_rng(SEED)
    without, given = rng.normal(size=(4, 5000)), rng.normal(1.0, size=(4, 5000))
    found = one_case_bridge(without, given)
    error = np.hypot(found.without.std(), found.given.std()) / np.sqrt(without.size)
    assert abs(found.log_density - 0.5) < 4 * error
    assert error < 0.02
    assert found.least_draws > 1000
    shift = one_case_bridge(without - 400.0, given - 400.0)  # tiny densities do not underflow
    assert shift.log_density == pytest.approx(found.log_density - 400.0)
