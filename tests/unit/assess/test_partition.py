"""Point partitions: the distance against scikit-learn, the search against all partitions."""

from __future__ import annotations

import numpy as np
import pytest
from sklearn.metrics import mutual_info_score

from bayeslca.assess.together.partition import point_partition, variation_of_information

SEED = 20261203


def sampled(count: list[int], n: int, n_classes: int, rng: np.random.Generator) -> np.ndarray:
    """Draw partitions in which some units lean to some classes."""
    lean = rng.dirichlet(np.full(n_classes, 0.4), size=len(count))
    return np.stack([[rng.multinomial(c, p) for c, p in zip(count, lean, strict=True)]
                     for _ in range(n)])  # fmt: skip


def all_partitions(n: int) -> list[list[int]]:
    """Return every way to put n units into sets, as labels (restricted growth strings)."""
    found: list[list[int]] = [[]]
    for _ in range(n):
        found = [[*one, k] for one in found for k in range(max(one, default=-1) + 2)]
    return found


def test_distance_is_that_of_entropies_and_mutual_information() -> None:
    # Meila 2007: H(C) + H(Z) - 2 I(C, Z); scikit-learn computes I, and H(C) = I(C, C), in nats.
    rng = np.random.default_rng(SEED)
    count = [1, 4, 2, 7, 3]
    splits = sampled(count, 6, 3, rng)
    labels = np.array([0, 1, 1, 2, 0])
    cases = np.repeat(labels, count)
    found = variation_of_information(labels, splits, np.array(count))
    for s, distance in enumerate(found):
        classes = np.concatenate([np.repeat(np.arange(3), row) for row in splits[s]])
        expected = mutual_info_score(cases, cases) + mutual_info_score(classes, classes)
        expected -= 2.0 * mutual_info_score(cases, classes)
        assert distance == pytest.approx(expected / np.log(2.0), abs=1e-12)


@pytest.mark.parametrize("trial", range(8))
def test_no_partition_of_few_patterns_lies_nearer(trial: int) -> None:
    rng = np.random.default_rng([SEED, trial])
    count = rng.integers(1, 5, size=7)
    splits = sampled(count.tolist(), 60, 4, rng)
    share = splits / count[:, None]
    together = np.einsum("suk,svk->uv", share, share) / len(splits)
    found = point_partition(splits, count, together)
    losses = [
        variation_of_information(np.array(labels), splits, count).mean()
        for labels in all_partitions(7)
    ]
    assert len(losses) == 877  # the seventh Bell number
    assert found.loss == pytest.approx(min(losses), abs=1e-9)
    assert found.radius >= found.loss * 0.9
    sizes = np.bincount(found.labels, weights=count)
    assert np.all(np.diff(sizes) <= 0)


def test_certain_partitions_are_found_as_they_are() -> None:
    labels = np.array([0, 1, 0, 2, 1])
    count = np.array([5, 2, 1, 1, 2])
    splits = np.zeros((10, 5, 3), dtype=int)
    splits[:, np.arange(5), labels] = count
    together = np.equal.outer(labels, labels).astype(float)
    found = point_partition(splits, count, together)
    assert found.labels.tolist() == labels.tolist()
    assert found.loss == found.radius == 0.0
    assert found.n_sets == 3


def test_a_single_pattern_is_one_set() -> None:
    found = point_partition(np.array([[[2, 1]]]), np.array([3]), np.ones((1, 1)))
    assert found.n_sets == 1
    assert found.loss == pytest.approx(np.log2(3) - 2 / 3)  # entropy of 2 and 1 of 3
