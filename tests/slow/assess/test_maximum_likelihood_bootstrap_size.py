"""Size and power of the bootstrap likelihood ratio test, by simulation.

Size: tables of two classes, tested 2 v 3 at 5 %; the share rejected must lie within a stated band
about .05. Power: three well separated classes at N = 300. Both designs are stated here, they are
no published ones.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import binom

from bayeslca import Item, LatentClassModel, Responses
from bayeslca.assess.likelihood.likelihood_ratio import likelihood_ratio_test

SEED = 20261212
TABLES = 300
SAMPLES = 39
"""With 39 drawn tables a p-value of at most .05 is one of the two largest of 40: exactly 5 %."""
ITEMS = tuple(Item(f"item_{j + 1}", ("no", "yes")) for j in range(6))
TWO = np.array([[0.85, 0.8, 0.9, 0.75, 0.8, 0.85], [0.2, 0.3, 0.15, 0.25, 0.2, 0.1]])
THREE = np.array(
    [
        [0.9, 0.9, 0.9, 0.9, 0.9, 0.9],
        [0.9, 0.9, 0.9, 0.1, 0.1, 0.1],
        [0.1, 0.1, 0.1, 0.1, 0.1, 0.1],
    ]
)


def share_rejected(yes: np.ndarray, n: int, tables: int) -> float:
    """Test 2 v 3 classes on tables from equally common classes."""
    rng = np.random.default_rng(SEED)
    rejected = 0
    for table in range(tables):
        codes = (rng.random((n, 6)) < yes[rng.integers(0, len(yes), size=n)]).astype(np.int16)
        responses = Responses(ITEMS, codes, np.ones(n, np.int64))
        fits = [
            LatentClassModel(ITEMS, k).maximum_likelihood(responses, starting_points=20, seed=1)
            for k in (2, 3)
        ]
        test = likelihood_ratio_test(*fits, samples=SAMPLES, seed=table, progress=False)
        rejected += test.p_value <= 0.05
    return rejected / tables


def test_size_is_nominal() -> None:
    share = share_rejected(TWO, 200, TABLES)
    low, high = binom(TABLES, 0.05).ppf([0.001, 0.999]) / TABLES
    # 99.8 % of the binomial; the parametric bootstrap is right only for large N, here N = 200.
    assert low <= share <= high


def test_power_for_three_separated_classes() -> None:
    assert share_rejected(THREE, 300, 30) == 1.0
