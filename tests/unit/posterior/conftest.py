"""Posteriors of small made-up tables, sampled once."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

ITEMS = [
    ItemSpec("fees", categories=("no", "yes"), yes="yes"),
    ItemSpec("accounts", categories=("no", "yes"), yes="yes"),
    ItemSpec("type", categories=("pump", "well", "spring")),
    ItemSpec("meets", categories=("no", "yes"), yes="yes", label="Meets <monthly>"),
]
QUICK = {"seed": 11, "draws": 150, "ess": 100, "r_hat": 1.05, "progress": False}


def answers(n: int = 90, seed: int = 3) -> pd.DataFrame:
    """Two kinds of cases, some missing answers, two cases without any."""
    rng = np.random.default_rng(seed)
    kind = rng.random(n) < 0.7
    yes = np.where(kind[:, None], [0.9, 0.85, 0.8], [0.15, 0.2, 0.3])
    binary = np.where(rng.random((n, 3)) < yes, "yes", "no").astype(object)
    places = np.array(["pump", "well", "spring"], dtype=object)
    which = np.where(kind, rng.choice(3, n, p=[0.7, 0.2, 0.1]), rng.choice(3, n, p=[0.2, 0.3, 0.5]))
    frame = pd.DataFrame(
        {
            "committee": [f"WP{i:03d}" for i in range(n)],
            "district": rng.choice(["north", "south", "west"], n),
            "fees": binary[:, 0],
            "accounts": binary[:, 1],
            "type": places[which],
            "meets": binary[:, 2],
        }
    )
    items = ["fees", "accounts", "type", "meets"]
    for row, item in ((4, "fees"), (5, "type"), (6, "meets"), (6, "fees")):
        frame.loc[row, item] = None
    frame.loc[[10, 20], items] = None
    return frame


@pytest.fixture(scope="session")
def responses() -> Responses:
    return Responses.from_frame(answers(), items=ITEMS, case="committee", group="district")


@pytest.fixture(scope="session")
def posterior(responses: Responses) -> Posterior:
    """Two classes; the model pools the districts."""
    return LatentClassModel(responses.items, 2).sample(responses, **QUICK)


@pytest.fixture(scope="session")
def grouped(responses: Responses) -> Posterior:
    """Named classes, a prevalence per district, a prior and a naming rule."""
    model = LatentClassModel(
        responses.items,
        ("managed", "lapsed"),
        statements=(
            "P(fees=yes | managed) ~ Beta(3, 1)",
            "managed is where P(accounts=yes) is highest",
        ),
        groups=responses.groups,
    )
    return model.sample(responses, **QUICK)


@pytest.fixture(scope="session")
def single(responses: Responses) -> Posterior:
    return LatentClassModel(responses.items, 1).sample(responses, **QUICK)
