"""Tables of pooled units: what they hold, for one case a unit, none, and many units."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.exceptions import BayesLCAError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import Groups, Item

SEED = 20261217
ITEMS = tuple(Item(f"item{j}", ("no", "yes")) for j in range(5))
SIZES = [1, 1, 0, 12, 1, 7, 1, 20]
MODEL = LatentClassModel(ITEMS, 2, groups=Groups("herd", tuple("abcdefgh")), pooled=True)


@pytest.fixture(scope="module")
def posterior():
    data = MODEL.simulate(SIZES, SEED).responses
    return MODEL.sample(data, seed=SEED, draws=500, ess=400, progress=False)


def test_units_of_one_case_borrow_most_and_units_of_none_everything(posterior):
    frame = posterior.partial_pooling().set_index(["group", "latent_class"])
    borrowed = frame["borrowed"].unstack()["1"]
    assert borrowed["c"] == 1.0
    assert borrowed["a"] == borrowed["b"] > borrowed["d"] > borrowed["h"]
    assert np.isnan(frame.loc[("c", "1"), "alone"])
    assert frame["alone"].drop("c", level=0).between(0, 1).all()
    np.testing.assert_allclose(frame["mean"].unstack().sum(axis=1), 1.0)
    assert list(frame["cases"].unstack()["1"]) == SIZES


def test_a_new_unit_is_as_wide_as_a_unit_without_cases(posterior):
    """Both are draws from the same distribution: one more unit of the kind."""
    frame = posterior.prevalence().set_index(["group", "latent_class"])
    new, none = frame.loc[("a new herd", "1")], frame.loc[("c", "1")]
    assert abs(new["mean"] - none["mean"]) < 4 * np.hypot(new["mcse"], none["mcse"])
    assert new["sd"] == pytest.approx(none["sd"], rel=0.15)
    assert np.isnan(new["cases"])
    assert list(frame.index.get_level_values(0)[-4:]) == ["a new herd"] * 2 + ["overall"] * 2


def test_between_units_and_sensitivity(posterior):
    between = posterior.between_units()
    assert list(between["quantity"].head(2)) == ["spread between units", "concentration"]
    spread = between.iloc[0]
    assert 0 < spread["lower"] < spread["median"] < spread["upper"] < 1
    assert spread["prior_median"] == pytest.approx(0.5, abs=0.02)
    others = posterior.spread_sensitivity()
    assert others.iloc[0]["median"] == pytest.approx(spread["median"], abs=1e-3)
    alike = others[others["prior"].str.startswith("favours alike")].iloc[0]
    assert alike["median"] < spread["median"]


def test_it_is_saved_and_read_with_its_concentration(posterior, tmp_path):
    posterior.save(tmp_path / "fit.nc")
    again = Posterior.load(tmp_path / "fit.nc")
    np.testing.assert_allclose(again.draws.concentration, posterior.draws.concentration)
    assert again.model == posterior.model
    tree = posterior.tree
    assert {"mean_prevalence", "unit_concentration", "spread"} <= set(tree["posterior"].data_vars)
    # Only the top level is a prior that may be scaled (Kallioinen et al. 2024).
    assert {"mean_prevalence", "spread"} <= set(tree["log_prior"].data_vars)
    assert "prevalence" not in tree["log_prior"].data_vars


def test_evidence_is_refused_in_words_and_hypotheses_are_not(posterior):
    from bayeslca.assess.evidence.log_evidence import log_evidence

    found = log_evidence(posterior)
    assert not found.reliable
    assert "pooled" in found.reason
    assert posterior.model.prevalence_source.n_rows == 8


def test_units_that_are_not_pooled_have_nothing_between_them(posterior):
    apart = LatentClassModel(ITEMS, 2, groups=MODEL.groups)
    fitted = apart.sample(posterior.responses, seed=1, draws=100, ess=50, progress=False)
    with pytest.raises(BayesLCAError, match="not pooled"):
        fitted.between_units()
    with pytest.raises(BayesLCAError, match="pooled=True"):
        fitted.partial_pooling()


def test_hundreds_of_units_are_compiled_and_looked_at_quickly():
    """The symmetry of labels and the rank take no longer for many units than for few."""
    groups = Groups("herd", tuple(f"h{g}" for g in range(300)))
    model = LatentClassModel(ITEMS, 2, groups=groups, pooled=True)
    assert model.symmetry.prior_group.n_members == 2
    found = model.identifiability()
    assert found.identified
    assert found.n_free == 10 + 300
