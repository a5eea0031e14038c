"""How much of a posterior lies where its prior lay, and what is marked for it."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.stats import beta

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.prior_overlap import (
    MOSTLY,
    beta_overlap,
    density,
    mostly_prior,
    overlap,
)
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

SEED = 20_261_201
PAIRS = [((1, 1), (6, 3)), ((9, 2), (19, 12)), ((0.5, 0.5), (1.5, 2.5)), ((1, 4), (3, 40))]


def by_quadrature(one: tuple[float, float], two: tuple[float, float]) -> float:
    """SciPy's adaptive quadrature of the lower of its two Beta densities."""
    return quad(
        lambda x: min(beta.pdf(x, *one), beta.pdf(x, *two)), 0, 1, limit=400, points=[0.02, 0.5]
    )[0]


@pytest.mark.parametrize(("before", "after"), PAIRS)
def test_the_overlap_of_two_betas_is_scipys(
    before: tuple[float, float], after: tuple[float, float]
) -> None:
    assert beta_overlap(before, after) == pytest.approx(by_quadrature(before, after), abs=2e-3)


@pytest.mark.parametrize(("before", "after"), PAIRS)
def test_draws_give_nearly_the_same(
    before: tuple[float, float], after: tuple[float, float]
) -> None:
    """4,000 draws: the error of a smoothed density, at most 0.03 here."""
    rng = np.random.default_rng(SEED)
    found = overlap(rng.beta(*before, 10_000), rng.beta(*after, 4_000), 4_000)
    assert found == pytest.approx(by_quadrature(before, after), abs=0.03)


def test_the_ends_of_the_scale() -> None:
    rng = np.random.default_rng(SEED)
    same = overlap(rng.random(10_000), rng.random(4_000), 4_000)
    assert same > 0.95
    assert overlap(rng.random(10_000), 0.5 + 0.001 * rng.random(4_000), 4_000) < 0.02
    assert np.isnan(overlap(rng.random(10_000), np.full(4_000, 0.3), 4_000))
    assert np.isnan(overlap(np.full(10_000, np.inf), rng.random(4_000), 4_000))


def test_the_scale_does_not_matter() -> None:
    rng = np.random.default_rng(SEED)
    before, after = rng.beta(2, 2, 10_000), rng.beta(5, 2, 4_000)
    logits = [np.log(x / (1 - x)) for x in (before, after)]
    assert overlap(*logits, 4_000) == pytest.approx(overlap(before, after, 4_000), abs=1e-12)


def test_a_smoothed_density_has_an_area_of_one() -> None:
    rng = np.random.default_rng(SEED)
    grid = np.linspace(0, 1, 201)
    found = density(rng.beta(3, 5, 20_000), grid)
    assert found.sum() * (grid[1] - grid[0]) == pytest.approx(1.0)
    assert found == pytest.approx(beta.pdf(grid, 3, 5), abs=0.15)


def test_marks_go_by_overlap_and_by_share() -> None:
    marked = mostly_prior(np.array([MOSTLY, 0.2, 0.2, np.nan]), np.array([0.1, 0.5, 0.4, np.nan]))
    assert marked.tolist() == [True, True, False, False]


@pytest.fixture(scope="module")
def few() -> Posterior:
    """One class, eleven cases; only two of them answered 'meets'."""
    frame = pd.DataFrame(
        {
            "fees": ["yes"] * 7 + ["no"] * 4,
            "meets": ["yes", "no"] + [None] * 9,
        }
    )
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in ("fees", "meets")]
    responses = Responses.from_frame(frame, items=items)
    model = LatentClassModel(responses.items, 1, ("P(fees=yes | .) ~ Beta(2, 5)",))
    return model.sample(responses, seed=3, draws=200, ess=200, r_hat=1.05, progress=False)


def test_with_one_class_the_overlap_is_exact(few: Posterior) -> None:
    """By hand: Beta(2, 5) becomes Beta(9, 9); Beta(1, 1) becomes Beta(2, 2)."""
    marks = few.prior_marks
    exact = [by_quadrature((2, 5), (9, 9)), by_quadrature((1, 1), (2, 2))]
    assert marks.answer_overlap == pytest.approx(np.repeat(exact, 2), abs=2e-3)
    assert marks.answer_share == pytest.approx([7 / 18] * 2 + [2 / 4] * 2)
    assert marks.answers.tolist() == [False, False, True, True]
    assert np.isnan(marks.prevalence_overlap).all()


def test_expected_cases_come_from_the_fit(posterior: Posterior) -> None:
    """Two classes, 88 cases with answers: what the fit places in them, not a half each."""
    by_class = posterior.prevalence()["mean"].to_numpy()
    answered = (posterior.units.pattern[:, 0] >= 0) @ posterior.units.count
    weights = posterior.prior_marks.weights[:2]
    found = np.array([weight.expected for weight in weights], dtype=float)
    assert found.sum() == pytest.approx(answered)
    assert found / answered == pytest.approx(by_class, abs=0.05)
    assert abs(found[0] / answered - 0.5) > 0.1


def test_groups_and_all_have_their_own_marks(grouped: Posterior) -> None:
    marks = grouped.prior_marks
    assert marks.prevalence.shape == (len(grouped.prevalence()),)
    assert marks.answers.shape == (len(grouped.response_probabilities()),)
    assert np.isnan(marks.prevalence_share[-2:]).all()
    assert (marks.prevalence_overlap > 0).all()
