"""A Gibbs sweep against the cost of drawing its random numbers, in one run.

The floor is what no arrangement of the work can save: one uniform for each case that is placed
case by case, the binomials of the counts that are split at once, and one gamma for each element
and prevalence, at the parameters of the last sweep. The target is a ratio of at most 3.

Data: the 118 x 7 table of carcinoma ratings (tests/references/SOURCES.md), and made-up tables.
"""

from __future__ import annotations

import csv
import time
from pathlib import Path

import numba
import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units
from bayeslca.sampling.gibbs import run_sweeps
from bayeslca.sampling.layout import arrange, workspace
from bayeslca.sampling.split import CASE_BY_CASE

SEED = 20261209
THIN = 10
REPEATS = 31
HIGHEST_RATIO = 3.0


def carcinoma() -> np.ndarray:
    path = Path(__file__).parents[1] / "references" / "carcinoma_raters_1977.csv"
    with path.open(newline="") as file:
        rows = list(csv.reader(file))[1:]
    table = np.array([[int(value) for value in row] for row in rows])
    return np.repeat(table[:, :-1], table[:, -1], axis=0)


def made_up(n_cases: int, n_items: int, n_classes: int) -> np.ndarray:
    rng = np.random.default_rng(SEED)
    yes = rng.beta(0.7, 0.7, size=(n_classes, n_items))
    latent_class = rng.integers(n_classes, size=n_cases)
    return (rng.random((n_cases, n_items)) < yes[latent_class]).astype(np.int64)


TABLES = {
    "118 x 7": carcinoma,
    "300 x 7": lambda: made_up(300, 7, 3),
    "5000 x 12": lambda: made_up(5000, 12, 5),
}


@numba.njit(nogil=True, error_model="numpy")
def draw_numbers_only(n, uniforms, counts, shares, parameters, rng):
    total = 0.0
    for _ in range(n):
        for _ in range(uniforms):
            total += rng.random()
        for i in range(counts.shape[0]):
            total += rng.binomial(counts[i], shares[i])
        for i in range(parameters.shape[0]):
            total += rng.standard_gamma(parameters[i])
    return total


def seconds_a_sweep(answers: np.ndarray, n_classes: int) -> tuple[float, float]:
    """Time a sweep, and its random numbers alone."""
    n_items = answers.shape[1]
    builder = TableBuilder([2] * n_items, n_classes)
    for j in range(n_items):
        for k in range(n_classes):
            builder.set_item(0, j, k, builder.block([1.0, 1.0]))
    table = builder.build()
    pattern, inverse, count = np.unique(answers, axis=0, return_inverse=True, return_counts=True)
    group = np.zeros(count.size, dtype=np.int32)
    units = compile_units(table, Units(pattern.astype(np.int16), group, count, inverse))
    layout = arrange(table, units, 1)
    work, rng = workspace(layout), np.random.default_rng(SEED)
    elements, prevalence = np.full(table.n_elements, 0.5), np.full((1, n_classes), 1 / n_classes)
    elements += (
        np.where(np.arange(elements.size) % 2, 1, -1) * rng.random(elements.size // 2).repeat(2) / 3
    )
    draws = 100 if len(answers) < 1000 else 10

    def sweeps() -> None:
        failed = run_sweeps(
            layout,
            work,
            np.ones((1, n_classes)),
            np.zeros((0, 1, n_classes), dtype=np.int64),
            np.zeros((0, elements.size), dtype=np.int64),
            5,
            0,
            THIN,
            elements,
            prevalence,
            np.empty((draws, elements.size)),
            np.empty((draws, 1, n_classes)),
            np.empty(draws),
            np.empty(draws),
            rng,
        )
        assert not failed

    sweeps()
    large = layout.cases[layout.cases > CASE_BY_CASE]
    counts, shares = _binomials(large, prevalence[0])
    uniforms = int(layout.cases[layout.cases <= CASE_BY_CASE].sum())
    parameters = np.append(work.element_parameter, work.class_parameter)

    def floor() -> None:
        draw_numbers_only(draws * THIN, uniforms, counts, shares, parameters, rng)

    floor()
    # Both within some hundredths of a second, so that a busy machine slows both alike.
    spent = np.array([(_seconds(sweeps), _seconds(floor)) for _ in range(REPEATS)])
    typical = spent[np.argsort(spent[:, 0] / spent[:, 1])[REPEATS // 2]]
    return typical[0] / (draws * THIN), typical[1] / (draws * THIN)


def _binomials(large: np.ndarray, prevalence: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Conditional binomials of splitting large counts; most end after one or two of them."""
    n = min(prevalence.size - 1, 2)
    counts = np.repeat(large, n).astype(np.int64)
    return counts, np.full(counts.size, 0.3)


def _seconds(work) -> float:
    start = time.thread_time()  # this thread's own: other work on the machine does not count
    work()
    return time.thread_time() - start


CASES = [
    ("118 x 7", 3),
    *[("300 x 7", k) for k in range(1, 7)],
    ("5000 x 12", 5),
]


@pytest.mark.parametrize(("name", "n_classes"), CASES)
def test_a_sweep_costs_at_most_three_times_its_random_numbers(name, n_classes, record_property):
    sweep, floor = seconds_a_sweep(TABLES[name](), n_classes)
    record_property("microseconds a sweep", round(sweep * 1e6, 2))
    record_property("ratio", round(sweep / floor, 2))
    print(
        f"{name} cases x items, {n_classes} classes: {sweep * 1e6:.2f} us a sweep, "
        f"random numbers alone {floor * 1e6:.2f} us, ratio {sweep / floor:.2f}"
    )
    assert sweep / floor <= HIGHEST_RATIO
