"""What bounds cost: a constrained sweep over an unconstrained one, in one run.

The target for binary items is a ratio of at most 2. Data: the 118 x 7 table of carcinoma ratings
(tests/references/SOURCES.md), three classes; every item's probabilities in a chain over the
classes, or above and below constants; and items of three categories (made up), ordered.
"""

from __future__ import annotations

import csv
import time
from pathlib import Path

import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.table_builder import TableBuilder
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.responses.units import Units
from bayeslca.sampling.chain import Chain, make_task

SEED = 20261210
SWEEPS = 2_000
REPEATS = 15
HIGHEST_RATIO = {"chains": 2.0, "constants": 2.0, "three categories": 5.0}


def carcinoma() -> np.ndarray:
    path = Path(__file__).parents[1] / "references" / "carcinoma_raters_1977.csv"
    with path.open(newline="") as file:
        rows = list(csv.reader(file))[1:]
    table = np.array([[int(value) for value in row] for row in rows])
    return np.repeat(table[:, :-1], table[:, -1], axis=0)


def builder(codes: np.ndarray, n_categories: int) -> tuple[TableBuilder, list[list]]:
    made = TableBuilder([n_categories] * codes.shape[1], 3)
    blocks = [[made.block([1.0] * n_categories) for _ in range(3)] for _ in range(codes.shape[1])]
    for j, row in enumerate(blocks):
        for k, elements in enumerate(row):
            made.set_item(0, j, k, elements)
    return made, blocks


def bound(made: TableBuilder, blocks: list[list], kind: str) -> None:
    for row in blocks:
        for k in range(3):
            if kind == "constants":
                made.bound(row[k][1], lower=0.02, upper=0.98)
            elif k < 2:
                made.order(row[k][1], row[k + 1][1])
                if kind == "three categories":
                    made.order(row[k][2], row[k + 1][2])


def chain(codes: np.ndarray, n_categories: int, kind: str | None) -> Chain:
    made, blocks = builder(codes, n_categories)
    if kind:
        bound(made, blocks, kind)
    table = made.build()
    pattern, count = np.unique(codes, axis=0, return_counts=True)
    units = Units(pattern, np.zeros(len(pattern), dtype=np.int32), count, np.arange(len(pattern)))
    task = make_task(table, compile_units(table, units), DirichletPrevalence(np.ones((1, 3))), None)
    rng = np.random.default_rng(SEED)
    return Chain(task, draw_inside(table, 1, rng)[0], np.full((1, 3), 1 / 3), rng)


@pytest.mark.parametrize("kind", HIGHEST_RATIO)
def test_a_constrained_sweep_costs_at_most_so_much_more(kind, record_property):
    n_categories = 3 if kind == "three categories" else 2
    codes = carcinoma()
    if n_categories == 3:
        codes = np.random.default_rng(SEED).integers(3, size=codes.shape)
    free, bounded = chain(codes, n_categories, None), chain(codes, n_categories, kind)
    seconds = np.empty((REPEATS, 2))
    for repeat in range(REPEATS):
        for at, one in enumerate((free, bounded)):
            start = time.thread_time()
            one.run(SWEEPS // 10, 10)
            seconds[repeat, at] = time.thread_time() - start
    each = seconds.min(axis=0) / SWEEPS * 1e6
    record_property("ratio", round(float(each[1] / each[0]), 2))
    print(f"{kind}: {each[1]:.2f} us a sweep, unconstrained {each[0]:.2f}: {each[1] / each[0]:.2f}")
    assert each[1] / each[0] <= HIGHEST_RATIO[kind]
