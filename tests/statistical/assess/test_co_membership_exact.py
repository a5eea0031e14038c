"""Who is together with whom, and the sets that follow, against all ways to place every case."""

from __future__ import annotations

import csv
from collections.abc import Callable
from functools import cache
from itertools import product
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import gammaln

from bayeslca._typing import Ints
from bayeslca.assess.class_count.unknown_count import sample_class_count
from bayeslca.assess.comparison.compare import compare_class_counts
from bayeslca.assess.comparison.comparison import Comparison
from bayeslca.assess.together.co_membership import CoMembership
from bayeslca.assess.together.partition import variation_of_information
from bayeslca.responses.responses import Responses

SEED = 20261205
REFERENCES = Path(__file__).parents[2] / "references"
ROWS = (("no", "a", "no"), ("no", "a", "no"), ("no", "b", "no"), ("yes", "c", "yes"),
        ("yes", "c", None), ("yes", "c", "yes"), ("no", "c", "yes"))  # fmt: skip
VALUES = (("no", "yes"), ("a", "b", "c"), ("no", "yes"))
COUNTS = (1, 2, 3)


@cache
def responses() -> Responses:
    frame = pd.DataFrame(ROWS, columns=["fees", "source", "meets"])
    return Responses.from_frame(frame, items=list(frame.columns))


@cache
def compared() -> Comparison:
    return compare_class_counts(
        responses(), COUNTS, seed=SEED, draws=2000, ess=2000, progress=False
    )


@cache
def enumerated() -> dict[int, list[tuple[float, np.ndarray]]]:
    """Return every placement with its weight p(answers, placement | n classes), by n."""
    return {
        n: [
            (float(np.exp(_log_joint(np.array(classes), n))), np.array(classes))
            for classes in product(range(n), repeat=len(ROWS))
        ]
        for n in COUNTS
    }


def _log_joint(classes: np.ndarray, n: int) -> float:
    parts = [np.bincount(classes, minlength=n)]
    for item, values in enumerate(VALUES):
        for k in range(n):
            answers = [row[item] for row, mine in zip(ROWS, classes, strict=True) if mine == k]
            parts.append(np.array([answers.count(value) for value in values]))
    return float(
        sum(
            gammaln(len(one)) - gammaln(len(one) + one.sum()) + np.sum(gammaln(1.0 + one))
            for one in parts
        )
    )


def placements(numbers: tuple[int, ...]) -> list[tuple[float, np.ndarray]]:
    """Return placements with probabilities; every number of classes weighs the same before."""
    some = [one for n in numbers for one in enumerated()[n]]
    total = sum(weight for weight, _ in some)
    return [(weight / total, classes) for weight, classes in some]


def expected_loss(found: CoMembership, numbers: tuple[int, ...]) -> Callable[[Ints], float]:
    """Return the exact expected distance of a partition of the units.

    The distance itself is checked against scikit-learn in tests/unit/assess/test_partition.py.
    """
    placed = placements(numbers)
    splits = np.zeros((len(placed), found.units.n_units, max(numbers)), dtype=int)
    for s, (_, classes) in enumerate(placed):
        np.add.at(splits[s], (found.units.unit_of_row, classes), 1)
    weight = np.array([one for one, _ in placed])
    count = found.units.count
    return lambda labels: float(weight @ variation_of_information(labels, splits, count))


def all_partitions(n: int) -> list[list[int]]:
    found: list[list[int]] = [[]]
    for _ in range(n):
        found = [[*one, k] for one in found for k in range(max(one, default=-1) + 2)]
    return found


def check(found: CoMembership, numbers: tuple[int, ...]) -> None:
    unit = found.units.unit_of_row
    same = sum(w * np.equal.outer(classes, classes) for w, classes in placements(numbers))
    apart = ~np.eye(len(ROWS), dtype=bool)
    gap = found.probability[np.ix_(unit, unit)] - same
    error = found.mcse[np.ix_(unit, unit)]
    assert error.max() < 0.01
    # Errors from 20 batches: 5 of them for 21 pairs of cases.
    assert np.all(np.abs(gap[apart]) < 5 * error[apart] + 1e-9)
    exact = expected_loss(found, numbers)
    losses = [exact(np.array(labels)) for labels in all_partitions(found.units.n_units)]
    mine = exact(found.partition.labels)
    # 1,000 sampled partitions give a mean distance to within some .02 bits.
    assert found.partition.loss == pytest.approx(mine, abs=0.06)
    assert mine < min(losses) + 0.02
    assert np.median(losses) > mine + 0.2


def test_two_classes() -> None:
    check(compared().posteriors[2].co_membership(), (2,))


def test_averaged_over_the_number_of_classes() -> None:
    check(compared().averaged().co_membership(), COUNTS)


def test_number_sampled() -> None:
    found = sample_class_count(responses(), 3, seed=SEED, draws=40_000).co_membership
    assert found is not None
    check(found, COUNTS)


def test_averaged_probabilities_of_patterns_are_exact() -> None:
    # P(next case has this pattern | answers): evidence with it added over evidence without.
    table = compared().averaged().pattern_probabilities()
    total = sum(weight for n in COUNTS for weight, _ in enumerated()[n])
    unit = responses().units.unit_of_row
    for row in (0, 3, 4):
        at = unit[row]
        exact = 0.0
        for n in COUNTS:
            for weight, classes in enumerated()[n]:
                sizes = np.bincount(classes, minlength=n)
                chance = 0.0
                for k in range(n):
                    p = (sizes[k] + 1.0) / (len(ROWS) + n)
                    for item, values in enumerate(VALUES):
                        if ROWS[row][item] is None:
                            continue
                        answers = [
                            r[item]
                            for r, mine in zip(ROWS, classes, strict=True)
                            if mine == k and r[item] is not None
                        ]
                        p *= (answers.count(ROWS[row][item]) + 1.0) / (len(answers) + len(values))
                    chance += p
                exact += weight / total * chance
        assert abs(table["probability"].iloc[at] - exact) < 5 * table["mcse"].iloc[at]
        assert table["mcse"].iloc[at] < 0.02 * exact


def test_both_ways_agree_on_a_published_table() -> None:
    # Carcinoma slides (Landis & Koch 1977): evidences against the telescoping sampler.
    with (REFERENCES / "carcinoma_raters_1977.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    slides = Responses.from_frame(frame, items=head[:-1], counts=head[-1])
    found = compare_class_counts(slides, range(2, 5), seed=SEED, progress=False).averaged()
    sampled = sample_class_count(
        slides, 4, prior=np.array([0.0, 1.0, 1.0, 1.0]), seed=SEED, draws=20_000
    )
    one, other = found.pattern_probabilities(), sampled.patterns
    assert other is not None
    error = np.hypot(one["mcse"], other["mcse"])
    assert np.all(np.abs(one["probability"] - other["probability"]) < 5 * error)
    assert np.all(error < 0.1 * one["probability"] + 1e-4)
    mine, theirs = found.co_membership(), sampled.co_membership
    assert theirs is not None
    error = np.hypot(mine.mcse, theirs.mcse)
    assert error.max() < 0.03
    assert np.all(np.abs(mine.probability - theirs.probability) < 5 * error + 1e-3)
    assert mine.partition.loss == pytest.approx(theirs.partition.loss, abs=0.06)
    assert mine.partition.n_sets == theirs.partition.n_sets == 3
