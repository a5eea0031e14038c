"""Posteriors under every kind of constraint, against what the constraint means.

The reference is written from the meaning of each statement alone (rules: shared probabilities
have the conditional prior given that they are equal, a = sum a_i - (m - 1); the rest is cut off
at the bounds): probabilities are drawn from that prior with plain NumPy, draws outside the bounds
are thrown away, and the rest is weighted by the likelihood of a tiny table. No table, block or
sampler of the package takes part. No source but arithmetic. Agreement within 4.5 standard errors
of both together (some 20 means and mean squares a case).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest

from bayeslca import LatentClassModel, Responses
from bayeslca.model.probabilities import response_probability
from bayeslca.sampling.run import draw_posterior

SEED = 20261203
N_PRIOR = 400_000
HIGHEST_Z = 4.5

FEES, MEETS, TYPE = 0, 1, 2
M, L = 0, 1
TELLS_APART = "P(fees=yes | managed) ~ Beta(3, 1)"

ANSWERS = [
    # fees, meets, type, district, count
    ("yes", "yes", "a", "north", 3),
    ("yes", "no", "a", "south", 2),
    ("no", "no", "b", "north", 2),
    ("no", "yes", "c", "south", 2),
    ("yes", None, "b", "south", 1),
    ("no", "no", None, "north", 1),
]


def responses(groups: bool) -> Responses:
    frame = pd.DataFrame(ANSWERS, columns=["fees", "meets", "type", "district", "n"])
    return Responses.from_frame(
        frame,
        items=["fees", "meets", "type"],
        counts="n",
        group="district" if groups else None,
    )


@dataclass
class Prior:
    """Draws (n, groups, K) of prevalences and (n, groups, K, categories) of answers."""

    rng: np.random.Generator
    prevalence: np.ndarray
    answers: list[np.ndarray]
    keep: np.ndarray

    @classmethod
    def free(cls, n: int, n_classes: int, groups: int = 1, by_group: bool = False) -> Prior:
        rng = np.random.default_rng(SEED)
        shape = (n, groups if by_group else 1, n_classes)
        answers = [rng.dirichlet(np.ones(c), size=shape) for c in (2, 2, 3)]
        answers[FEES][:, :, M, 1] = rng.beta(3, 1, size=shape[:2])
        answers[FEES][:, :, M, 0] = 1 - answers[FEES][:, :, M, 1]
        answers = [np.broadcast_to(a, (n, groups, *a.shape[2:])).copy() for a in answers]
        prevalence = rng.dirichlet(np.ones(n_classes), size=(n, groups))
        return cls(rng, prevalence, answers, np.ones(n, dtype=bool))

    def yes(self, item: int, k: int, g: int = 0) -> np.ndarray:
        return self.answers[item][:, g, k, 1]

    def type(self, category: str, k: int) -> np.ndarray:
        return self.answers[TYPE][:, 0, k, "abc".index(category)]

    def where(self, kept: np.ndarray) -> None:
        self.keep &= kept

    def set_yes(self, item: int, k: int, values: np.ndarray | float) -> None:
        self.answers[item][:, :, k, 1] = np.reshape(values, (-1, 1))
        self.answers[item][:, :, k, 0] = 1 - self.answers[item][:, :, k, 1]

    def set_type(self, k: int, values: np.ndarray) -> None:
        self.answers[TYPE][:, 0, k] = values


@dataclass(frozen=True)
class Case:
    statements: tuple[str, ...]
    meaning: Callable[[Prior], None]
    classes: tuple[str, ...] = ("managed", "lapsed")
    groups: bool = False
    free_by_group: bool | tuple[str, ...] = False


def order(prior):
    prior.where(prior.yes(FEES, M) > prior.yes(FEES, L))


def interval(prior):
    for k in (M, L):
        prior.where((prior.yes(MEETS, k) > 0.2) & (prior.yes(MEETS, k) < 0.7))


def order_of_no_and_yes(prior):
    prior.where(1 - prior.yes(FEES, L) > prior.yes(MEETS, M))
    prior.where(prior.yes(MEETS, M) > prior.yes(MEETS, L))


def falling_categories(prior):
    prior.where(prior.type("a", M) > prior.type("b", M))
    prior.where(prior.type("b", M) > prior.type("c", M))


def rising_categories(prior):
    prior.where(prior.type("a", M) < prior.type("b", M))
    prior.where(prior.type("c", M) < 0.4)


def crossing_categories(prior):
    prior.where(prior.type("a", M) > prior.type("a", L))
    prior.where(prior.type("b", M) < prior.type("b", L))


def set_of_categories(prior):
    prior.where(1 - prior.type("c", L) < 0.6)
    prior.where(prior.type("a", L) > 0.1)


def equal_items(prior):
    prior.set_yes(FEES, L, prior.yes(MEETS, L))  # two uniform priors: uniform


def equal_turned_round(prior):
    prior.set_yes(FEES, M, 1 - prior.yes(MEETS, L))
    shared = prior.rng.beta(3, 1, size=prior.keep.size)  # the stated prior is the shared one's
    prior.set_yes(FEES, M, shared)
    prior.set_yes(MEETS, L, 1 - shared)


def tied_across_sizes(prior):
    # Beta(1, 2) of one of three and Beta(1, 1): shared Beta(1 + 1 - 1, 2 + 1 - 1).
    shared = prior.rng.beta(1, 2, size=prior.keep.size)
    rest = prior.rng.random(prior.keep.size)
    prior.set_yes(MEETS, M, shared)
    values = [shared, (1 - shared) * rest, (1 - shared) * (1 - rest)]
    prior.set_type(M, np.stack(values, axis=1))
    prior.where(shared > 0.25)


def known(prior):
    prior.set_yes(MEETS, L, 0.15)
    rest = prior.rng.random(prior.keep.size)
    values = [0.75 * rest, np.full(rest.size, 0.25), 0.75 * (1 - rest)]
    prior.set_type(M, np.stack(values, axis=1))
    prior.where(prior.type("a", M) > 0.3)


def equal_categories(prior):
    # Dirichlet(1, 1, 1) given that two are equal: their sum is Beta(1, 1).
    both = prior.rng.random(prior.keep.size)
    prior.set_type(L, np.stack([both / 2, both / 2, 1 - both], axis=1))
    prior.where(prior.type("a", L) > 0.2)


def half_pole(prior):
    values = prior.rng.beta(0.5, 0.5, size=prior.keep.size)
    prior.set_yes(MEETS, L, values)
    prior.where(values < prior.yes(MEETS, M))


def common_class(prior):
    prior.where(prior.prevalence[:, 0, 0] > prior.prevalence[:, 0, 2])
    prior.where(prior.prevalence[:, 0, 2] > 0.1)


def known_prevalence(prior):
    rest = 0.7 * prior.rng.random(prior.keep.size)
    prior.prevalence[:, 0] = np.stack([np.full(rest.size, 0.3), rest, 0.7 - rest], axis=1)
    prior.where(rest > 0.7 - rest)


def equal_prevalences(prior):
    both = prior.rng.random(prior.keep.size)  # Dirichlet(1, 1, 1) given that two are equal
    prior.prevalence[:, 0] = np.stack([both / 2, 1 - both, both / 2], axis=1)


def districts_ordered(prior):
    prior.where(prior.prevalence[:, 0, 0] > prior.prevalence[:, 1, 0])
    prior.where((prior.prevalence[:, :, 0] > 0.3).all(axis=1))


def districts_equal(prior):
    prior.prevalence[:, 1] = prior.prevalence[:, 0]  # uniform priors: uniform


def free_item_ordered(prior):
    prior.answers[MEETS][:, 1] = prior.answers[MEETS][:, 0]
    prior.answers[TYPE][:, 1] = prior.answers[TYPE][:, 0]
    prior.where(prior.yes(FEES, M, 0) > prior.yes(FEES, M, 1))
    prior.where(prior.yes(FEES, L, 0) > prior.yes(FEES, L, 1))


def free_but_one_equal(prior):
    prior.answers[MEETS][:, 1] = prior.answers[MEETS][:, 0]
    prior.answers[TYPE][:, 1] = prior.answers[TYPE][:, 0]
    # Beta(3, 1) is stated for both districts, and is the shared one's.
    prior.answers[FEES][:, 1, M] = prior.answers[FEES][:, 0, M]
    for g in (0, 1):
        prior.where(prior.yes(FEES, M, g) > prior.yes(FEES, L, g))


THREE = ("managed", "informal", "lapsed")
THREE_APART = (
    "P(meets=yes | informal) ~ Beta(2, 1)",
    "P(meets=yes | lapsed) ~ Beta(1, 2)",
)


def three(meaning):
    """Add the priors that tell three classes apart to what a constraint means."""

    def both(prior):
        prior.set_yes(MEETS, 1, prior.rng.beta(2, 1, size=prior.keep.size))
        prior.set_yes(MEETS, 2, prior.rng.beta(1, 2, size=prior.keep.size))
        meaning(prior)

    return both


CASES = {
    "order": Case(("P(fees=yes | managed) > P(fees=yes | lapsed)",), order),
    "interval": Case(("0.2 < P(meets=yes | .) <= 0.7",), interval),
    "order of no and yes": Case(
        (
            "P(fees=no | lapsed) > P(meets=yes | managed)",
            "P(meets=no | managed) < P(meets=no | lapsed)",
        ),
        order_of_no_and_yes,
    ),
    "falling categories": Case(
        ("P(type=a | managed) > P(type=b | managed) > P(type=c | managed)",), falling_categories
    ),
    "rising categories": Case(
        ("P(type=a | managed) < P(type=b | managed)", "P(type=c | managed) < 0.4"),
        rising_categories,
    ),
    "crossing categories": Case(
        (
            "P(type=a | managed) > P(type=a | lapsed)",
            "P(type=b | lapsed) >= P(type=b | managed)",
        ),
        crossing_categories,
    ),
    "set of categories": Case(
        ("P(type in {a, b} | lapsed) < 0.6 and P(type=a | lapsed) > 0.1",), set_of_categories
    ),
    "equal items": Case(("P(fees=yes | lapsed) = P(meets=yes | lapsed)",), equal_items),
    "equal turned round": Case(
        ("P(fees=no | managed) = P(meets=yes | lapsed)",), equal_turned_round
    ),
    "tied across sizes": Case(
        ("P(type=a | managed) = P(meets=yes | managed)", "P(type=a | managed) > 0.25"),
        tied_across_sizes,
    ),
    "known": Case(
        (
            "P(meets=yes | lapsed) = 0.15",
            "P(type=b | managed) = 1/4",
            "P(type=a | managed) > 0.3",
        ),
        known,
    ),
    "equal categories": Case(("P(type=a | lapsed) = P(type=b | lapsed) > 0.2",), equal_categories),
    "pole": Case(
        (
            "P(meets=yes | lapsed) ~ Beta(0.5, 0.5)",
            "P(meets=yes | lapsed) < P(meets=yes | managed)",
        ),
        half_pole,
    ),
    "common class": Case(
        ("P(managed) > P(lapsed) > 0.1", *THREE_APART), three(common_class), THREE
    ),
    "known prevalence": Case(
        ("P(managed) = 0.3", "P(informal) > P(lapsed)", *THREE_APART),
        three(known_prevalence),
        THREE,
    ),
    "equal prevalences": Case(
        ("P(managed) = P(lapsed)", *THREE_APART), three(equal_prevalences), THREE
    ),
    "districts ordered": Case(
        ("P(managed | district=north) > P(managed | district=south)", "P(managed) > 0.3"),
        districts_ordered,
        groups=True,
    ),
    "districts equal": Case(
        ("P(managed | district=north) = P(managed | district=south)",),
        districts_equal,
        groups=True,
    ),
    "free item ordered": Case(
        ("P(fees=yes | ., district=north) > P(fees=yes | ., district=south)",),
        free_item_ordered,
        groups=True,
        free_by_group=("fees",),
    ),
    "free but one equal": Case(
        (
            "P(fees=yes | managed, district=north) = P(fees=yes | managed, district=south)",
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
        ),
        free_but_one_equal,
        groups=True,
        free_by_group=("fees",),
    ),
}


def likelihood(prior: Prior, groups: bool) -> np.ndarray:
    value = np.ones(prior.keep.size)
    for fees, meets, kind, district, count in ANSWERS:
        g = 1 if groups and district == "south" else 0
        joint = prior.prevalence[:, g].copy()
        for item, answer, categories in (
            (FEES, fees, ("no", "yes")),
            (MEETS, meets, ("no", "yes")),
            (TYPE, kind, ("a", "b", "c")),
        ):
            if answer is not None:
                joint *= prior.answers[item][:, g, :, categories.index(answer)]
        value *= joint.sum(axis=1) ** count
    return value


def expected(case: Case) -> tuple[np.ndarray, np.ndarray]:
    """Means of all probabilities and of their squares, with their standard errors."""
    groups = 2 if case.groups else 1
    prior = Prior.free(N_PRIOR, len(case.classes), groups, bool(case.free_by_group))
    case.meaning(prior)
    weight = (likelihood(prior, case.groups) * prior.keep)[prior.keep]
    weight /= weight.sum()
    assert 1 / np.sum(weight**2) > 2_000
    every = [prior.prevalence, *prior.answers]
    values = np.concatenate([v[prior.keep].reshape(weight.size, -1) for v in every], axis=1)
    values = np.concatenate([values, values**2], axis=1)
    mean = weight @ values
    return mean, np.sqrt(weight**2 @ (values - mean) ** 2)


def found(case: Case) -> tuple[np.ndarray, np.ndarray]:
    data = responses(case.groups)
    model = LatentClassModel(
        data.items,
        case.classes,
        (TELLS_APART, *case.statements),
        data.groups,
        free_by_group=case.free_by_group,
    )
    draws = draw_posterior(
        model, data, seed=SEED, draws=2500, ess=2000, max_sweeps=60_000, progress=False
    )
    assert np.isfinite(draws.log_prior).all()
    by_answer = response_probability(model.table, draws.elements)  # (chain, draw, G, K, A)
    groups = draws.prevalence.shape[2]
    by_answer = np.broadcast_to(by_answer, (*by_answer.shape[:2], groups, *by_answer.shape[3:]))
    parts = [draws.prevalence]
    starts = model.table.item_start
    parts += [by_answer[..., a:b] for a, b in pairwise(starts)]
    shape = draws.prevalence.shape[:2]
    values = np.concatenate([part.reshape(*shape, -1) for part in parts], axis=-1)
    values = np.concatenate([values, values**2], axis=-1)
    batches = values.reshape(4 * 25, -1, values.shape[-1]).mean(axis=1)
    return values.mean(axis=(0, 1)), batches.std(axis=0, ddof=1) / np.sqrt(len(batches))


@pytest.mark.parametrize("name", CASES)
def test_the_posterior_is_what_the_statements_mean(name):
    case = CASES[name]
    mean, error = expected(case)
    ours, our_error = found(case)
    known_values = (error < 1e-12) & (our_error < 1e-12)
    np.testing.assert_allclose(ours[known_values], mean[known_values], atol=1e-12)
    z = (ours - mean)[~known_values] / np.hypot(error, our_error)[~known_values]
    assert np.abs(z).max() < HIGHEST_Z, z.round(1)
