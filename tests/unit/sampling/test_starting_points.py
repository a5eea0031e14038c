"""Sorting short runs into modes, and sharing chains out among them."""

from __future__ import annotations

import threading

import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.symmetry import symmetry
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units
from bayeslca.sampling.chain import make_task
from bayeslca.sampling.starting_points import find_starting_points, sort_into_modes

SEED = 20261206
COUNT = np.array([10, 10])


def sort(log_posterior, fit, chains=4, same=1.0):
    fit = np.array([[f, -f] for f in fit])
    return sort_into_modes(np.array(log_posterior), fit, COUNT, same=same, chains=chains)


def test_runs_that_fit_alike_are_one_mode():
    points = sort([-100.0, -100.3, -99.8, -100.1], [0.0, 0.01, 0.02, 0.0])
    assert points.mode.tolist() == [0, 0, 0, 0]
    assert points.best == -99.8
    assert points.n_modes == 1
    assert sorted(points.kept.tolist()) == [0, 1, 2, 3]
    assert points.in_words() == "4 of 4 short runs reached the best mode"


def test_a_mode_far_below_is_dropped_and_told():
    points = sort([-100.0, -112.4, -100.2, -112.8, -112.5], [0.0, 1.0, 0.0, 1.0, 1.0])
    assert points.mode.tolist() == [0, 1, 0, 1, 1]
    assert points.dropped == (1,)
    assert set(points.mode[points.kept].tolist()) == {0}
    assert points.in_words() == (
        "2 of 5 short runs reached the best mode; 3 ended 12.4 nats lower and were dropped"
    )
    assert points.n_modes == 1


def test_a_mode_within_reach_keeps_a_chain():
    points = sort([-100.0, -109.0, -100.2, -100.1, -109.1], [0.0, 1.0, 0.0, 0.0, 1.0])
    assert points.n_modes == 2
    assert points.dropped == ()
    assert points.mode[points.kept].tolist() == [0, 1, 0, 0]
    assert points.kept[1] == 1  # its best run
    assert "2 ended 9.0 nats lower and kept a chain" in points.in_words()


def test_more_modes_than_chains_keep_the_best():
    points = sort([-100.0, -103.0, -106.0, -130.0], [0.0, 1.0, 2.0, 3.0], chains=2)
    assert points.n_modes == 3
    assert points.mode[points.kept].tolist() == [0, 1]
    assert points.dropped == (2, 3)


def test_equal_log_posteriors_with_other_fits_are_two_modes():
    points = sort([-100.0, -100.0], [0.0, 1.0], chains=2)
    assert points.mode.tolist() in ([0, 1], [1, 0])


def test_joining_modes_that_turned_out_to_be_one():
    points = sort([-100.0, -109.0, -100.2, -130.0], [0.0, 1.0, 0.0, 3.0])
    assert points.n_modes == 2
    joined = points.joined()
    assert joined.mode.tolist() == [0, 0, 0, 1]
    assert joined.n_modes == 1
    assert joined.dropped == (1,)
    assert joined.reached_best == 3
    assert sort([-1.0, -1.1], [0.0, 0.0], chains=2).joined().n_modes == 1


def two_modes():
    """Give two triples of items that each could make the classes; the first fits better."""
    rng = np.random.default_rng(SEED)
    n = 800
    a, b = rng.random(n) < 0.5, rng.random(n) < 0.5
    near = np.where(rng.random((n, 3)) < 0.99, a[:, None], ~a[:, None])
    other = np.where(rng.random((n, 3)) < 0.97, b[:, None], ~b[:, None])
    answers = np.hstack([near, other]).astype(np.int16)
    pattern, inverse, count = np.unique(answers, axis=0, return_inverse=True, return_counts=True)
    units = Units(pattern, np.zeros(count.size, dtype=np.int32), count, inverse.reshape(-1))
    builder = TableBuilder([2] * 6, 2, (0,))
    for j in range(6):
        for k in range(2):
            builder.set_item(0, j, k, builder.block([1.0, 1.0]))
    table = builder.build()
    source = DirichletPrevalence(np.ones((1, 2)))
    return make_task(table, compile_units(table, units), source, symmetry(table, source))


@pytest.mark.parametrize("threads", [1, 2])
def test_short_runs_find_two_modes_and_begin_from_the_better(threads):
    points, chains = find_starting_points(
        two_modes(),
        np.random.SeedSequence(SEED),
        chains=4,
        threads=threads,
        stop=threading.Event(),
    )
    assert points.n_runs == 16
    assert points.n_modes == 1
    assert np.sum(points.mode == 1) > 1  # found more than once, in both labellings
    assert 1 in points.dropped
    assert points.gap(1) > 100.0
    assert 0 < points.reached_best < 16
    strong = np.array([chain.elements.reshape(6, 2, 2)[:3, :, 1] for chain in chains])
    assert np.abs(strong[:, :, 0] - strong[:, :, 1]).min() > 0.9
