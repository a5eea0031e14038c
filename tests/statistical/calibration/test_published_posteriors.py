"""The posterior of published tables: recomputed values, published estimates and published G2.

Sources of the tables and of every number: tests/references/references.toml and SOURCES.md.
"""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from itertools import permutations
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import response_probability
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Item
from bayeslca.responses.units import Units, collapse
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.run import draw_posterior, sample_table

SEED = 20261206
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = ["stouffer_toby_1951", "carcinoma_raters_1977", "academic_cheating_dayton_1998"]
ERROR_OF_MEAN = 0.0005  # of the recomputed values, as their note says
ERROR_OF_QUANTILE = 0.003
HALF_A_PERCENT = 0.005  # published estimates are printed to two decimals
HALF_A_DIGIT = 0.5e-4  # values are printed to four decimals


@cache
def reference(name: str) -> dict[str, Any]:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    return next(table for table in tables if table.get("file") == f"{name}.csv")


def published(name: str, quantity: str) -> Any:
    found = [part for part in reference(name)["published"] if part["name"] == quantity]
    assert len(found) == 1, quantity
    return found[0]["value"]


@cache
def rows(name: str) -> np.ndarray:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        return np.array([[int(value) for value in row] for row in list(csv.reader(file))[1:]])


@cache
def units(name: str) -> Units:
    table = rows(name)
    seen = table[table[:, -1] > 0]
    pattern, count = seen[:, :-1].astype(np.int16), seen[:, -1].astype(np.int64)
    return Units(pattern, np.zeros(count.size, dtype=np.int32), count, np.arange(count.size))


@cache
def sampled(name: str, n_classes: int) -> Draws:
    n_items = units(name).pattern.shape[1]
    model = LatentClassModel(
        tuple(Item(f"item_{j + 1}", ("0", "1")) for j in range(n_items)), n_classes
    )
    return draw_posterior(
        model,
        compile_units(model.table, units(name)),
        seed=SEED + n_classes,
        draws=5000,
        ess=10_000,
        progress=False,
    )


def labelled(name: str) -> dict[str, np.ndarray]:
    """Name, in each draw, the class with the larger sum of P(1) 'high'; (chain, draw) each."""
    draws = sampled(name, 2)
    yes = draws.elements.reshape(*draws.elements.shape[:2], -1, 2, 2)[..., 1]  # chain draw item k
    high = np.argmax(yes.sum(axis=2), axis=-1)[..., None]
    out = {"weight_high": np.take_along_axis(draws.prevalence[:, :, 0], high, axis=-1)[..., 0]}
    for j in range(yes.shape[2]):
        item = yes[:, :, j]
        out[f"high_item{j + 1}"] = np.take_along_axis(item, high, axis=-1)[..., 0]
        out[f"low_item{j + 1}"] = np.take_along_axis(item, 1 - high, axis=-1)[..., 0]
    return out


@pytest.mark.parametrize("name", TABLES)
def test_posterior_moments_and_quantiles_are_those_computed_elsewhere(name: str) -> None:
    """By other samplers written without this package; error of both sides is allowed for."""
    from arviz_stats.base import array_stats

    drawn = labelled(name)
    expected = reference(name)["computed_posterior"]
    assert {part["quantity"] for part in expected} == set(drawn)
    for part in expected:
        x = drawn[part["quantity"]]
        assert array_stats.ess(x, method="mean") > 5000, part["quantity"]
        square = (x - x.mean()) ** 2
        # The Monte Carlo error of the sd, by that of the mean square deviation.
        mcse_sd = array_stats.mcse(square, method="mean") / (2 * x.std())
        for key, value, error in (
            ("mean", x.mean(), array_stats.mcse(x, method="mean") * 4 + ERROR_OF_MEAN),
            ("sd", x.std(), mcse_sd * 4 + ERROR_OF_MEAN),
            ("median", np.quantile(x, 0.5), _quantile_error(x, 0.5)),
            ("q025", np.quantile(x, 0.025), _quantile_error(x, 0.025)),
            ("q975", np.quantile(x, 0.975), _quantile_error(x, 0.975)),
        ):
            assert abs(value - part[key]) < error + HALF_A_DIGIT, (part["quantity"], key, value)


def _quantile_error(x: np.ndarray, prob: float) -> float:
    from arviz_stats.base import array_stats

    return float(4 * array_stats.mcse(x, method="quantile", prob=prob) + ERROR_OF_QUANTILE)


def test_published_cheating_estimates_lie_within_posterior_intervals() -> None:
    """Dayton (1998); the printed values from memory."""
    name = "academic_cheating_dayton_1998"
    drawn = labelled(name)
    expected = {"weight_high": published(name, "two-class weights")[1]}
    for which, words in (("low", "larger class"), ("high", "smaller class")):
        values = published(name, f"yes-probabilities, {words}")
        expected |= {f"{which}_item{j}": value for j, value in enumerate(values, start=1)}
    assert expected.keys() == drawn.keys()
    for quantity, value in expected.items():
        low, high = np.quantile(drawn[quantity], [0.025, 0.975])
        assert low - HALF_A_PERCENT < value < high + HALF_A_PERCENT, quantity


def climb(pattern, count, prevalence, yes, steps: int) -> tuple[float, np.ndarray, np.ndarray]:
    """Do EM steps from a draw: prevalence (K,), yes (J, K); return the log likelihood too."""
    for _ in range(steps):
        joint = prevalence * np.prod(
            np.where(pattern[:, :, None] == 1, yes, 1 - yes), axis=1
        )  # (U, K)
        total = joint.sum(axis=1)
        share = joint / total[:, None] * count[:, None]
        prevalence = share.sum(axis=0) / count.sum()
        yes = (pattern.T @ share) / np.maximum(share.sum(axis=0), 1e-300)
    return float(count @ np.log(total)), prevalence, yes


def best_fit(name: str, n_classes: int, starts: int = 12, steps: int = 3000):
    """Climb from the best of some posterior draws spread over all chains."""
    draws = sampled(name, n_classes)
    pattern, count = units(name).pattern, units(name).count
    spread = draws.log_likelihood[:, 24::25].ravel()
    flat = draws.elements[:, 24::25].reshape(spread.size, -1, n_classes, 2)[..., 1]
    prevalence = draws.prevalence[:, 24::25].reshape(spread.size, n_classes)
    best = np.argsort(-spread)[:starts]
    fits = [climb(pattern, count, prevalence[s], flat[s], steps) for s in best]
    return max(fits, key=lambda fit: fit[0])


def likelihood_ratio(name: str, log_likelihood: float) -> float:
    """Return G2 against the saturated model."""
    count = units(name).count
    return 2 * (float(count @ np.log(count / count.sum())) - log_likelihood)


@pytest.mark.parametrize(
    ("name", "n_classes", "words", "decimals"),
    [
        ("stouffer_toby_1951", 2, "two", 2),
        ("academic_cheating_dayton_1998", 2, "two", 2),
        ("carcinoma_raters_1977", 2, "two", 1),
        ("carcinoma_raters_1977", 3, "three", 1),
        ("carcinoma_raters_1977", 4, "four", 1),
    ],
)
def test_the_published_fit_is_reached_from_posterior_draws(
    name: str, n_classes: int, words: str, decimals: int
) -> None:
    log_likelihood, _, _ = best_fit(name, n_classes)
    found = likelihood_ratio(name, log_likelihood)
    assert round(found, decimals) == published(name, f"G2 {words} classes")


@pytest.mark.parametrize("name", TABLES)
def test_no_draw_is_more_likely_than_the_published_fit(name: str) -> None:
    highest = next(part for part in reference(name)["computed_fit"] if part["classes"] == 2)
    assert sampled(name, 2).log_likelihood.max() < highest["loglik"] + HALF_A_DIGIT


def test_published_weights_of_three_carcinoma_classes() -> None:
    """Agresti (2002), section 13.1; the printed values from memory."""
    _, prevalence, _ = best_fit("carcinoma_raters_1977", 3)
    expected = sorted(published("carcinoma_raters_1977", "three-class weights"))
    assert np.round(np.sort(prevalence), 2).tolist() == pytest.approx(expected, abs=0.0051)
    drawn = np.sort(sampled("carcinoma_raters_1977", 3).prevalence[:, :, 0], axis=-1)
    low, high = np.quantile(drawn, [0.025, 0.975], axis=(0, 1))
    assert np.all((low - HALF_A_PERCENT < expected) & (expected < high + HALF_A_PERCENT))


def anaesthetists() -> tuple[np.ndarray, np.ndarray]:
    """Draws of prevalence (S, 4) and of P(grade | class) per observer (S, observer, 4, 4).

    Observer 1 saw every patient three times: three items share one block per class. Named by
    the labelling that agrees best with the grades, over all observers.
    """
    codes = (rows("dawid_skene_1979_anaesthetists")[:, 1:] - 1).astype(np.int16)
    observer = [0, 0, 0, 1, 2, 3, 4]
    builder = TableBuilder([4] * 7, 4)
    for k in range(4):
        blocks = [builder.block(np.ones(4)) for _ in range(5)]
        for j, seen_by in enumerate(observer):
            builder.set_item(0, j, k, blocks[seen_by])
    table = builder.build()
    ones = np.ones(len(codes), dtype=np.int64)
    cases = compile_units(table, collapse(codes, np.zeros(len(codes), np.int32), ones, (4,) * 7))
    source = DirichletPrevalence(np.ones((1, 4)))
    draws = sample_table(table, cases, source, None, seed=SEED, draws=2000, ess=1000)
    assert not draws.limit_reached
    elements = draws.elements.reshape(-1, table.n_elements)
    prevalence = draws.prevalence.reshape(-1, 4)
    rates = response_probability(table, elements)[:, 0].reshape(-1, 4, 7, 4)[:, :, [0, 3, 4, 5, 6]]
    orders = np.array(list(permutations(range(4))))
    agree = [np.einsum("skok->s", rates[:, order]) for order in orders]
    order = orders[np.argmax(agree, axis=0)]
    at = np.arange(order.shape[0])[:, None]
    return prevalence[at, order], rates[at, order].transpose(0, 2, 1, 3)


def test_published_anaesthetists() -> None:
    """Dawid & Skene (1979); the printed values from memory.

    Their solution is one of several maxima; a posterior with uniform priors holds it.
    """
    name = "dawid_skene_1979_anaesthetists"
    prevalence, rates = anaesthetists()
    low, high = np.quantile(prevalence, [0.025, 0.975], axis=0)
    expected = np.array(published(name, "class prevalences"))
    assert np.all((low - HALF_A_PERCENT < expected) & (expected < high + HALF_A_PERCENT))
    assert prevalence.mean(axis=0) == pytest.approx(expected, abs=0.03)
    low, high = np.quantile(rates[:, 0], [0.025, 0.975], axis=0)
    expected = np.array(published(name, "observer 1 error rates, rows = true class 1..4"))
    inside = (low - HALF_A_PERCENT < expected) & (expected < high + HALF_A_PERCENT)
    assert np.all(inside[expected > 0])  # no interval reaches an estimate of 0
    # The two common classes are known well: not everything is inside.
    assert np.all(low.diagonal()[:2] > 0.5)
