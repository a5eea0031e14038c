"""A small study whose classes are told apart almost surely, and one whose classes are not."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca

SEED = 20261212


def study(n_cases=120, sharp=0.97, slope=1.2, n_items=6, seed=SEED):
    """Two classes told apart by all items; age raises the odds of the first; district does not."""
    rng = np.random.default_rng(seed)
    age = rng.normal(10.0, 4.0, size=n_cases)
    district = rng.choice(["hill", "lake", "plain"], size=n_cases, p=[0.5, 0.3, 0.2])
    chance = 1.0 / (1.0 + np.exp(-slope * (age - 10.0) / 4.0))
    is_first = rng.random(n_cases) < chance
    yes = rng.random((n_cases, n_items)) < np.where(is_first, sharp, 1.0 - sharp)[:, None]
    items = [f"item_{j + 1}" for j in range(n_items)]
    frame = pd.DataFrame(np.where(yes, "yes", "no"), columns=items)
    frame.insert(0, "case", [f"c{i}" for i in range(n_cases)])
    frame["age"], frame["district"], frame["is_first"] = age, district, is_first
    return frame, items


def fitted(frame, items, draws=500, **options):
    responses = lca.Responses.from_frame(
        frame,
        items=[lca.ItemSpec(name, categories=("no", "yes"), yes="yes") for name in items],
        case="case",
    )
    model = lca.LatentClassModel(
        responses.items, ["first", "second"], statements=["first is where P(item_1=yes) is highest"]
    )
    return model.sample(responses, seed=1, draws=draws, ess=400, progress=False, **options)


@pytest.fixture(scope="session")
def sharp_frame():
    return study()[0]


@pytest.fixture(scope="session")
def sharp_posterior(sharp_frame):
    return fitted(sharp_frame, [f"item_{j + 1}" for j in range(6)])


@pytest.fixture(scope="session")
def predictors(sharp_frame, sharp_posterior):
    return lca.class_predictors(
        sharp_posterior, sharp_frame, "age + district", seed=3, draws=300, ess=400
    )
