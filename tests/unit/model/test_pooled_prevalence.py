"""The common prior of pooled units, against SciPy's distributions and moments."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.pooled_prevalence import (
    PooledPrevalence,
    draw_dirichlets,
    spread_of,
)
from bayeslca.responses.item import Groups, Item

SEED = 20261212
ITEMS = (Item("fees", ("no", "yes")), Item("meets", ("no", "yes")))
DISTRICTS = Groups("district", ("north", "south", "coast"))
SOURCE = PooledPrevalence(4, np.array([2.0, 1.0, 1.5]), (2.0, 3.0))


def test_density_is_that_of_scipy():
    rng = np.random.default_rng(SEED)
    prevalence, concentration = SOURCE.simulate_many(rng, 5)
    concentration = np.maximum(concentration, 0.05)
    prevalence = draw_dirichlets(rng, concentration + 1.0, 4)
    total = concentration.sum(axis=1)
    for s in range(5):
        expected = stats.dirichlet.logpdf(concentration[s] / total[s], SOURCE.mean_prior)
        expected += stats.beta.logpdf((1 + total[s]) ** -0.5, 2.0, 3.0)
        for row in prevalence[s]:
            expected += stats.dirichlet.logpdf(row, concentration[s])
            expected += np.log(row).sum()  # from prevalences to log odds: their product
        found = SOURCE.log_density(prevalence[s], concentration[s])
        assert found == pytest.approx(expected, rel=1e-10)
    every = SOURCE.log_density(prevalence, concentration)
    assert every.shape == (5,)


def test_prior_draws_have_the_spread_and_the_deviation_they_should():
    """Given the mean m and the spread s a prevalence has the sd s sqrt(m (1 - m)) over units."""
    prevalence, concentration = SOURCE.simulate_many(np.random.default_rng(SEED), 40_000)
    spread = spread_of(concentration)
    assert stats.kstest(spread, stats.beta(2.0, 3.0).cdf).pvalue > 1e-3
    mean = concentration / concentration.sum(axis=1, keepdims=True)
    wanted = spread[:, None] ** 2 * mean * (1 - mean)
    found = (prevalence - mean[:, None]) ** 2
    error = 4 * (found.mean(axis=1) - wanted).std(axis=0) / np.sqrt(40_000)
    assert np.all(np.abs(found.mean(axis=(0, 1)) - wanted.mean(axis=0)) < error)


def test_dirichlets_with_tiny_parameters_are_never_zero_nor_nan():
    drawn = draw_dirichlets(np.random.default_rng(SEED), np.array([1e-12, 1e-9, 1e-10]), 1000)
    assert np.all(drawn > 0)
    np.testing.assert_allclose(drawn.sum(axis=-1), 1.0)
    shares = drawn.round().mean(axis=0)  # nearly always one class takes all, by its parameter
    np.testing.assert_allclose(shares, [0.001, 0.908, 0.091], atol=0.04)


def test_labels_move_in_all_units_together_or_not_at_all():
    even = PooledPrevalence(2, np.ones(3))
    assert even.is_invariant(np.array([[1, 0, 2], [1, 0, 2]]))
    assert not even.is_invariant(np.array([[1, 0, 2], [0, 1, 2]]))
    assert not SOURCE.is_invariant(np.tile([1, 0, 2], (4, 1)))


def model(**changes) -> LatentClassModel:
    said = {"items": ITEMS, "classes": 2, "groups": DISTRICTS, "pooled": True, **changes}
    return LatentClassModel(**said)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"groups": None}, "no groups"),
        ({"groups": Groups("district", ("north",))}, "two or more units"),
        ({"classes": 1}, "with one class there is no prevalence to pool"),
        ({"free_by_group": True}, "mean the same in every unit"),
        ({"pooled": "yes"}, "pooled is 'yes'; it is True or False"),
        ({"spread_prior": (0, 1)}, "both above 0"),
        ({"spread_prior": 3}, "two parameters of a Beta"),
        ({"pooled": False, "spread_prior": (2, 2)}, "spread_prior is about pooled units"),
        (
            {"classes": ("a", "b"), "statements": ("P(a | district=north) > P(b | district=north)",
                                                   "a is where P(fees=yes) is highest")},
            "no sampler is written for that where units are pooled",
        ),
        (
            {"classes": ("a", "b"), "statements": ("P(a, b | district=north) ~ Dirichlet(2, 1)",)},
            "one district a prior of its own",
        ),
    ],
)  # fmt: skip
def test_what_cannot_be_pooled_is_refused_in_words(changes, message):
    with pytest.raises(ModelError, match=message.replace("|", r"\|")):
        model(**changes)


def test_a_model_of_pooled_units_describes_itself_and_is_kept():
    said = model(statements=("P(fees=yes | .) ~ Beta(2, 1)",), spread_prior=[1, 4])
    text = " ".join(said.describe().split())
    assert "Pooled over 3 units (district)" in text
    assert "Beta(1, 4), as stated" in text
    assert "a district with few cases borrows" in text
    again = LatentClassModel.from_dict(said.to_dict())
    assert again == said
    assert again.spread_prior == (1.0, 4.0)
    assert "pooled" not in model(pooled=False).to_dict()  # what was saved before keeps its key


def test_the_stated_prior_is_that_of_the_mean():
    said = model(classes=("a", "b"), statements=("P(a, b) ~ Dirichlet(3, 1)",))
    np.testing.assert_array_equal(said.prevalence_source.mean_prior, [3.0, 1.0])
    draws = said.prior_predictive(30, draws=4000, seed=SEED).prevalence
    north = draws[(draws["group"] == "a new district") & (draws["latent_class"] == "a")]
    assert float(north["mean"].iloc[0]) == pytest.approx(0.75, abs=0.03)


def test_maximum_likelihood_leaves_pooling_out():
    """Pooling is a prior: without it each unit has prevalences of its own."""
    from bayeslca.assess.likelihood.likelihood_model import likelihood_model

    assert likelihood_model(model()) == model(pooled=False)
