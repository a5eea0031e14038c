"""What the priors do: power scaling, weights, refits, and what is said of them."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy.stats import beta

from bayeslca.assess.priors.power_scaling import SENSITIVE
from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity
from bayeslca.assess.priors.words import best_known
from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

SEED = 51
ITEMS = ["fees", "accounts", "meets", "mechanic"]
QUICK = {"seed": SEED, "draws": 500, "progress": False}
PRIORS = ("P(fees=yes | managed) ~ Beta(40, 4)", "P(accounts=yes | lapsed) ~ Beta(1, 9)")


def table(n: int = 80) -> Responses:
    """Two kinds of committees; those called managed collect fees less often than its prior says."""
    rng = np.random.default_rng(SEED)
    managed = rng.random(n) < 0.6
    share = np.where(managed[:, None], [0.6, 0.85, 0.9, 0.8], [0.2, 0.1, 0.25, 0.2])
    frame = pd.DataFrame(np.where(rng.random((n, 4)) < share, "yes", "no"), columns=ITEMS)
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in ITEMS]
    return Responses.from_frame(frame, items=items)


@pytest.fixture(scope="module")
def responses() -> Responses:
    return table()


@pytest.fixture(scope="module")
def stated(responses: Responses) -> Posterior:
    return LatentClassModel(responses.items, ("managed", "lapsed"), PRIORS).sample(
        responses, **QUICK
    )


@pytest.fixture(scope="module")
def flat(responses: Responses) -> Posterior:
    return LatentClassModel(responses.items, 2).sample(responses, **QUICK)


@pytest.fixture(scope="module")
def found(stated: Posterior) -> PriorSensitivity:
    return stated.prior_sensitivity(
        quantities={"gap": "P(fees=yes | managed) - P(fees=yes | lapsed)"},
        hypotheses={
            "more fees": ["P(fees=yes | managed) > P(fees=yes | lapsed)"],
            "alike": ["P(meets=yes | managed) = P(accounts=yes | managed)"],
        },
        refit=["uniform"],
        seed=SEED,
    )


def of(frame: pd.DataFrame, name: str) -> Any:
    return frame[frame["quantity"] == name].iloc[0]


@pytest.mark.filterwarnings("ignore")
def test_power_scaling_agrees_with_arvizs_own_table(
    stated: Posterior, found: PriorSensitivity
) -> None:
    """psense_summary of the exported tree: case by case likelihood, one log prior per block."""
    import arviz_stats as azs

    theirs = azs.psense_summary(stated.to_arviz(), round_to=12)
    for name, label in (
        ("P(managed)", "prevalence[managed]"),
        ("P(fees=yes | managed)", "response_probability[managed, fees=yes]"),
        ("P(accounts=yes | lapsed)", "response_probability[lapsed, accounts=yes]"),
        ("P(meets=yes | lapsed)", "response_probability[lapsed, meets=yes]"),
    ):
        ours = of(found.table, name)
        assert ours["prior_sensitivity"] == pytest.approx(theirs.loc[label, "prior"], abs=1e-9)
        assert ours["likelihood_sensitivity"] == pytest.approx(
            theirs.loc[label, "likelihood"], abs=1e-9
        )
    assert found.scaling.prior_k < 0.7


def test_a_strong_prior_is_seen_and_a_flat_one_is_said_not_to_be(found: PriorSensitivity) -> None:
    fees, meets = (of(found.table, f"P({item}=yes | managed)") for item in ("fees", "meets"))
    assert fees["own_prior"] == "informative"
    assert fees["prior_sensitivity"] > 4 * SENSITIVE
    assert "may disagree" in fees["diagnosis"]
    assert meets["own_prior"] == "flat"
    assert meets["diagnosis"].endswith("its own prior is flat, which power scaling cannot see")
    assert of(found.table, "gap")["own_prior"] == "partly flat"
    assert any(one.kind == "prior_and_data_disagree" for one in found.findings)


def test_a_uniform_model_is_not_declared_insensitive(flat: Posterior) -> None:
    """Rule 7: power scaling cannot see a uniform prior, so other priors are tried instead."""
    found = flat.prior_sensitivity(refit=[])
    assert set(found.table["own_prior"]) == {"flat"}
    assert found.table["prior_sensitivity"].isna().all()
    assert found.table["likelihood_sensitivity"].notna().all()
    assert found.table["diagnosis"].str.contains("flat, which power scaling cannot see").all()
    assert not found.table["diagnosis"].str.contains("hardly with its prior").any()
    assert "cannot see a flat prior" in found.verdict
    assert np.isnan(found.scaling.prior_k)
    assert set(found.moved["prior"]) == {"half as strong", "twice as strong"}
    assert (found.moved["moved"].abs() > 0.1).any()


def test_a_refit_calls_classes_as_the_original_does(flat: Posterior) -> None:
    found = flat.prior_sensitivity(refit=["Jeffreys", "uniform"], seed=SEED + 1)
    refit = found.moved[found.moved["method"] == "refit"]
    assert set(refit["prior"]) == {"half as strong"}  # of uniform priors that is Jeffreys
    assert found.left_out["uniform"] == "it is the study's own prior"
    assert refit["moved"].abs().max() < 1
    tried = found.priors[found.priors["method"] == "refit"].iloc[0]
    assert tried["same_places"] > 0.9
    assert tried["reliable"]


def test_hypotheses_stand_under_each_prior(found: PriorSensitivity) -> None:
    rows = found.hypotheses
    assert list(dict.fromkeys(rows["prior"])) == [
        "as stated", "half as strong", "twice as strong", "uniform"
    ]  # fmt: skip
    alike = rows[rows["claim"] == "alike"]
    assert alike.loc[alike["method"] == "weights", "note"].str.contains("by refits only").all()
    assert alike.loc[alike["prior"] == "as stated", "log_bayes_factor"].notna().all()
    more = rows[(rows["claim"] == "more fees") & (rows["prior"] == "half as strong")].iloc[0]
    assert 0 < more["prior_probability"] < 1
    # Under uniform priors nothing tells the two names apart, so that the claim means nothing.
    lost = rows[(rows["claim"] == "more fees") & (rows["method"] == "refit")].iloc[0]
    assert np.isnan(lost["log_bayes_factor"])
    assert "tells the classes" in lost["note"]


def test_weights_that_fail_lead_to_a_refit(responses: Responses) -> None:
    """A prior far from the data, halved: the other posterior lies elsewhere."""
    model = LatentClassModel(responses.items, 1, ("P(fees=yes | .) ~ Beta(4000, 10)",))
    posterior = model.sample(responses, **QUICK)
    assert not posterior.prior_sensitivity(refit=[]).priors["reliable"].all()
    found = posterior.prior_sensitivity()
    weights = found.priors[found.priors["method"] == "weights"].set_index("prior")
    failed = weights.index[~weights["reliable"]]
    assert set(found.priors.loc[found.priors["method"] == "refit", "prior"]) == set(failed)
    best = best_known(found.moved)
    assert best["reliable"].all()
    left = posterior.prior_sensitivity(refit=[])
    assert "prior_not_tried" in {one.kind for one in left.findings}
    assert "is not known" in left.verdict


def test_closed_form_with_one_class(responses: Responses) -> None:
    """The posterior under c times the prior is Beta(c a + n yes, c b + n no), by hand."""
    model = LatentClassModel(responses.items, 1, ("P(fees=yes | .) ~ Beta(12, 6)",))
    posterior = model.sample(responses, **(QUICK | {"draws": 1000}))
    claim = {"most pay": ["P(fees=yes | .) > 0.5"]}
    found = posterior.prior_sensitivity(
        hypotheses=claim, refit=["half as strong", "twice as strong", "Jeffreys"]
    )
    yes = int((responses.codes[:, 0] == 1).sum())
    no = len(responses.codes) - yes
    cases = {"half as strong": (6, 3), "twice as strong": (24, 12), "Jeffreys": (0.5, 0.5)}
    original = beta(12 + yes, 6 + no)
    checked = 0
    for row in found.moved[found.moved["quantity"] == "P(fees=yes | 1)"].to_dict("records"):
        if not row["reliable"]:
            continue
        a, b = cases[row["prior"]]
        exact = beta(a + yes, b + no)
        error = row["moved_mcse"] * original.std()
        assert row["mean"] == pytest.approx(exact.mean(), abs=4.5 * error + 1e-12)
        assert row["sd"] == pytest.approx(exact.std(), rel=0.1)
        checked += 1
    assert checked >= 5
    for row in found.hypotheses.to_dict("records"):
        if row["method"] != "refit":
            continue
        a, b = cases[row["prior"]]
        assert row["posterior_probability"] == pytest.approx(
            beta(a + yes, b + no).sf(0.5), abs=0.02
        )
        assert row["prior_probability"] == pytest.approx(beta(a, b).sf(0.5), abs=0.02)


def test_what_is_mostly_prior_is_a_finding() -> None:
    frame = pd.DataFrame({"fees": ["yes", "no", "no"], "meets": ["yes", "yes", "no"]})
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in frame]
    few = Responses.from_frame(frame, items=items)
    model = LatentClassModel(few.items, 1, ("P(fees=yes | .) ~ Beta(30, 30)",))
    found = model.sample(few, **QUICK).prior_sensitivity(refit=[])
    fees = of(found.table, "P(fees=yes | 1)")
    assert fees["mostly_prior"]
    assert fees["diagnosis"] == "rests mostly on its prior: the data say little about it"
    (finding,) = [one for one in found.findings if one.kind == "rests_on_prior"]
    assert finding.about == ("P(fees=yes | 1)",)
    assert "The data say little about P(fees=yes | 1)" in found.verdict
    assert not found.densities.empty


def test_what_cannot_be_followed_is_refused(stated: Posterior) -> None:
    with pytest.raises(ModelError, match="no alternative prior 'half'"):
        stated.prior_sensitivity(refit=["half"])
    with pytest.raises(StatementError, match="this is no quantity"):
        stated.prior_sensitivity(quantities=["P(fees=yes | managed) > 0.5"])
    with pytest.raises(StatementError, match="this is no hypothesis"):
        stated.prior_sensitivity(hypotheses=["P(fees=yes | managed)"])
