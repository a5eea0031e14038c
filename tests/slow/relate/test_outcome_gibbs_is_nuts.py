"""Gibbs for a joint model of answers and a numeric outcome agrees with NUTS on a model by hand."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from known_classes import known_posterior

import bayeslca as lca


@pytest.mark.pymc
def test_gibbs_and_nuts_agree_on_a_numeric_outcome() -> None:
    import pymc as pm
    import pytensor.tensor as pt

    known, z = known_posterior(90, yes=(0.8, 0.25), shares=(0.6, 0.4), seed=1)
    rng = np.random.default_rng(2)
    y = rng.normal(1.5 * z, 1.0 + 0.5 * z)
    posterior = known.model.sample(known.responses, seed=1, progress=False, draws=500, ess=500)
    frame = pd.DataFrame({"case": np.arange(z.size).astype(str), "y": y})
    found = lca.class_outcomes(
        posterior, frame, "y", kind="numeric", ways=["joint"], seed=3, ess=1500, draws=1500
    )
    answers = known.responses.codes.astype(float)
    prior = found.model.prior
    df, scale = prior.spread
    with pm.Model():
        share = pm.Beta("share", 1.0, 1.0)
        yes = pm.Beta("yes", 1.0, 1.0, shape=(2, 5))
        pm.Potential("order", pt.switch(yes[0, 0] > yes[1, 0], 0.0, -np.inf))
        mean = pm.Normal("mean", prior.location[0], prior.location[1], shape=2)
        variance = pm.InverseGamma("variance", df / 2, df * scale / 2, shape=2)
        within = [
            (answers * pt.log(yes[k]) + (1 - answers) * pt.log1p(-yes[k])).sum(axis=1)
            + pm.logp(pm.Normal.dist(mean[k], pt.sqrt(variance[k])), y)
            for k in range(2)
        ]
        both = pt.stack([pt.log(share) + within[0], pt.log1p(-share) + within[1]])
        pm.Potential("data", pm.math.logsumexp(both, axis=0).sum())
        start = {
            "share": 0.6, "yes": np.repeat([[0.8], [0.25]], 5, axis=1),
            "mean": [0.0, 1.5], "variance": [1.0, 2.0],
        }  # fmt: skip
        drawn = pm.sample(
            1000, tune=1000, chains=2, cores=1, random_seed=4, progressbar=False,
            initvals=start, target_accept=0.9, nuts_sampler="pymc",
            compute_convergence_checks=False,
        )  # fmt: skip
    from arviz_stats.base import array_stats

    joint = found.drawn["joint"]
    pairs = {
        "mean": (joint.by_class[..., 0], drawn.posterior["mean"].to_numpy()),
        "variance": (
            np.log(joint.by_class[..., 1]),
            np.log(drawn.posterior["variance"].to_numpy()),
        ),
    }
    for name, (ours, theirs) in pairs.items():
        for k in range(2):
            errors = [
                float(array_stats.mcse(np.ascontiguousarray(v[:, :, k]), method="mean"))
                for v in (ours, theirs)
            ]
            gap = ours[:, :, k].mean() - theirs[:, :, k].mean()
            assert abs(gap) < 4 * np.hypot(*errors), (name, k)
            assert ours[:, :, k].std() == pytest.approx(theirs[:, :, k].std(), rel=0.15)
