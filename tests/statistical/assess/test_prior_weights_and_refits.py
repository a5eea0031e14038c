"""Importance weights give what refits give, bounds and hypotheses included."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

SEED = 611
ITEMS = ["fees", "accounts", "meets", "mechanic", "fenced"]


@pytest.fixture(scope="module")
def found() -> PriorSensitivity:
    """Three districts' committees; an order, a bound and a stated prior."""
    rng = np.random.default_rng(SEED)
    managed = rng.random(150) < 0.55
    share = np.where(managed[:, None], [0.85, 0.8, 0.9, 0.7, 0.75], [0.2, 0.15, 0.3, 0.25, 0.35])
    frame = pd.DataFrame(np.where(rng.random((150, 5)) < share, "yes", "no"), columns=ITEMS)
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in ITEMS]
    responses = Responses.from_frame(frame, items=items)
    model = LatentClassModel(
        responses.items,
        ("managed", "lapsed"),
        (
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
            "P(meets=yes | managed) >= 0.8",
            "P(accounts=yes | managed) ~ Beta(8, 2)",
        ),
    )
    posterior = model.sample(responses, seed=SEED, draws=4000, ess=4000, progress=False)
    return posterior.prior_sensitivity(
        hypotheses=["P(mechanic=yes | managed) > P(fees=yes | managed)"],
        refit=["half as strong", "twice as strong"],
        seed=SEED,
    )


@pytest.mark.parametrize("prior", ["half as strong", "twice as strong"])
def test_weights_give_the_means_of_a_refit(found: PriorSensitivity, prior: str) -> None:
    """Z below the normal quantile at 1e-4 over the number of checks; both errors in quadrature."""
    rows = found.moved[found.moved["prior"] == prior]
    weights, refit = (rows[rows["method"] == how].reset_index() for how in ("weights", "refit"))
    assert weights["reliable"].all()
    assert refit["reliable"].all()
    error = np.hypot(weights["moved_mcse"], refit["moved_mcse"])
    assert error.max() < 0.1
    z = (weights["moved"] - refit["moved"]) / error
    assert z.abs().max() < norm.isf(0.5e-4 / (2 * len(z)))
    # Something moves by far more than that, so that the check can fail.
    assert (refit["moved"].abs() / error).max() > 10
    assert weights["sd"].to_numpy() == pytest.approx(refit["sd"].to_numpy(), rel=0.15)


@pytest.mark.parametrize("prior", ["half as strong", "twice as strong"])
def test_weights_give_the_bayes_factor_of_a_refit(found: PriorSensitivity, prior: str) -> None:
    rows = found.hypotheses[found.hypotheses["prior"] == prior].set_index("method")
    weights, refit = rows.loc["weights"], rows.loc["refit"]
    error = np.hypot(weights["log_bayes_factor_mcse"], refit["log_bayes_factor_mcse"])
    assert error < 0.2
    assert abs(weights["log_bayes_factor"] - refit["log_bayes_factor"]) < 4 * error
    assert weights["prior_probability"] == pytest.approx(refit["prior_probability"], abs=0.02)
