"""The telescoping sampler against exact probabilities of the number of classes."""

from __future__ import annotations

import tomllib
from functools import cache
from itertools import product
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import gammaln

from bayeslca.assess.class_count.unknown_count import sample_class_count
from bayeslca.exceptions import ModelError
from bayeslca.responses.responses import Responses

SEED = 20261217
REFERENCES = Path(__file__).parents[2] / "references"


@cache
def tiny(table: str) -> tuple[Responses, np.ndarray]:
    frame = pd.read_csv(REFERENCES / "tiny_tables_made_up.csv", dtype=str)
    frame = frame[frame["table"] == table].astype({"count": int})
    items = [name for name in frame.columns if name.startswith("item")]
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    parts = next(t for t in tables if t["id"] == "tiny_exact")["computed_evidence"]
    exact = next(part for part in parts if part["table"] == table)["log_evidence"]
    return Responses.from_frame(frame, items=items, counts="count"), np.array(exact)


@pytest.mark.parametrize("table", ["tiny_8", "tiny_12"])
@pytest.mark.parametrize("prior", [None, (4.0, 3.0, 2.0, 1.0)])
def test_probabilities_of_the_number_are_exact(table: str, prior: tuple | None) -> None:
    responses, log_evidence = tiny(table)
    weights = np.ones(4) if prior is None else np.array(prior)
    expected = weights * np.exp(log_evidence - log_evidence.max())
    expected /= expected.sum()
    found = sample_class_count(
        responses, 4, prior=None if prior is None else weights, seed=SEED, draws=40_000
    )
    error = found.table["mcse"].to_numpy()
    assert error.max() < 0.01
    assert np.all(np.abs(found.table["probability"] - expected) < 4 * error)
    assert found.table["filled"].sum() == pytest.approx(1.0)


ROWS = (("north", "no", "a"), ("north", "yes", None), ("south", "yes", "b"), ("south", "no", "c"),
        ("south", "yes", "c"))  # fmt: skip
VALUES = (("no", "yes"), ("a", "b", "c"))


def test_who_is_together_with_whom_is_exact_with_groups_and_missing_answers() -> None:
    frame = pd.DataFrame(ROWS, columns=["district", "fees", "source"])
    responses = Responses.from_frame(frame, items=["fees", "source"], group="district")
    found = sample_class_count(
        responses, 3, prior=np.array([1.0, 2.0, 1.0]), seed=SEED, draws=100_000
    )
    total, same, evidence = 0.0, np.zeros((5, 5)), np.zeros(3)
    for n, weight in ((1, 1.0), (2, 2.0), (3, 1.0)):
        for classes in product(range(n), repeat=len(ROWS)):
            p = weight * np.exp(_log_joint(np.array(classes), n))
            evidence[n - 1] += p
            total += p
            same += p * np.equal.outer(classes, classes)
    probability = found.table["probability"].to_numpy()
    assert np.all(np.abs(probability - evidence / total) < 4 * found.table["mcse"].to_numpy())
    assert found.together is not None
    order = responses.units.unit_of_row
    together = found.together[np.ix_(order, order)]
    apart = ~np.eye(5, dtype=bool)
    assert np.abs(together - same / total)[apart].max() < 0.01


def _log_joint(classes: np.ndarray, n: int) -> float:
    """Log probability of the answers and of who is in which of n classes."""
    groups = np.array([row[0] for row in ROWS])
    parts = [np.bincount(classes[groups == g], minlength=n) for g in ("north", "south")]
    for item, values in enumerate(VALUES):
        for k in range(n):
            answers = [row[item + 1] for row, mine in zip(ROWS, classes, strict=True) if mine == k]
            parts.append(np.array([answers.count(value) for value in values]))
    return float(
        sum(
            gammaln(len(one)) - gammaln(len(one) + one.sum()) + np.sum(gammaln(1.0 + one))
            for one in parts
        )
    )


def test_the_same_seed_gives_the_same_draws_whatever_the_threads() -> None:
    responses, _ = tiny("tiny_8")
    one, two = (
        sample_class_count(responses, 3, seed=SEED, draws=500, threads=threads)
        for threads in (1, 2)
    )
    assert one.table.equals(two.table)
    assert np.array_equal(one.together, two.together)


def test_restricted_classes_and_priors_that_do_not_fit_are_refused() -> None:
    responses, _ = tiny("tiny_8")
    with pytest.raises(ModelError, match="leave out what ties, bounds or fixes"):
        sample_class_count(responses, 3, statements=("P(item_1=1 | .) > 0.2",))
    with pytest.raises(ModelError, match="needs 3 numbers of 0 or more"):
        sample_class_count(responses, 3, prior=np.array([1.0, 2.0]))
    with pytest.raises(ModelError, match="whole number from 1"):
        sample_class_count(responses, 0)
