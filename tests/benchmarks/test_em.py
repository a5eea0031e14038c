"""EM from 100 starting points on the 118 x 7 table, four classes: ours against plain NumPy.

The NumPy EM is the usual one, in the style of scikit-learn's mixtures: cases by classes as matrix
products in logs, no collapsing to patterns. Both climb from the same points and must find the same
maxima. The target is a ratio of at least 20.

Data: carcinoma ratings (tests/references/SOURCES.md).
"""

from __future__ import annotations

import csv
import time
from pathlib import Path

import numpy as np
import pytest
from scipy.special import logsumexp

from bayeslca import Item, LatentClassModel, Responses
from bayeslca.assess.likelihood.em import climb
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.em_runs import scattered
from bayeslca.assess.likelihood.likelihood_ratio import likelihood_ratio_test
from bayeslca.model.compile import compile_units

SEED = 20261213
STARTS = 100
STEPS = 300
"""Steps of every run of NumPy's; ours end earlier where nothing is left to gain, so that times are
compared by step."""
LOWEST_RATIO = 20.0


def carcinoma() -> Responses:
    path = Path(__file__).parents[1] / "references" / "carcinoma_raters_1977.csv"
    with path.open(newline="") as file:
        rows = list(csv.reader(file))
    table = np.array([[int(value) for value in row] for row in rows[1:]])
    codes = np.repeat(table[:, :-1], table[:, -1], axis=0).astype(np.int16)
    items = tuple(Item(name, ("0", "1")) for name in rows[0][:-1])
    return Responses(items, codes, np.ones(len(codes), np.int64))


def numpy_em(codes: np.ndarray, prevalence: np.ndarray, yes: np.ndarray) -> float:
    """Do STEPS steps; yes has the shape (K, J)."""
    x = codes.astype(float)
    with np.errstate(divide="ignore", invalid="ignore"):
        for _ in range(STEPS):
            p = np.clip(yes, 1e-300, 1.0 - 1e-16)
            joint = x @ np.log(p).T + (1 - x) @ np.log1p(-p).T + np.log(prevalence)
            shares = np.exp(joint - logsumexp(joint, axis=1, keepdims=True))
            cases = shares.sum(axis=0)
            prevalence, yes = cases / len(x), shares.T @ x / cases[:, None]
        p = np.clip(yes, 1e-300, 1.0 - 1e-16)
        joint = x @ np.log(p).T + (1 - x) @ np.log1p(-p).T + np.log(prevalence)
    return float(logsumexp(joint, axis=1).sum())


@pytest.mark.benchmark(group="EM, 100 starts, 118 x 7, four classes")
def test_em_against_numpy() -> None:
    responses = carcinoma()
    model = LatentClassModel(responses.items, 4)
    blocks = AllBlocks.of(model)
    layout = blocks.layout(compile_units(model.table, model.units(responses)))
    points = scattered(blocks, STARTS, np.random.default_rng(SEED))
    trace = np.empty(0)
    climb(layout, points[0].copy(), 2, 0.0, trace)  # compiled before the clock starts

    began = time.thread_time()
    runs = [climb(layout, point.copy(), STEPS, 0.0, trace) for point in points]
    ours_seconds = time.thread_time() - began
    ours = [value for value, _ in runs]
    steps = sum(taken + 1 for _, taken in runs)

    started = []
    for point in points:
        one = blocks.parameters(point)
        yes = one.elements[model.table.direct_element[model.table.response_row[0, 1::2]]].T
        started.append((one.prevalence[0], yes))
    began = time.process_time()
    theirs = [numpy_em(responses.codes, *start) for start in started]
    theirs_seconds = time.process_time() - began

    a_step, their_step = ours_seconds / steps, theirs_seconds / (STARTS * STEPS)
    ratio = their_step / a_step
    print(
        f"\na step: NumPy {1e6 * their_step:.0f} us, ours {1e6 * a_step:.1f} us: {ratio:.0f} times"
    )
    assert np.abs(np.array(ours) - np.array(theirs)).max() < 1e-3
    assert ratio >= LOWEST_RATIO


@pytest.mark.benchmark(group="bootstrap test, 999 tables, 118 x 7, three v four classes")
def test_bootstrap_in_seconds() -> None:
    responses = carcinoma()
    fits = [
        LatentClassModel(responses.items, k).maximum_likelihood(responses, seed=SEED)
        for k in (3, 4)
    ]
    began = time.process_time()
    test = likelihood_ratio_test(*fits, samples=999, seed=SEED, progress=False)
    used = time.process_time() - began
    print(f"\n999 tables: {test.seconds:.1f} s, {used:.1f} s of processor time")
    assert used < 30.0
