"""Effective draws per second of processor time, three covariates, against PyMC by hand.

Not part of the test suite: ``pytest tests/benchmarks/test_predictors.py -s``. 5,000 cases take
PyMC some minutes: they are run where BAYESLCA_LONG is set.
"""

from __future__ import annotations

import os
import time

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca._compat import as_tree
from bayeslca.relate.case_units import case_units
from bayeslca.sampling.joint_chain import joint_task
from bayeslca.sampling.joint_gibbs import sample_joint
from bayeslca.sampling.logistic_step import LogisticStep

SEED = 118
YES = np.array(
    [
        [0.9, 0.9, 0.8, 0.85, 0.8, 0.9, 0.6],
        [0.8, 0.15, 0.2, 0.75, 0.3, 0.85, 0.1],
        [0.1, 0.1, 0.1, 0.1, 0.2, 0.1, 0.1],
    ]
)
SLOPES = np.array([[0.3, 0.8, 0.0, 0.4], [0.0, 0.0, 0.0, 0.0], [-0.2, -0.6, 0.5, 0.0]])


def study(n_cases):
    rng = np.random.default_rng(SEED)
    design = np.column_stack([np.ones(n_cases), rng.normal(size=(n_cases, 3))])
    share = np.exp(design @ SLOPES.T)
    share /= share.sum(axis=1, keepdims=True)
    z = (rng.random(n_cases)[:, None] > share.cumsum(axis=1)).sum(axis=1)
    return design, (rng.random((n_cases, 7)) < YES[z]).astype(int)


def least_ess(coefficients):
    """Smallest bulk or tail effective sample size of contrasts against the second class."""
    from arviz_stats.base import array_stats

    contrast = coefficients - coefficients[:, :, 1:2]
    return min(
        min(
            float(array_stats.ess(contrast[:, :, k, p], method="bulk")),
            float(array_stats.ess(contrast[:, :, k, p], method="tail", prob=(0.05, 0.95))),
        )
        for k in (0, 2)
        for p in range(4)
    )


def ours(design, answers, sweeps):
    items = list("abcdefg")
    frame = pd.DataFrame(np.where(answers == 1, "yes", "no"), columns=items)
    responses = lca.Responses.from_frame(
        frame, items=[lca.ItemSpec(i, categories=("no", "yes"), yes="yes") for i in items]
    )
    model = lca.LatentClassModel(
        responses.items,
        ["one", "two", "three"],
        statements=[
            "three is where P(a=yes) is lowest",
            "one is where P(b=yes) is highest",
        ],
    )
    posterior = model.sample(responses, seed=1, progress=False)
    units = case_units(model, responses, np.arange(len(design))).units
    task = joint_task(
        posterior.table,
        units,
        len(design),
        lambda rng: LogisticStep(design, np.full(4, 1.5), 3, rng),
    )
    starts = posterior.draws.elements[:, -1]
    sample_joint(task, starts, seed=1, draws=20, ess=1, r_hat=9, warmup=10)  # compiles
    begin = time.process_time()
    drawn = sample_joint(task, starts, seed=1, ess=4000, max_sweeps=sweeps, threads=1)
    seconds = time.process_time() - begin
    return least_ess(drawn.parameters["coefficients"]), seconds


def by_hand(design, answers, draws):
    import pymc as pm

    with pm.Model():
        slopes = pm.Normal("slopes", 0, 1.5, shape=(3, 4))
        yes = pm.Beta("yes", 1, 1, shape=(3, 7))
        share = pm.math.log_softmax(pm.math.dot(design, slopes.T), axis=1)
        by_class = pm.math.dot(answers, pm.math.log(yes).T)
        by_class += pm.math.dot(1 - answers, pm.math.log(1 - yes).T)
        pm.Potential("likelihood", pm.math.logsumexp(by_class + share, axis=1).sum())
        options = {
            "chains": 4, "cores": 1, "random_seed": 1, "progressbar": False,
            "nuts_sampler": "pymc", "initvals": {"yes": YES}, "compute_convergence_checks": False,
        }  # fmt: skip
        pm.sample(2, tune=2, **options)  # compiles
        begin = time.process_time()
        tree = as_tree(pm.sample(draws, tune=draws, **options))
        seconds = time.process_time() - begin
    return least_ess(tree.posterior["slopes"].values), seconds


@pytest.mark.pymc
@pytest.mark.parametrize(
    ("n_cases", "sweeps", "draws", "target"),
    [
        (118, 4500, 1000, 3.0),
        pytest.param(
            5000, 4500, 250, 10.0,
            marks=pytest.mark.skipif("BAYESLCA_LONG" not in os.environ, reason="takes minutes"),
        ),
    ],
)  # fmt: skip
def test_effective_draws_per_second(n_cases, sweeps, draws, target):
    design, answers = study(n_cases)
    mine, my_seconds = ours(design, answers, sweeps)
    theirs, their_seconds = by_hand(design, answers, draws)
    ratio = (mine / my_seconds) / (theirs / their_seconds)
    print(
        f"\n{n_cases} cases: bayeslca {mine:.0f} effective draws in {my_seconds:.1f} s, PyMC by "
        f"hand {theirs:.0f} in {their_seconds:.1f} s: {ratio:.1f} times as many a second"
    )
    assert ratio >= target
