"""Naming rules and priors do not move the maximum; they only name the classes."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose

from bayeslca import Item, LatentClassModel, Responses, compare, criteria_beside
from bayeslca.assess.likelihood.likelihood_model import likelihood_model

NAMES = ("fees", "accounts", "meets", "fenced", "mechanic")
ITEMS = tuple(Item(name, ("no", "yes")) for name in NAMES)
RULES = ("managed is where P(accounts=yes) is highest", "lapsed is where P(meets=yes) is lowest")
PRIORS = ("P(fees=yes | managed) ~ Beta(9, 2)", "P(fenced=yes | lapsed) ~ Beta(1, 9)")
CLASSES = ("lapsed", "managed", "informal")


def answers(n: int = 400) -> Responses:
    rng = np.random.default_rng(20261201)
    p = np.array([[0.9, 0.9, 0.9, 0.8, 0.7], [0.8, 0.2, 0.7, 0.3, 0.2], [0.1, 0.1, 0.1, 0.2, 0.3]])
    z = rng.choice(3, size=n, p=[0.4, 0.35, 0.25])
    said = np.where(rng.random((n, 5)) < p[z], "yes", "no")
    return Responses.from_frame(pd.DataFrame(said, columns=NAMES), items=ITEMS)


def test_naming_rules_beside_priors_leave_the_free_maximum() -> None:
    responses = answers()
    named = LatentClassModel(ITEMS, CLASSES, statements=(*RULES, *PRIORS))
    fit = named.maximum_likelihood(responses, starting_points=30, seed=1)
    free = LatentClassModel(ITEMS, 3).maximum_likelihood(responses, starting_points=30, seed=1)
    assert_allclose(fit.log_likelihood, free.log_likelihood, atol=1e-6)
    assert fit.n_parameters == free.n_parameters == 17
    assert fit.model == named
    table = fit.response_probability.set_index(["item", "category", "latent_class"]).sort_index()[
        "estimate"
    ]
    assert table["accounts", "yes"].idxmax() == "managed"
    assert table["meets", "yes"].idxmin() == "lapsed"
    free_table = free.response_probability.set_index(
        ["latent_class", "item", "category"]
    ).sort_index()
    mine = fit.response_probability.set_index(["latent_class", "item", "category"]).sort_index()
    gaps = [
        max(
            np.abs(mine.loc[name, "estimate"] - free_table.loc[str(k + 1), "estimate"]).max()
            for name, k in zip(CLASSES, order, strict=True)
        )
        for order in permutations(range(3))
    ]
    assert min(gaps) < 1e-4


def test_a_constraint_on_single_classes_keeps_the_rules_as_orders() -> None:
    model = LatentClassModel(
        ITEMS, CLASSES, statements=(*RULES, "P(fees=yes | managed) > P(fees=yes | lapsed)")
    )
    assert likelihood_model(model) is model


def test_names_that_rest_on_a_prior_are_kept() -> None:
    model = LatentClassModel(ITEMS, ("managed", "lapsed"), statements=PRIORS)
    assert likelihood_model(model) is model


@pytest.mark.filterwarnings("ignore")
def test_criteria_stand_beside_a_model_that_has_no_solution() -> None:
    responses = answers(150)
    branching = LatentClassModel(
        ITEMS,
        CLASSES,
        statements=(
            "P(fees=yes | managed) > P(fees=yes | informal)",
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
            "P(accounts=yes | informal) > P(accounts=yes | lapsed)",
        ),
    )
    models = {"two": LatentClassModel(ITEMS, 2), "branching": branching}
    comparison = compare(models, responses, seed=1, draws=200, ess=200, progress=False)
    told: list[object] = []
    beside = criteria_beside(comparison, starting_points=10, seed=1, progress=told.append)
    assert told == ["two", "branching"]
    assert list(beside.fits) == ["two"]
    assert "branch" in beside.refused["branching"]
    assert np.isnan(beside.table.loc["branching", "bic"])
    assert beside.table.loc["two", "bic"] == 0
    assert "branch" in repr(beside)
