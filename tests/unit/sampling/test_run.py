"""The run: same draws for a seed, rounds and thinning, limits, Ctrl-C, refusals."""

from __future__ import annotations

import threading
import time
from types import SimpleNamespace

import numpy as np
import pytest

from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.compile import compile_units, verified_log_weight
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.symmetry import symmetry
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units
from bayeslca.sampling.chain import Chain, Kept, make_task, thinned
from bayeslca.sampling.run import WARMUP, sample_table, seed_sequence

SEED = 20261207


def problem(n_classes: int = 2, n_cases: int = 80, groups: int = 2):
    builder = TableBuilder([2, 2, 3, 2], n_classes, (0,) * groups)
    for j, n in enumerate([2, 2, 3, 2]):
        for k in range(n_classes):
            builder.set_item(0, j, k, builder.block(np.ones(n)))
    table = builder.build()
    rng = np.random.default_rng(SEED)
    latent_class = rng.integers(2, size=n_cases)
    answers = (rng.random((n_cases, 4)) < np.where(latent_class, 0.85, 0.15)[:, None]).astype(int)
    answers[rng.random(answers.shape) < 0.05] = -1
    group = rng.integers(groups, size=n_cases)
    keyed = np.column_stack([group, answers])
    pattern, inverse, count = np.unique(keyed, axis=0, return_inverse=True, return_counts=True)
    units = Units(
        pattern[:, 1:].astype(np.int16), pattern[:, 0].astype(np.int32), count, inverse.reshape(-1)
    )
    source = DirichletPrevalence(np.ones((groups, n_classes)))
    return table, compile_units(table, units), source, symmetry(table, source)


def test_a_seed_gives_the_same_draws_whatever_the_threads():
    runs = [
        sample_table(*problem(), seed=7, threads=threads, draws=300, ess=400, r_hat=1.05)
        for threads in (1, 2, 4)
    ]
    for other in runs[1:]:
        for name in ("elements", "prevalence", "log_likelihood", "log_prior"):
            assert np.array_equal(getattr(runs[0], name), getattr(other, name))
        assert other.sweeps == runs[0].sweeps
        assert np.array_equal(other.starts.kept, runs[0].starts.kept)
    another = sample_table(*problem(), seed=8, threads=2, draws=300, ess=400, r_hat=1.05)
    assert not np.array_equal(another.elements, runs[0].elements)


def test_chains_differ_from_one_another():
    draws = sample_table(*problem(), seed=7, draws=100, ess=50, r_hat=1.1)
    last = draws.log_likelihood[:, -1]
    assert np.unique(last).size == draws.n_chains


def test_log_likelihood_and_prior_belong_to_their_draws():
    table, units, source, labels = problem()
    draws = sample_table(table, units, source, labels, seed=7, draws=60, ess=50, r_hat=1.1)
    each = log_unit_likelihood(table, units, draws.elements, draws.prevalence)
    assert draws.log_likelihood == pytest.approx(each @ units.count, rel=1e-10)
    expected = log_prior(table, source, draws.elements, draws.prevalence)
    assert draws.log_prior == pytest.approx(expected)
    assert draws.elements.shape == (4, 60, table.n_elements)
    assert draws.prevalence.shape == (4, 60, 2, 2)
    assert draws.n_classes == 2
    assert draws.seed == 7
    assert draws.statistics["accepted_swaps"].shape == (4, 60)


def test_the_rule_is_met_or_the_limit_is_told():
    from arviz_stats.base import array_stats

    met = sample_table(*problem(n_classes=3), seed=1, draws=500, ess=600)
    assert not met.limit_reached
    assert met.sweeps == WARMUP + 500 * met.thin
    ranked = np.sort(met.prevalence[:, :, 0], axis=-1)
    for k in range(3):
        assert array_stats.ess(ranked[..., k], method="bulk") >= 600
        assert array_stats.rhat(ranked[..., k]) <= 1.01
    limited = sample_table(
        *problem(n_classes=3), seed=1, draws=500, ess=1999, r_hat=1.0001, max_sweeps=2600
    )
    assert limited.limit_reached
    assert limited.sweeps <= 2600
    assert limited.n_draws == 500


def test_watched_quantities_hold_the_run_too():
    calls = []

    def watch(draws):
        calls.append(draws.n_draws)
        trend = np.linspace(0.0, 1.0, draws.n_draws)
        return {"trend": np.tile(trend, (draws.n_chains, 1))}

    draws = sample_table(*problem(), seed=1, draws=200, ess=100, max_sweeps=8000, watch=watch)
    assert draws.limit_reached
    assert len(calls) >= 3


def test_thinning_keeps_evenly_spaced_sweeps():
    def kept(first, n, step):
        at = first + step * np.arange(n, dtype=float)
        return Kept(at[:, None], at[:, None, None], at, np.ones(n))

    older, newer = kept(4, 6, 4), kept(32, 3, 8)
    both = thinned(older, newer)
    assert np.diff(both.log_likelihood) == pytest.approx(8.0)
    assert both.swaps.tolist() == [2, 2, 2, 1, 1, 1]  # no accepted move is forgotten


def test_where_blocks_end_does_not_change_the_draws():
    task = make_task(*problem())
    runs = []
    for seconds_per_sweep in (1e-7, 1.0):
        rng = np.random.default_rng(3)
        chain = Chain(task, np.repeat(0.5, task.table.n_elements), np.full((2, 2), 0.5), rng)
        chain._seconds_per_sweep = seconds_per_sweep
        runs.append(chain.run(40, 3).elements)
    assert np.array_equal(*runs)


def test_ctrl_c_ends_the_run_and_leaves_nothing_running():
    before = threading.active_count()

    def interrupt(progress):
        if progress.sweeps > 3000:
            raise KeyboardInterrupt

    start = time.perf_counter()
    with pytest.raises(KeyboardInterrupt):
        sample_table(
            *problem(n_classes=4), seed=1, ess=4000, max_sweeps=50_000_000, progress=interrupt
        )
    assert time.perf_counter() - start < 20.0
    assert threading.active_count() == before


def test_a_generator_and_a_sequence_serve_as_seeds():
    first = seed_sequence(np.random.default_rng(1)).generate_state(2)
    assert np.array_equal(first, seed_sequence(np.random.default_rng(1)).generate_state(2))
    sequence = np.random.SeedSequence(5)
    assert seed_sequence(sequence).entropy == 5
    draws = sample_table(*problem(), seed=np.random.default_rng(1), draws=50, ess=20, r_hat=1.1)
    assert draws.seed is None


def test_one_class_alone_works():
    draws = sample_table(*problem(n_classes=1, groups=1), seed=1)
    assert np.all(draws.prevalence == 1.0)
    assert not draws.limit_reached


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"chains": 0}, r"chains=0, draws=1000: sampling takes at least 1 chain"),
        ({"draws": 100}, r"ess=1000 asks for more effective draws than 4 chains of 100"),
        ({"max_sweeps": 700}, r"max_sweeps=700 leaves no room for 500 sweeps of warm-up"),
    ],
)
def test_settings_that_cannot_work_are_refused(options, message):
    with pytest.raises(SamplingError, match=message):
        sample_table(*problem(), seed=1, **options)


def test_no_answers_at_all_are_refused():
    table, _, source, labels = problem()
    empty = compile_units(
        table,
        Units(
            np.zeros((0, 4), dtype=np.int16),
            np.zeros(0, dtype=np.int32),
            np.zeros(0, dtype=np.int64),
            np.zeros(0, dtype=np.int64),
        ),
    )
    with pytest.raises(ModelError, match="no case answered a single item"):
        sample_table(table, empty, source, labels, seed=1)


def test_answers_that_no_class_allows_are_refused_by_name():
    builder = TableBuilder([2, 2], 2, (0,))
    for k in range(2):
        builder.set_known(0, k, k, {1: 0.0})
        builder.set_item(0, 1 - k, k, builder.block([1.0, 1.0]))
    table = builder.build()
    pattern = np.array([[0, 0], [1, 1], [1, 0]], dtype=np.int16)
    units = Units(pattern, np.zeros(3, dtype=np.int32), np.array([4, 2, 3]), np.arange(3))
    source = DirichletPrevalence(np.ones((1, 2)))
    with pytest.raises(ModelError, match=r"2 cases gave answers that no class allows.*unit 2"):
        sample_table(table, compile_units(table, units), source, None, seed=1)
    verified = verified_log_weight(np.array([-1, -1, 0]), 2)
    allowed = compile_units(
        table, Units(pattern[[0, 2]], units.group[:2], units.count[:2], np.arange(2)), verified[:2]
    )
    assert (
        sample_table(table, allowed, source, None, seed=1, draws=50, ess=20, r_hat=1.1).n_draws
        == 50
    )


def test_what_has_no_exact_step_is_refused():
    table, units, _, labels = problem()

    class Other:
        n_rows, n_classes = 2, 2

    with pytest.raises(SamplingError, match="prevalences come from Other"):
        make_task(table, units, Other(), labels)


def test_cases_with_impossible_answers_are_named_as_in_the_responses():
    import pandas as pd

    from bayeslca.responses.responses import Responses
    from bayeslca.sampling.run import draw_posterior

    builder = TableBuilder([2, 2], 2, (0,))
    for k in range(2):
        builder.set_known(0, k, k, {1: 0.0})
        builder.set_item(0, 1 - k, k, builder.block([1.0, 1.0]))
    frame = pd.DataFrame(
        {
            "place": ["east", "west", "north"],
            "one": ["no", "yes", "yes"],
            "two": ["no", "yes", "no"],
        }
    )
    responses = Responses.from_frame(frame, items=["one", "two"], case="place")
    model = SimpleNamespace(
        table=builder.build(),
        prevalence_source=DirichletPrevalence(np.ones((1, 2))),
        symmetry=None,
    )
    with pytest.raises(ModelError, match=r"1 case gave answers that no class allows.*'west'"):
        draw_posterior(model, responses, seed=1, progress=False)
