"""A test of known sensitivity and specificity: only prevalence is left, and it is known exactly."""

from __future__ import annotations

from math import log

import pandas as pd
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from bayeslca import Item, LatentClassModel, Responses, log_evidence, plausible_values
from bayeslca.posterior.posterior import Posterior

POSITIVE, N, SENSITIVITY, FALSE_POSITIVE = 40, 200, 0.9, 0.1


@pytest.fixture(scope="module")
def posterior() -> Posterior:
    frame = pd.DataFrame({"elisa": ["positive", "negative"], "n": [POSITIVE, N - POSITIVE]})
    item = Item("elisa", ("negative", "positive"), yes="positive")
    responses = Responses.from_frame(frame, items=[item], counts="n")
    said = (
        f"P(elisa=positive | infected) = {SENSITIVITY}",
        f"P(elisa=positive | free) = {FALSE_POSITIVE}",
    )
    model = LatentClassModel(responses.items, ("infected", "free"), statements=said)
    return model.sample(responses, seed=5, progress=False)


def likelihood(p: float) -> float:
    positive = SENSITIVITY * p + FALSE_POSITIVE * (1 - p)
    return float((positive / 0.2) ** POSITIVE * ((1 - positive) / 0.8) ** (N - POSITIVE))


def test_the_posterior_is_that_of_numerical_integration(posterior: Posterior) -> None:
    whole = quad(likelihood, 0, 1)[0]
    mean = quad(lambda p: p * likelihood(p), 0, 1)[0] / whole
    row = posterior.prevalence().iloc[0]
    assert abs(row["mean"] - mean) < 4 * row["mcse"]  # SciPy's quad
    found = log_evidence(posterior)
    exact = log(whole) + POSITIVE * log(0.2) + (N - POSITIVE) * log(0.8)
    assert abs(found.log_evidence - exact) < 4 * found.mcse + 1e-9


def test_the_maximum_is_the_estimate_of_rogan_and_gladen(posterior: Posterior) -> None:
    # Rogan & Gladen 1978, Am J Epidemiol 107, 71-76: (share positive + specificity - 1) /
    # (sensitivity + specificity - 1) = (0.2 - 0.1) / 0.8.
    fit = posterior.model.maximum_likelihood(posterior.responses, starting_points=5, seed=1)
    assert_allclose(fit.prevalence["estimate"], [0.125, 0.875], atol=1e-6)


def test_all_tables_are_made_without_free_response_probabilities(posterior: Posterior) -> None:
    assert_allclose(posterior.response_probabilities()["mean"], [0.1, 0.9, 0.9, 0.1])
    assert posterior.membership(rows="patterns")["probability_infected"].between(0, 1).all()
    assert len(posterior.separation()) == 1
    assert posterior.diagnostics().trustworthy
    assert posterior.predictive_checks(replicates=100, seed=1).reproduces


def test_the_later_steps_of_a_study_are_done_without_free_response_probabilities(
    posterior: Posterior,
) -> None:
    first, second = posterior.responses.row_names
    assert posterior.influence(seed=1, progress=False).verdict
    assert 0 < posterior.co_membership(seed=1).between(first, second) < 1
    assert posterior.prior_sensitivity(refit=[], seed=1).verdict
    assert len(plausible_values(posterior, number=2, seed=1)) == N
