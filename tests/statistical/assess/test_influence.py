"""Cases that stand out against quadrature, and against fits of the responses without them."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.stats import beta

from bayeslca.assess.left_out.influence import Influence, influence
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261223
Z = 4.0
KNOWN = {"managed": (0.9, 0.8), "lapsed": (0.2, 0.3)}
COUNTS = {("yes", "yes"): 9, ("no", "no"): 7, ("yes", "no"): 3, ("no", "yes"): 1}


@cache
def known() -> Posterior:
    """Return a posterior where the prevalence alone is free, so that quadrature is exact.

    One response probability has a prior in place of a value: the sampler wants one to sample.
    """
    rows = [answers for answers, n in COUNTS.items() for _ in range(n)]
    frame = pd.DataFrame(rows, columns=["fees", "accounts"])
    responses = Responses.from_frame(frame, items=["fees", "accounts"])
    statements = [
        f"P({item}=yes | {name}) = {p[j]}"
        for name, p in KNOWN.items()
        for j, item in enumerate(("fees", "accounts"))
        if (name, item) != ("lapsed", "accounts")
    ]
    statements.append("P(accounts=yes | lapsed) ~ Beta(300000, 700000)")
    model = LatentClassModel(responses.items, classes=list(KNOWN), statements=statements)
    return model.sample(responses, seed=SEED, progress=False)


def density(answers: tuple[str, str], share: float) -> float:
    of = [
        math.prod(p if a == "yes" else 1 - p for a, p in zip(answers, KNOWN[name], strict=True))
        for name in KNOWN
    ]
    return share * of[0] + (1 - share) * of[1]


class Quadrature:
    """The posterior of the share of managed, uniform before the answers."""

    def __init__(self, counts: dict[tuple[str, str], int]) -> None:
        self.counts = counts
        self.total = self._integral(lambda share: 1.0)

    def _integral(self, of: object) -> float:
        def weighed(share: float) -> float:
            likelihood = math.prod(density(a, share) ** n for a, n in self.counts.items())
            return 1e6 * likelihood * of(share)  # type: ignore[operator]

        return quad(weighed, 0, 1, epsabs=0, epsrel=1e-10)[0]

    def mean(self, of: object) -> float:
        return self._integral(of) / self.total


def without(answers: tuple[str, str]) -> Quadrature:
    return Quadrature({a: n - (a == answers) for a, n in COUNTS.items()})


@pytest.mark.parametrize("exact", [False, True])
def test_densities_and_changes_are_those_of_quadrature(exact: bool) -> None:
    found = influence(known(), exact=exact, progress=False)
    full = Quadrature(COUNTS)
    mean = full.mean(lambda share: share)
    sd = math.sqrt(full.mean(lambda share: (share - mean) ** 2))
    assert found.table["log_density"].is_monotonic_increasing
    assert found.table["refitted"].all() == exact
    for row in found.table.to_dict("records"):
        answers = (row["fees"], row["accounts"])
        left = without(answers)
        log_density = math.log(left.mean(lambda share, a=answers: density(a, share)))
        assert abs(row["log_density"] - log_density) < 0.02
        change = (left.mean(lambda share: share) - mean) / sd
        assert row["largest_mcse"] < 0.1
        assert abs(row["sd_managed"] - change) < Z * row["largest_mcse"] + 0.02, answers
        assert row["change_managed"] == pytest.approx(row["sd_managed"] * 100 * sd, rel=0.1)
        assert row["change_lapsed"] == pytest.approx(-row["change_managed"])
        assert row["count"] == COUNTS[answers]


def test_how_surprising_cases_are_is_exact() -> None:
    found = influence(known(), progress=False)
    full, n = Quadrature(COUNTS), sum(COUNTS.values())
    score = {a: full.mean(lambda share, a=a: density(a, share)) for a in COUNTS}
    # Tail probability of each pattern among new cases, all scored alike.
    tail = {a: sum(p for p in score.values() if p <= score[a] + 1e-12) for a in COUNTS}
    for row in found.table.to_dict("records"):
        answers = (row["fees"], row["accounts"])
        loo = without(answers).mean(lambda share, a=answers: density(a, share))
        low = [a for a in COUNTS if score[a] <= loo or a == answers]
        p = min(sum(score[a] for a in low), 1.0)
        assert abs(row["p_new_case"] - p) < Z * math.sqrt(p * (1 - p) / (1000 * n)) + 0.01
        as_low = [a for a in COUNTS if tail[a] <= p + 0.005]
        some = full.mean(
            lambda share, low=as_low: 1 - (1 - sum(density(a, share) for a in low)) ** n
        )
        assert abs(row["p_replicate"] - some) < Z * math.sqrt(some * (1 - some) / 1000) + 0.01


@cache
def odd(classes: int) -> tuple[Posterior, Influence]:
    items = [f"item_{j}" for j in range(1, 9)]
    rows = [[1] * 8] * 12 + [[0] * 8] * 12 + [[0, 1] * 4]
    responses = Responses.from_frame(pd.DataFrame(rows, columns=items).astype(str), items=items)
    statements = [f"P({name}=1 | .) ~ Beta(0.3, 0.3)" for name in items]
    model = LatentClassModel(responses.items, classes, statements=statements)
    posterior = model.sample(responses, seed=SEED, progress=False)
    return posterior, posterior.influence(progress=False)


def test_a_case_with_a_class_to_itself_is_found_and_agrees_with_a_fit_without_it() -> None:
    posterior, found = odd(3)
    row = found.table.iloc[0]
    assert row["rows"] == "25"
    assert row["refitted"]
    assert row["pareto_k"] > 0.7
    # The model has a class for it, so that replicates hold its like: it is not surprising.
    assert {finding.kind for finding in found.findings} == {"influential_case"}
    assert "leaving out row 25" in found.verdict.lower()

    responses = posterior.responses
    left = replace(
        responses,
        codes=responses.codes[:-1],
        counts=responses.counts[:-1],
        group_codes=responses.group_codes[:-1],
    )
    again = posterior.model.sample(left, seed=SEED + 1, progress=False)
    # Without its only case the third class is nearly empty; classes stand by falling prevalence.
    smallest = again.prevalence_draws[:, :, 0].min(axis=-1)
    before = posterior.prevalence_draws[:, :, 0]
    gap = 100 * (again.prevalence_draws[:, :, 0] - before).mean(axis=(0, 1))
    assert smallest.mean() < before[..., 2].mean()
    error = 100 * before.std(axis=(0, 1)) * row["largest_mcse"]
    changes = row[[f"change_{k}" for k in (1, 2, 3)]].to_numpy(dtype=float)
    assert np.all(np.abs(changes - gap) < Z * error + 0.5), (changes, gap)


def test_a_case_that_no_class_fits_is_surprising() -> None:
    _, found = odd(2)
    row = found.table.iloc[0]
    assert row["rows"] == "25"
    assert row["p_replicate"] < 0.05
    assert "surprising_case" in {finding.kind for finding in found.findings}


def test_prior_of_the_quadrature() -> None:
    # The quadrature itself, without answers: the mean of a uniform share (SciPy).
    none = Quadrature(dict.fromkeys(COUNTS, 0))
    assert none.mean(lambda share: share) == pytest.approx(beta(1, 1).mean())
