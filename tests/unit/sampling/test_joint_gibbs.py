"""The driver of joint models: the same posterior as the measurement sampler where both apply."""

from __future__ import annotations

from dataclasses import replace
from statistics import NormalDist

import numpy as np
import pytest

from bayeslca.exceptions import SamplingError
from bayeslca.model.compile import compile_units
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.symmetry import symmetry
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units
from bayeslca.sampling.joint_chain import JointChain, joint_task
from bayeslca.sampling.joint_gibbs import sample_held, sample_joint
from bayeslca.sampling.run import sample_table
from bayeslca.sampling.steps import DirichletStep

SEED = 20261211


def two_groups(first_prior=(1.0, 1.0), n_cases: int = 80):
    """Four items, two classes, two groups with prevalences of their own."""
    builder = TableBuilder([2, 2, 2, 2], 2, (0, 0))
    for j in range(4):
        for k in range(2):
            prior = first_prior if j == 0 and k == 0 else (1.0, 1.0)
            builder.set_item(0, j, k, builder.block(prior))
    table = builder.build()
    rng = np.random.default_rng(SEED)
    group = np.repeat([0, 1], n_cases // 2)
    is_first = rng.random(n_cases) < np.where(group == 0, 0.3, 0.7)
    answers = (rng.random((n_cases, 4)) < np.where(is_first, 0.85, 0.2)[:, None]).astype(np.int16)
    units = Units(answers, group.astype(np.int32), np.ones(n_cases, int), np.arange(n_cases))
    return table, compile_units(table, units)


def dirichlet(rng):
    return DirichletStep(np.full((2, 2), 1.5), rng)


class KnownWeights:
    """An outcome whose log density is known: nothing to draw."""

    def __init__(self, weights):
        self.weights = weights
        self.parameters = {"known": np.array([1.0, 2.0])}

    def log_weight(self, out):
        out[:] = self.weights

    def draw(self, unit_count, rng):
        assert np.array_equal(unit_count.sum(axis=1), np.ones(len(self.weights)))

    def permute(self, permutation):
        raise AssertionError

    def log_prior(self):
        return 0.0


def worst_z(ours, theirs):
    """Return the largest |z| of means and of means of squares, (chain, draw, n) each."""
    from arviz_stats.base import array_stats

    worst = 0.0
    for power in (1, 2):
        for i in range(ours.shape[2]):
            a, b = ours[:, :, i] ** power, theirs[:, :, i] ** power
            error = np.hypot(*(array_stats.mcse(x, method="mean") for x in (a, b)))
            assert min(array_stats.ess(x, method="mean") for x in (a, b)) > 400
            worst = max(worst, abs(a.mean() - b.mean()) / error)
    return worst


def limit(n):
    return NormalDist().inv_cdf(1 - 1e-4 / (2 * n))


@pytest.mark.parametrize("with_weights", [False, True])
def test_dirichlet_prevalences_give_the_measurement_samplers_posterior(with_weights):
    """Outside check: `sample_table`, itself checked against exact enumeration elsewhere."""
    table, units = two_groups((1.0, 1.0) if with_weights else (4.0, 1.0))
    first = np.asarray(units.row).reshape(-1, 4).sum(axis=1) % 2 == 1
    known = np.where(first[:, None], [3.0, 0.0], [0.0, 2.0]) - 400.0  # far from 1
    weighted = replace(units, log_weight=known) if with_weights else units
    source = DirichletPrevalence(np.full((2, 2), 1.5))
    theirs = sample_table(
        table, weighted, source, symmetry(table, source), seed=1, draws=1000, ess=1500
    )
    make_outcome = (lambda _rng: KnownWeights(known)) if with_weights else None
    task = joint_task(table, units, 2, dirichlet, make_outcome, group_of_row=np.array([0, 1]))
    ours = sample_joint(task, theirs.elements[:, -1], seed=2, draws=1000, ess=1500)
    assert not ours.limit_reached

    def flat(draws):
        return np.concatenate(
            [
                np.log(draws.elements[:, :, ::2]),
                draws.prevalence[:, :, :, 0],
                draws.log_likelihood[:, :, None] / 10.0,
            ],
            axis=2,
        )

    assert worst_z(flat(ours), flat(theirs)) < limit(2 * 11)
    if with_weights:
        assert np.array_equal(ours.parameters["known"][0, 0], [1.0, 2.0])


def test_moves_give_each_labelling_its_mass():
    """By the ratio of priors, rule 5; see tests/statistical/sampling/test_label_move.py."""
    from arviz_stats.base import array_stats

    table, units = two_groups((1.0, 3.0), n_cases=200)
    task = joint_task(table, units, 2, dirichlet, group_of_row=np.array([0, 1]))
    assert task.permutations.tolist() == [[1, 0]]
    start = np.tile([0.8, 0.2, 0.2, 0.8], 4)  # the labelling that the prior likes less
    draws = sample_joint(task, np.stack([start] * 2), seed=SEED, draws=1000, ess=600)
    yes = draws.elements[:, :, [1, 3]]
    wrong = (yes[:, :, 0] < yes[:, :, 1]).astype(float)
    low, high = yes.min(axis=2), yes.max(axis=2)
    difference = wrong - low**2 / (low**2 + high**2)
    assert array_stats.ess(difference, method="mean") > 200
    assert abs(difference.mean()) < 4 * array_stats.mcse(difference, method="mean")
    assert 0.01 < wrong.mean() < 0.4
    assert draws.statistics["accepted_swaps"].sum() > 0


def test_a_seed_gives_the_same_draws_whatever_the_threads():
    table, units = two_groups()
    task = joint_task(table, units, 2, dirichlet, group_of_row=np.array([0, 1]))
    starts = np.full((3, 16), 0.5)
    runs = [
        sample_joint(task, starts, seed=7, draws=100, ess=10, r_hat=2.0, threads=threads)
        for threads in (1, 3)
    ]
    assert np.array_equal(runs[0].elements, runs[1].elements)
    assert np.array_equal(runs[0].log_prior, runs[1].log_prior)
    assert not np.array_equal(runs[0].elements[0], runs[0].elements[1])
    held = [sample_held(task, runs[0].elements, sweeps=3, seed=7, threads=t) for t in (1, 3)]
    assert np.array_equal(held[0].prevalence, held[1].prevalence)


def test_held_elements_are_held_and_only_prevalences_are_drawn():
    """With answers that settle each class, prevalences are Dirichlet of the known counts."""
    table, units = two_groups()
    task = joint_task(table, units, 2, dirichlet, group_of_row=np.array([0, 1]))
    sure = np.tile([1e-9, 1 - 1e-9, 1 - 1e-9, 1e-9], 4)
    answered = np.asarray(units.row).reshape(-1, 4) % 2
    settled = (answered.sum(axis=1) * 2 > 4)[answered.sum(axis=1) != 2]
    kept = replace(task.units, count=(answered.sum(axis=1) != 2).astype(np.int64))
    task = joint_task(table, kept, 2, dirichlet, group_of_row=np.array([0, 1]))
    draws = sample_held(task, np.tile(sure, (2, 1500, 1)), sweeps=1, seed=3)
    assert np.all(draws.elements == sure)
    group = units.prevalence_row[answered.sum(axis=1) != 2]
    n_first = np.bincount(group, weights=settled, minlength=2)
    n_all = np.bincount(group, minlength=2)
    expected = (1.5 + n_first) / (3.0 + n_all)
    sd = np.sqrt(expected * (1 - expected) / (4.0 + n_all))
    found = draws.prevalence[:, :, :, 0].reshape(-1, 2)
    assert np.all(np.abs(found.mean(axis=0) - expected) < 4 * sd / np.sqrt(len(found)))
    assert np.allclose(found.std(axis=0), sd, rtol=0.1)


def test_chains_that_cannot_meet_the_rule_are_refused():
    table, units = two_groups()
    task = joint_task(table, units, 2, dirichlet, group_of_row=np.array([0, 1]))
    with pytest.raises(SamplingError, match="more effective draws than 1 chains of 100"):
        sample_joint(task, np.full((1, 16), 0.5), draws=100, ess=1000)


def test_impossible_answers_stop_the_chain():
    table, units = two_groups()
    task = joint_task(table, units, 2, dirichlet, group_of_row=np.array([0, 1]))
    chain = JointChain(task, np.tile([1.0, 0.0], 8), np.random.default_rng(1))
    with pytest.raises(SamplingError, match="probability 0 in every class"):
        chain.run(1, 1)
