"""P(number of classes | answers) under other priors: against exact sums over all placements."""

from __future__ import annotations

from functools import cache
from itertools import product

import numpy as np
import pandas as pd
import pytest
from scipy.special import gammaln

from bayeslca.assess.class_count.counts_under_other_priors import AS_STATED, CountsUnderOtherPriors
from bayeslca.assess.comparison.compare import compare, compare_class_counts
from bayeslca.assess.comparison.comparison import Comparison
from bayeslca.exceptions import ModelError
from bayeslca.responses.responses import Responses

SEED = 20261207
ROWS = (("no", "a", "no"), ("no", "a", "no"), ("no", "b", "no"), ("yes", "c", "yes"),
        ("yes", "c", "yes"), ("yes", "a", "yes"), ("no", "c", "yes"))  # fmt: skip
VALUES = (("no", "yes"), ("a", "b", "c"), ("no", "yes"))
COUNTS = (1, 2, 3)
PRIOR = {1: 0.5, 2: 0.3, 3: 0.2}
STRENGTH = {AS_STATED: 1.0, "half as strong": 0.5, "twice as strong": 2.0}


@cache
def compared() -> Comparison:
    frame = pd.DataFrame(ROWS, columns=["fees", "source", "meets"])
    responses = Responses.from_frame(frame, items=list(frame.columns))
    return compare_class_counts(
        responses,
        COUNTS,
        statements=("P(fees=yes | .) ~ Beta(2, 1)",),
        prior_on_count=PRIOR,
        exact=False,
        seed=SEED,
        progress=False,
    )


@cache
def found() -> CountsUnderOtherPriors:
    return compared().under_other_priors(seed=SEED, progress=False)


def exact(strength: float) -> np.ndarray:
    """Return log evidences by summing over every placement of the cases."""
    out = []
    for n in COUNTS:
        logs = [_log_joint(np.array(z), n, strength) for z in product(range(n), repeat=len(ROWS))]
        out.append(np.logaddexp.reduce(logs))
    return np.array(out)


def _log_joint(classes: np.ndarray, n: int, strength: float) -> float:
    total = _dirichlet_multinomial(np.bincount(classes, minlength=n), np.full(n, strength))
    for item, values in enumerate(VALUES):
        prior = strength * (np.array([1.0, 2.0]) if item == 0 else np.ones(len(values)))
        for k in range(n):
            answers = [row[item] for row, mine in zip(ROWS, classes, strict=True) if mine == k]
            total += _dirichlet_multinomial(np.array([answers.count(v) for v in values]), prior)
    return total


def _dirichlet_multinomial(count: np.ndarray, prior: np.ndarray) -> float:
    a, n = prior.sum(), count.sum()
    return float(gammaln(a) - gammaln(a + n) + np.sum(gammaln(prior + count) - gammaln(prior)))


@pytest.mark.parametrize("name", list(STRENGTH))
def test_every_number_has_its_exact_probability(name: str) -> None:
    table = found().by_prior[name].table
    expected = exact(STRENGTH[name])
    error = np.maximum(table["log_evidence_mcse"].to_numpy(), 1e-9)
    assert error.max() < 0.05
    assert np.all(np.abs(table["log_evidence"].to_numpy() - expected) < 4 * error)
    weights = np.array([PRIOR[k] for k in COUNTS]) * np.exp(expected - expected.max())
    chance = weights / weights.sum()
    assert table["probability"].to_numpy() == pytest.approx(chance, abs=0.01)
    rows = found().table.loc[name]
    assert rows["probability"].to_numpy() == pytest.approx(chance, abs=0.01)


def test_words_say_whether_the_answer_hangs_on_the_prior() -> None:
    said = found().verdict
    for name in ("under priors half as strong", "under priors twice as strong"):
        assert name in said
    likeliest = {one.table["probability"].idxmax() for one in found().by_prior.values()}
    if len(likeliest) == 1:
        assert "Under each of these priors" in said
    else:
        assert "The most probable number hangs on the prior" in said
    assert "half as strong" in repr(found())


def test_a_prior_that_changes_nothing_is_left_out_and_said() -> None:
    frame = pd.DataFrame(ROWS, columns=["fees", "source", "meets"])
    responses = Responses.from_frame(frame, items=list(frame.columns))
    plain = compare_class_counts(
        responses, (1, 2), seed=SEED, draws=300, ess=200, r_hat=1.05, progress=False
    )
    same = plain.under_other_priors(["uniform"], progress=False)
    assert list(same.by_prior) == [AS_STATED]
    assert "Not done for priors that are uniform: it is the study's own prior" in same.verdict
    with pytest.raises(ModelError, match="no alternative prior 'half'"):
        plain.under_other_priors(["half"], progress=False)
    with pytest.raises(ModelError, match="no numbers of classes were compared"):
        compare({"a": plain.posteriors[2]}).under_other_priors()
