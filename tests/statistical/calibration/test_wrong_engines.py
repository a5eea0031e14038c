"""Calibration can fail: engines that are wrong on purpose are rejected.

Each is wrong in one place, as real engines have been; the right engine passes the same
experiments in test_calibration.py.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from experiments import (
    DRAWS,
    Data,
    Engine,
    Experiment,
    bounded,
    exploratory,
    gibbs,
    many_categories_some_missing,
    named_nearly_alike,
    named_two_groups,
    p_values,
    run_chain,
    smallest,
    two_groups,
    units_of,
)

from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import draw_elements
from bayeslca.model.simulate import Parameters
from bayeslca.model.symmetry import element_map, symmetry
from bayeslca.responses.units import MISSING
from bayeslca.sampling.chain import make_task

SEED = 20261205
FEW, MANY = 40, 80
"""Replicates: what is grossly wrong shows in few."""
LEVEL = 1e-3


def prior_times(factor: float) -> Engine:
    def engine(experiment: Experiment, data: Data, seed: np.random.SeedSequence) -> Parameters:
        prior = experiment.table.element_prior * factor
        table = replace(experiment.table, element_prior=prior)
        return gibbs(replace(experiment, table=table), data, seed)

    return engine


def prevalence_prior_dropped(experiment, data, seed):
    source = DirichletPrevalence(experiment.source.concentration * 0.1)
    return gibbs(replace(experiment, source=source), data, seed)


def one_case_too_few(experiment, data, seed):
    return gibbs(experiment, data.without(data.group.size - 1), seed)


def category_shifted(experiment, data, seed):
    codes = data.codes.copy()
    given = codes[:, 0] != MISSING
    codes[given, 0] = (codes[given, 0] + 1) % experiment.n_categories[0]
    return gibbs(experiment, replace(data, codes=codes), seed)


def missing_is_the_first_category(experiment, data, seed):
    return gibbs(experiment, replace(data, codes=np.maximum(data.codes, 0)), seed)


def one_prevalence_row(experiment, data, seed):
    return gibbs(experiment, replace(data, group=np.zeros_like(data.group)), seed)


def bounds_forgotten(experiment, data, seed):
    size = experiment.table.n_elements
    table = replace(experiment.table, element_lower=np.zeros(size), element_upper=np.ones(size))
    return gibbs(replace(experiment, table=table), data, seed)


def labels_move_without_the_prior_ratio(experiment, data, seed):
    draws = gibbs(experiment, data, seed)
    members = symmetry(experiment.table, experiment.source).table_group.proposals
    rng = np.random.default_rng(seed)
    elements, prevalence = draws.elements.copy(), draws.prevalence.copy()
    for s in np.flatnonzero(rng.random(len(elements)) < 0.5):
        permutation = members[rng.integers(len(members))]
        elements[s] = elements[s, element_map(experiment.table, permutation)]
        prevalence[s] = np.take_along_axis(prevalence[s], permutation, axis=1)
    return Parameters(elements, prevalence)


def labels_do_not_move(experiment, data, seed):
    _, units = units_of(experiment, data)
    return run_chain(
        make_task(experiment.table, units, experiment.source, labels=None), seed, starts=1
    )


def prior_alone(experiment, data, seed):
    rng = np.random.default_rng(seed)
    return Parameters(
        np.array([draw_elements(experiment.table, rng) for _ in range(DRAWS)]),
        np.array([experiment.source.simulate(rng) for _ in range(DRAWS)]),
    )


@pytest.mark.parametrize(
    ("engine", "experiment", "replicates"),
    [
        pytest.param(prior_times(0.1), exploratory(2), MANY, id="prior nearly dropped"),
        pytest.param(prior_times(2.0), exploratory(2), FEW, id="prior doubled"),
        pytest.param(prevalence_prior_dropped, two_groups(), FEW, id="prevalence prior dropped"),
        pytest.param(one_case_too_few, exploratory(2, 5, 8), FEW, id="one case too few"),
        pytest.param(category_shifted, many_categories_some_missing(), FEW, id="category shifted"),
        pytest.param(
            missing_is_the_first_category,
            many_categories_some_missing(),
            FEW,
            id="missing is an answer",
        ),
        pytest.param(one_prevalence_row, two_groups(), FEW, id="one prevalence row"),
        pytest.param(bounds_forgotten, bounded(), MANY, id="bounds forgotten"),
        pytest.param(
            labels_move_without_the_prior_ratio,
            named_two_groups(),
            FEW,
            id="move without prior ratio",
        ),
        pytest.param(labels_do_not_move, named_nearly_alike(), MANY, id="labels do not move"),
    ],
)
def test_a_wrong_engine_is_rejected(
    engine: Engine, experiment: Experiment, replicates: int
) -> None:
    found = p_values(experiment, SEED, replicates, engine)
    assert smallest(found) < LEVEL, found


def test_only_a_quantity_of_the_data_sees_an_engine_that_ignores_the_data() -> None:
    """Draws of the prior rank every parameter uniformly: why the log likelihood is ranked too."""
    found = p_values(named_two_groups(), SEED, MANY, prior_alone)
    assert min(p for name, p in found.items() if "element" in name or "prevalence" in name) > LEVEL
    assert found["log likelihood"] < LEVEL
