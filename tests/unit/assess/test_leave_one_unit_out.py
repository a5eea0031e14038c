"""A unit's answers with its prevalences summed out, against enumeration and closed forms."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from scipy.special import gammaln, logsumexp

from bayeslca.assess.left_out.leave_one_unit_out import compare_units, leave_one_unit_out
from bayeslca.assess.left_out.unit_likelihood import (
    exact_log_likelihood,
    exact_work,
    log_likelihood_of_unit,
    particle_log_likelihood,
)
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses

SEED = 20261213


def enumerated(likelihood: np.ndarray, alpha: np.ndarray) -> float:
    """Sum over all assignments of the cases to classes: a Polya urn's probability of each."""
    n, k = likelihood.shape
    terms = []
    for classes in product(range(k), repeat=n):
        counts = np.bincount(classes, minlength=k)
        urn = gammaln(alpha.sum()) - gammaln(alpha.sum() + n)
        urn += (gammaln(alpha + counts) - gammaln(alpha)).sum()
        terms.append(urn + np.log(likelihood[np.arange(n), classes]).sum())
    return float(logsumexp(terms))


@pytest.mark.parametrize(("n", "k"), [(1, 2), (6, 2), (5, 3), (4, 4)])
def test_going_through_all_class_counts_is_exact(n, k):
    rng = np.random.default_rng(SEED)
    likelihood, alpha = rng.random((3, n, k)), rng.gamma(1.0, 2.0, size=(3, k))
    found = np.empty(3)
    exact_log_likelihood(likelihood, alpha, found)
    expected = [enumerated(one, a) for one, a in zip(likelihood, alpha, strict=True)]
    np.testing.assert_allclose(found, expected, rtol=1e-11)


def test_particles_estimate_the_probability_without_bias():
    """The mean of many estimates, on the scale of probabilities, within 4 standard errors."""
    rng = np.random.default_rng(SEED)
    one, alpha = rng.random((1, 14, 3)) ** 3, np.array([[0.4, 1.0, 0.2]])
    exact, many = np.empty(1), np.empty(4000)
    exact_log_likelihood(one, alpha, exact)
    particle_log_likelihood(
        np.repeat(one, 4000, axis=0), np.repeat(alpha, 4000, axis=0), 8, many, rng
    )
    ratio = np.exp(many - exact[0])
    assert ratio.std() > 0.05
    assert abs(ratio.mean() - 1.0) < 4 * ratio.std() / np.sqrt(ratio.size)


def test_large_units_are_done_by_particles_and_small_ones_exactly():
    rng = np.random.default_rng(SEED)
    likelihood = np.log(rng.random((2, 2, 3)))
    assert log_likelihood_of_unit(likelihood, np.array([1, 2]), np.ones((2, 3)), rng)[1]
    assert exact_work(60, 3) > 40_000
    assert not log_likelihood_of_unit(likelihood, np.array([30, 30]), np.ones((2, 3)), rng)[1]


def known_classes(n_yes: list[int], n_no: list[int]) -> Responses:
    """Districts in which an answer gives the class away; a second item is the same for all."""
    items = (Item("fees", ("no", "yes")), Item("meets", ("no", "yes")))
    codes, group = [], []
    for g, (yes, no) in enumerate(zip(n_yes, n_no, strict=True)):
        codes += [[1, 0]] * yes + [[0, 0]] * no
        group += [g] * (yes + no)
    return Responses(
        items=items,
        codes=np.asfortranarray(np.array(codes, dtype=np.int16)),
        counts=np.ones(len(codes), dtype=np.int64),
        groups=Groups("district", tuple("abcdef"[: len(n_yes)])),
        group_codes=np.array(group, dtype=np.int32),
    )


@pytest.fixture(scope="module")
def answers() -> Responses:
    return known_classes([5, 1, 4, 0], [1, 6, 4, 1])


@pytest.fixture(scope="module")
def fits(answers):
    known = ["P(fees=yes | managed) = 1", "P(fees=yes | lapsed) = 0"]
    classes = ["managed", "lapsed"]

    def fit(**changes):
        said = LatentClassModel(answers.items, classes, known, **changes)
        return said.sample(answers, seed=SEED, draws=500, ess=500, progress=False)

    return {
        "apart": fit(groups=answers.groups),
        "pooled": fit(groups=answers.groups, pooled=True),
        "one": fit(),
    }


def closed_form(yes: np.ndarray, no: np.ndarray, a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Log probability of a district's answers in their order: Beta(a, b), summed out."""
    top = gammaln(a + yes) + gammaln(b + no) - gammaln(a + b + yes + no)
    return top - gammaln(a) - gammaln(b) + gammaln(a + b)


def test_districts_with_a_prior_each_are_predicted_by_that_prior(answers, fits):
    """Nothing but the second item is learnt from other districts; that by Beta(1, 1)."""
    yes, no = np.array([5, 1, 4, 0]), np.array([1, 6, 4, 1])
    ones = np.ones(4)
    expected = closed_form(yes, no, ones, ones)
    expected += np.log((yes.sum() - yes + 1) / (yes.sum() + 1))
    expected += np.log((no.sum() - no + 1) / (no.sum() + 1))
    found = leave_one_unit_out(fits["apart"])
    errors = 5 * found.table["elpd_mcse"] + 1e-6
    assert np.all(np.abs(found.table["elpd"] - expected) < errors)
    assert found.elpd == pytest.approx(found.table["elpd"].sum())
    assert "the district's own prevalences summed out" in found.conditioning


def test_without_groups_all_districts_share_one_prevalence(answers, fits):
    yes, no = np.array([5, 1, 4, 0]), np.array([1, 6, 4, 1])
    expected = closed_form(yes, no, 1.0 + yes.sum() - yes, 1.0 + no.sum() - no)
    expected += np.log((yes.sum() - yes + 1) / (yes.sum() + 1))
    expected += np.log((no.sum() - no + 1) / (no.sum() + 1))
    found = leave_one_unit_out(fits["one"], refit=True, seed=2)
    assert found.unreliable == ()
    assert np.all(np.abs(found.table["elpd"] - expected) < 5 * found.table["elpd_mcse"] + 0.02)


def test_models_are_compared_by_new_units_only_on_the_same_answers(answers, fits):
    table = compare_units(fits)
    assert list(table.index) == ["apart", "pooled", "one"]
    assert table["elpd_diff"].max() == 0.0
    assert "left out" in table.attrs["conditioning"]
    other = known_classes([2, 1], [1, 3])
    model = LatentClassModel(other.items, 1)
    with pytest.raises(ModelError, match="different answers"):
        compare_units({"one": fits["one"], "other": model.sample(other, seed=1, progress=False)})
    with pytest.raises(ModelError, match="missing"):
        compare_units({})


def test_units_are_needed(answers, fits):
    from dataclasses import replace

    plain = replace(answers, groups=None, group_codes=np.zeros(answers.n_rows, dtype=np.int32))
    fitted = LatentClassModel(plain.items, 1).sample(plain, seed=1, progress=False)
    with pytest.raises(ModelError, match="no units to leave out"):
        fitted.leave_one_unit_out()
