"""The Dirichlet prevalence source against SciPy."""

import numpy as np
import pytest
from scipy import stats

from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource


@pytest.fixture
def source():
    return DirichletPrevalence(np.array([[1.0, 2.0, 3.0], [0.5, 0.5, 4.0]]))


def test_it_is_a_prevalence_source(source):
    checked: PrevalenceSource = source
    assert (checked.n_rows, checked.n_classes) == (2, 3)


def test_log_density_is_the_sum_over_rows(source):
    """Reference: scipy.stats.dirichlet."""
    rng = np.random.default_rng(4)
    prevalence = np.stack([source.simulate(rng) for _ in range(5)])
    expected = [
        sum(
            stats.dirichlet.logpdf(row / row.sum(), a)
            for row, a in zip(draw, source.concentration, strict=True)
        )
        for draw in prevalence
    ]
    np.testing.assert_allclose(source.log_density(prevalence), expected)


def test_draws_given_counts_have_the_conjugate_moments(source):
    """Reference: Dirichlet-multinomial conjugacy; 4 standard errors of 4000 draws."""
    rng = np.random.default_rng(6)
    counts = np.array([[10.0, 0.0, 3.0], [0.0, 7.0, 1.0]])
    draws = np.stack([source.draw(rng, counts) for _ in range(4000)])
    for g in range(2):
        target = stats.dirichlet(source.concentration[g] + counts[g])
        error = np.sqrt(target.var() / 4000)
        assert np.all(np.abs(draws[:, g].mean(axis=0) - target.mean()) < 4 * error)


def test_a_new_case_has_its_rows_prevalence(source):
    prevalence = np.random.default_rng(1).dirichlet(np.ones(3), size=(4, 2))
    assert np.array_equal(source.predict(prevalence, 1), prevalence[:, 1])


def test_it_is_invariant_only_where_parameters_are_alike(source):
    assert source.is_invariant(np.array([[0, 1, 2], [1, 0, 2]]))
    assert not source.is_invariant(np.array([[1, 0, 2], [1, 0, 2]]))
    assert source.class_key(1, 0) == source.class_key(1, 1) != source.class_key(1, 2)


@pytest.mark.pymc
@pytest.mark.parametrize("rows", [1, 2])
def test_the_pymc_piece_has_the_same_density(rows):
    import pymc as pm

    source = DirichletPrevalence(np.array([[1.0, 2.0, 3.0], [0.5, 0.5, 4.0]])[:rows])
    dims = ("group", "latent_class")[2 - rows :]
    coords = {"group": ["a", "b"], "latent_class": ["x", "y", "z"]}
    with pm.Model(coords=coords) as model:
        variable = source.to_pymc("prevalence", dims)
    value = source.simulate(np.random.default_rng(9))
    found = pm.logp(variable, value[0] if rows == 1 else value).eval()
    assert np.isclose(np.sum(found), source.log_density(value))
    assert model.named_vars_to_dims["prevalence"] == dims


@pytest.mark.pymc
def test_a_single_class_has_prevalence_one_in_pymc():
    import pymc as pm

    with pm.Model(coords={"latent_class": ["all"]}) as model:
        DirichletPrevalence(np.ones((1, 1))).to_pymc("prevalence", ("latent_class",))
    assert model.free_RVs == []
    assert model["prevalence"].eval().tolist() == [1.0]
