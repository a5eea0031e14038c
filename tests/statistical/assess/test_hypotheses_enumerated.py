"""Bayes factors of tiny tables against sums over all allocations of cases to classes.

The exact values are computed here: eight cases, two classes, every one of the 256 allocations,
each with its closed form (beta functions; two-way orders of Betas by quadrature).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import cache
from itertools import product

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.special import betainc, betaln, logsumexp
from scipy.stats import beta

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses

SEED = 1951
ROWS = np.array(
    [[1, 1, 1], [1, 1, 0], [1, 0, 1], [1, 1, 1], [0, 0, 0], [0, 1, 0], [0, 0, 1], [0, 0, 0]]
)
ITEMS = ("fees", "accounts", "meets")
PRIORS = (
    "P(fees=yes | managed) ~ Beta(6, 1)",  # tells the classes apart
    "P(fees=yes | lapsed) ~ Beta(1, 3)",
    "P(accounts=yes | managed) ~ Beta(2, 2)",
    "P(accounts=yes | lapsed) ~ Beta(2, 2)",
)
SHAPES = {
    ("fees", 0): (6.0, 1.0),
    ("fees", 1): (1.0, 3.0),
    ("accounts", 0): (2.0, 2.0),
    ("accounts", 1): (2.0, 2.0),
    ("meets", 0): (1.0, 1.0),
    ("meets", 1): (1.0, 1.0),
}
Shapes = dict[tuple[str, int], tuple[float, float]]


@pytest.fixture(scope="module")
def posterior() -> Posterior:
    frame = pd.DataFrame(np.where(ROWS, "yes", "no"), columns=ITEMS)
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in ITEMS]
    responses = Responses.from_frame(frame, items=items)
    model = LatentClassModel(responses.items, ("managed", "lapsed"), PRIORS)
    return model.sample(responses, seed=SEED, draws=2000, ess=4000, progress=False)


def after(classes: np.ndarray) -> Shapes:
    """Beta parameters of every probability given the classes."""
    out = {}
    for (item, k), (a, b) in SHAPES.items():
        answers = ROWS[classes == k, ITEMS.index(item)]
        out[item, k] = (a + answers.sum(), b + (1 - answers).sum())
    return out


def exact_log_bayes_factor(log_ratio: Callable[[Shapes], float]) -> float:
    """Average over allocations of p(hypothesis | classes) / p(hypothesis)."""
    logs, ratios = [], []
    for allocation in product((0, 1), repeat=len(ROWS)):
        classes = np.array(allocation)
        now = after(classes)
        n = np.bincount(classes, minlength=2)
        weight = betaln(1 + n[0], 1 + n[1])
        weight += sum(betaln(*now[key]) - betaln(*SHAPES[key]) for key in SHAPES)
        logs.append(weight)
        ratios.append(log_ratio(now) - log_ratio(SHAPES))
    weights = np.array(logs) - logsumexp(logs)
    return float(logsumexp(weights + np.array(ratios)))


def equal(*keys: tuple[str, int]) -> Callable[[Shapes], float]:
    """Log density that Beta variates are equal (rule 9)."""

    def log_density(shapes: Shapes) -> float:
        a = sum(shapes[key][0] for key in keys) - len(keys) + 1
        b = sum(shapes[key][1] for key in keys) - len(keys) + 1
        return float(betaln(a, b) - sum(betaln(*shapes[key]) for key in keys))

    return log_density


@cache
def _greater(one: tuple[float, float], two: tuple[float, float]) -> float:
    value = quad(
        lambda x: math.exp(beta.logpdf(x, *one)) * betainc(*two, x), 0, 1, epsabs=0, epsrel=1e-9
    )[0]
    return math.log(value)


def greater(one: tuple[str, int], two: tuple[str, int]) -> Callable[[Shapes], float]:
    return lambda shapes: _greater(shapes[one], shapes[two])


def above(key: tuple[str, int], bound: float) -> Callable[[Shapes], float]:
    return lambda shapes: float(beta.logsf(bound, *shapes[key]))


def both(*parts: Callable[[Shapes], float]) -> Callable[[Shapes], float]:
    return lambda shapes: sum(part(shapes) for part in parts)


M, L = 0, 1
CASES = {
    # Savage and Dickey with Beta(2, 2), with Beta(1, 1), and across both.
    "P(accounts=yes | managed) = P(accounts=yes | lapsed)": equal(("accounts", M), ("accounts", L)),
    "P(meets=yes | managed) = P(meets=yes | lapsed)": equal(("meets", M), ("meets", L)),
    "P(meets=yes | managed) = P(accounts=yes | managed)": equal(("meets", M), ("accounts", M)),
    "P(accounts=yes | managed) > P(accounts=yes | lapsed)": greater(
        ("accounts", M), ("accounts", L)
    ),
    "P(accounts=yes | managed) < P(meets=yes | lapsed)": greater(("meets", L), ("accounts", M)),
    "P(meets=yes | lapsed) > 0.9": above(("meets", L), 0.9),
    # Far away, where plain counting of draws would find nothing.
    "P(fees=yes | lapsed) > 0.95": above(("fees", L), 0.95),
    "P(fees=yes | lapsed) > 0.999": above(("fees", L), 0.999),
    "P(fees=yes | lapsed) > P(fees=yes | managed)": greater(("fees", L), ("fees", M)),
    "P(meets=yes | managed) = P(meets=yes | lapsed) and "
    "P(accounts=yes | managed) > P(accounts=yes | lapsed)": both(
        equal(("meets", M), ("meets", L)), greater(("accounts", M), ("accounts", L))
    ),
}


@pytest.mark.parametrize("text", list(CASES))
def test_bayes_factor_is_the_ratio_of_exact_evidences(posterior: Posterior, text: str) -> None:
    found = posterior.test(text)
    exact = exact_log_bayes_factor(CASES[text])
    assert found.method == "weighed"
    assert found.log_bayes_factor_mcse < 0.1
    # Four standard errors, and half a percent for the quadrature.
    assert found.log_bayes_factor == pytest.approx(
        exact, abs=4 * found.log_bayes_factor_mcse + 0.005
    )


def test_share_of_draws_agrees_with_the_exact_probability(posterior: Posterior) -> None:
    found = posterior.test("P(accounts=yes | managed) - P(accounts=yes | lapsed) > 0")
    log_factor = exact_log_bayes_factor(greater(("accounts", M), ("accounts", L)))
    exact = math.exp(log_factor) * 0.5
    assert found.method == "counted"
    assert found.posterior_probability == pytest.approx(exact, abs=4 * found.posterior_mcse)


def exact_draws(n: int) -> tuple[dict[tuple[str, int], np.ndarray], np.ndarray]:
    """Draw probabilities and the prevalence from the exact posterior: a mixture of Betas."""
    rng = np.random.default_rng(SEED)
    logs, shapes, sizes = [], [], []
    for allocation in product((0, 1), repeat=len(ROWS)):
        classes = np.array(allocation)
        now, counts = after(classes), np.bincount(classes, minlength=2)
        parts = sum(betaln(*now[key]) - betaln(*SHAPES[key]) for key in SHAPES)
        logs.append(betaln(1 + counts[0], 1 + counts[1]) + parts)
        shapes.append(now)
        sizes.append(counts)
    which = rng.choice(len(logs), size=n, p=np.exp(np.array(logs) - logsumexp(logs)))
    a = {key: np.array([now[key] for now in shapes])[which] for key in SHAPES}
    share = rng.beta(*(1 + np.array(sizes)[which]).T)
    return {key: rng.beta(ab[:, 0], ab[:, 1]) for key, ab in a.items()}, share


def test_class_given_answers_has_its_exact_posterior(posterior: Posterior) -> None:
    p, share = exact_draws(200_000)
    one = share * p["fees", M] * (1 - p["meets", M])
    other = (1 - share) * p["fees", L] * (1 - p["meets", L])
    exact = one / (one + other)
    found = posterior.quantity("P(managed | fees=yes, meets=no)")
    error = math.hypot(found.mcse, exact.std() / math.sqrt(exact.size))
    assert found.mean == pytest.approx(exact.mean(), abs=4 * error)
    assert found.sd == pytest.approx(exact.std(), rel=0.1)
    assert found.median == pytest.approx(np.median(exact), abs=0.02)


def test_difference_and_ratio_have_their_exact_posterior(posterior: Posterior) -> None:
    p, _ = exact_draws(200_000)
    exact = p["accounts", M] - p["accounts", L]
    found = posterior.quantity("P(accounts=yes | managed) - P(accounts=yes | lapsed)")
    error = math.hypot(found.mcse, exact.std() / math.sqrt(exact.size))
    assert found.mean == pytest.approx(exact.mean(), abs=4 * error)
    odds = p["accounts", M] / (1 - p["accounts", M])
    ratio = posterior.quantity("P(accounts=yes | managed) / P(accounts=no | managed)")
    assert ratio.median == pytest.approx(np.median(odds), rel=0.06)
    assert ratio.upper == pytest.approx(np.quantile(odds, 0.975), rel=0.15)
