"""The permutation move gives each labelling the mass that the priors give it.

Rule 5 of the project's statistical rules: two classes told apart by one Beta(3, 1) only. The
mass of the wrong labelling follows from the prior ratio averaged over draws: at any draw,
p(this labelling | draw up to labels) = prior(draw) / (prior(draw) + prior(swapped draw)), because
the likelihood of both is the same.
"""

from __future__ import annotations

import numba
import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.symmetry import element_map, symmetry
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units
from bayeslca.sampling.chain import Chain, make_task
from bayeslca.sampling.run import sample_table

SEED = 20261203


def two_classes(n_cases: int = 300, n_items: int = 5):
    """P(item 1 | A) ~ Beta(3, 1), all else uniform; A says yes to everything more often."""
    builder = TableBuilder([2] * n_items, 2, (0,))
    for j in range(n_items):
        for k in range(2):
            prior = [1.0, 3.0] if j == 0 and k == 0 else [1.0, 1.0]
            builder.set_item(0, j, k, builder.block(prior))
    table = builder.build()
    rng = np.random.default_rng(SEED)
    latent_class = rng.random(n_cases) < 0.5
    yes = np.where(latent_class[:, None], [0.8, 0.8, 0.8, 0.8, 0.8], [0.3, 0.2, 0.2, 0.2, 0.2])
    answers = (rng.random((n_cases, n_items)) < yes).astype(np.int16)
    pattern, inverse, count = np.unique(answers, axis=0, return_inverse=True, return_counts=True)
    units = Units(pattern, np.zeros(count.size, dtype=np.int32), count, inverse.reshape(-1))
    return table, compile_units(table, units), DirichletPrevalence(np.ones((1, 2)))


def test_each_chain_has_the_mass_of_the_wrong_labelling_that_the_prior_ratio_gives():
    from arviz_stats.base import array_stats

    table, units, source = two_classes()
    labels = symmetry(table, source, units)
    assert labels.table_group.n_members == 2
    assert labels.prior_group.n_members == 1
    draws = sample_table(
        table, units, source, labels, seed=SEED, draws=2000, ess=3000, progress=False
    )
    yes_first = draws.elements[:, :, [1, 3]]  # P(item 1 = yes) in class A and in class B
    wrong = (yes_first[:, :, 0] < yes_first[:, :, 1]).astype(float)
    # Beta(3, 1) has density 3 x^2, so swapping labels multiplies the prior by (x_B / x_A)^2.
    low, high = yes_first.min(axis=2), yes_first.max(axis=2)
    expected = low**2 / (low**2 + high**2)
    difference = wrong - expected
    for chain in difference:
        assert array_stats.ess(chain[None], method="mean") > 200
        assert abs(chain.mean()) < 4 * array_stats.mcse(chain[None], method="mean")
    assert 0.02 < expected.mean() < 0.3
    assert draws.statistics["accepted_swaps"].sum() > 0
    moved = element_map(table, np.array([[1, 0]]))
    assert moved[[1, 3]].tolist() == [3, 1]


def test_without_the_move_chains_stay_where_they_began():
    """The mutation: it is the move, and nothing else, that carries chains across."""
    table, units, source = two_classes()
    task = make_task(table, units, source, labels=None)
    assert task.permutations.shape[0] == 0
    rng = np.random.default_rng(SEED)
    elements = np.tile([0.8, 0.2, 0.2, 0.8], 5)  # the wrong labelling
    chain = Chain(task, elements, np.array([[0.5, 0.5]]), rng)
    kept = chain.run(1500, 1)
    assert np.all(kept.elements[:, 1] < kept.elements[:, 3])


@pytest.mark.parametrize("broken", ["always", "inverted"])
def test_a_broken_acceptance_gives_another_mass(broken):
    """Accepting always, or with the ratio upside down, must be seen by the check above."""
    table, units, source = two_classes()
    labels = symmetry(table, source, units)
    task = make_task(table, units, source, labels)
    prior = table.element_prior.copy()
    swapped = prior[task.element_maps[0]]
    kernel_prior = np.ones_like(prior) if broken == "always" else swapped
    yes = _mass_with_a_move_that_believes(task, kernel_prior)
    low, high = yes.min(axis=1), yes.max(axis=1)
    expected = low**2 / (low**2 + high**2)
    assert abs(np.mean(yes[:, 0] < yes[:, 1]) - expected.mean()) > 0.2


def _mass_with_a_move_that_believes(task, prior: np.ndarray) -> np.ndarray:
    """Sweeps under the true prior, moves under another one; P(item 1 = yes) per draw (n, 2)."""
    from bayeslca.sampling.gibbs import sweep
    from bayeslca.sampling.label_move import swap_labels
    from bayeslca.sampling.layout import workspace

    @numba.njit
    def move(*arguments):
        return swap_labels(*arguments)

    rng = np.random.default_rng(SEED)
    work, wrong = workspace(task.layout), task.layout._replace(element_prior=prior)
    elements, prevalence = np.tile([0.2, 0.8, 0.8, 0.2], 5), np.array([[0.5, 0.5]])
    concentration = task.source.concentration
    out = np.empty((4000, 2))
    for i in range(len(out)):
        move(
            wrong,
            work,
            concentration,
            task.permutations,
            task.element_maps,
            elements,
            prevalence,
            rng,
        )
        sweep(task.layout, work, concentration, elements, prevalence, rng)
        out[i] = elements[[1, 3]]
    return out
