"""Effective draws per second after relabelling, and the whole comparison: ours and by hand in PyMC.

Not part of the test suite (some minutes): ``pytest tests/benchmarks/test_effective_draws.py -s``.
"""

import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

HERE = Path(__file__).parent
TABLE = HERE.parent / "references" / "carcinoma_raters_1977.csv"
RATERS = [f"rater_{letter}" for letter in "abcdefg"]
CLASSES = 3
PER_SECOND, PER_SECOND_COMPILED = 50.0, 10.0
"""Targets: ours over NUTS with its compilation, and without it."""


def smallest_ess(draws):
    """Return the smallest bulk ESS (ArviZ's) of quantities (chain, draw, quantity)."""
    import arviz_stats.base

    found = [arviz_stats.base.array_stats.ess(draws[..., q]) for q in range(draws.shape[-1])]
    return float(np.min(found))


def ours():
    """Return effective draws and processor seconds of one fit, code compiled before."""
    import bayeslca as lca

    responses = lca.Responses.read(TABLE, items=RATERS, counts="count")
    model = lca.LatentClassModel(responses.items, CLASSES)
    model.sample(responses, seed=1, progress=False)
    begin = time.process_time()
    posterior = model.sample(responses, seed=2, progress=False)
    seconds = time.process_time() - begin
    shares = posterior.prevalence_draws[:, :, 0]
    looks = posterior.response_probability_draws.reshape(*shares.shape[:2], -1)
    return smallest_ess(np.concatenate([shares, looks[..., ::2]], axis=-1)), seconds


def by_hand():
    """Return effective draws, processor seconds with compilation, and of sampling alone."""
    sys.path.insert(0, str(HERE))
    import pymc as pm
    from hand_written_pymc import fit, read_cases

    answers = read_cases(TABLE)
    sampling = {}
    plain = pm.sample

    def timed(*args, **kwargs):
        begin = time.process_time()
        tree = plain(*args, cores=1, **kwargs)
        sampling["all"] = time.process_time() - begin
        sampling["alone"] = float(tree["posterior"].attrs["sampling_time"])
        return tree

    pm.sample = timed
    try:
        begin = time.process_time()
        tree = fit(answers, CLASSES, seed=2)
        seconds = time.process_time() - begin
    finally:
        pm.sample = plain
    posterior = tree["posterior"]
    order = np.argsort(-posterior["prevalence"].values, axis=-1)
    shares = np.take_along_axis(posterior["prevalence"].values, order, axis=-1)
    yes = np.take_along_axis(posterior["yes"].values, order[..., None], axis=-2)
    both = np.concatenate([shares, yes.reshape(*shares.shape[:2], -1)], axis=-1)
    return smallest_ess(both), seconds, sampling["alone"]


@pytest.mark.pymc
def test_effective_draws_per_second():
    """One process, one after the other; the slowest quantity of each, labels put right."""
    mine, my_seconds = ours()
    theirs, with_compilation, alone = by_hand()
    rate = mine / my_seconds
    print(
        f"\nbayeslca: {mine:.0f} effective draws in {my_seconds:.2f} s, {rate:.0f} a second"
        f"\nby hand: {theirs:.0f} in {with_compilation:.1f} s ({alone:.1f} s of sampling): "
        f"ratio {rate / (theirs / with_compilation):.0f}, {rate / (theirs / alone):.0f}"
    )
    assert rate / (theirs / with_compilation) >= PER_SECOND
    assert rate / (theirs / alone) >= PER_SECOND_COMPILED


def seconds_of(script, counts):
    """Return the seconds of a whole process."""
    begin = time.perf_counter()
    words = [sys.executable, "-W", "ignore", str(HERE / script), str(TABLE), *map(str, counts)]
    subprocess.run(words, capture_output=True, check=True)
    return time.perf_counter() - begin


@pytest.mark.pymc
def test_the_whole_comparison_with_evidence_takes_less_than_two_counts_by_hand():
    """K = 1..6 with evidences against the hand-written K = 1..2, caches warm in both."""
    seconds_of("ours_on_table.py", [1, 2])
    mine = seconds_of("ours_on_table.py", range(1, 7))
    theirs = seconds_of("hand_written_pymc.py", [1, 2])
    print(f"\nbayeslca, K = 1..6 with evidence: {mine:.1f} s; by hand, K = 1..2: {theirs:.1f} s")
    assert mine < theirs
