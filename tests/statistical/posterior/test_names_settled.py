"""How settled names are: the mass of the other labelling that the prior ratio predicts.

Given the unordered classes of a draw, each labelling has the posterior probability of its prior
density over the sum of all of them (the likelihood does not depend on labels). Averaged over
draws that is the exact mass of each labelling, found without looking at any label.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca

SEED = 20261201


def test_mass_of_the_other_labelling_is_that_of_the_prior_ratio() -> None:
    # The case of the rulebook: P(item1=yes | A) ~ Beta(3, 1), all else uniform, N = 300.
    rng = np.random.default_rng(SEED)
    kind = rng.random(300) < 0.6
    yes = np.where(kind[:, None], [0.8, 0.9, 0.8, 0.9], [0.5, 0.2, 0.3, 0.1])
    frame = pd.DataFrame(np.where(rng.random((300, 4)) < yes, "yes", "no"), columns=list("pqrs"))
    responses = lca.Responses.from_frame(frame, items=list("pqrs"))
    model = lca.LatentClassModel(
        responses.items, ("A", "B"), statements=("P(p=yes | A) ~ Beta(3, 1)",)
    )
    posterior = model.sample(responses, seed=SEED, draws=4000, ess=2000, progress=False)
    p = posterior.response_probability_draws[:, :, 0, :, 1]  # (chain, draw, class)
    q = posterior.response_probability_draws[:, :, 0, :, 3]
    one = np.where(q[..., 0] > q[..., 1], p[..., 0], p[..., 1])  # the class with high q
    other = np.where(q[..., 0] > q[..., 1], p[..., 1], p[..., 0])
    predicted = one**2 / (one**2 + other**2)  # Beta(3, 1) has density 3 p^2
    settled = posterior.relabelled.names_settled
    in_main = (q[..., 0] > q[..., 1]).astype(float)
    batches = in_main.reshape(40, -1).mean(axis=1)
    mcse = batches.std(ddof=1) / np.sqrt(40)
    assert 0.6 < settled < 0.95
    assert settled == pytest.approx(predicted.mean(), abs=4 * mcse)
    (finding,) = posterior.relabelled.findings
    assert finding.kind == "names_not_settled"
    assert finding.value == settled
