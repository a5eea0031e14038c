"""Log evidence against exact values: published tables, and small ones by brute force."""

from __future__ import annotations

import csv
import tomllib
from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import cache
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy.special import betaln, gammaln

from bayeslca.assess.class_count.unknown_count import sample_class_count
from bayeslca.assess.convergence import mode_mixing
from bayeslca.assess.evidence.empty_class_ladder import can_be_joined, ladder_step, rung_of
from bayeslca.assess.evidence.log_evidence import log_evidence, log_evidence_of_counts
from bayeslca.assess.evidence.proposal import Labels
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261211
REFERENCES = Path(__file__).parents[2] / "references"
CARCINOMA, STOUFFER = "carcinoma_raters_1977", "stouffer_toby_1951"
CHEATING = "academic_cheating_dayton_1998"
QUICK: dict[str, Any] = {"draws": 1000, "ess": 400, "progress": False}


@cache
def published(name: str) -> Responses:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    return Responses.from_frame(frame, items=head[:-1], counts=head[-1])


@cache
def fitted(name: str, classes: int, seed: int = SEED) -> Posterior:
    return LatentClassModel(published(name).items, classes).sample(
        published(name), seed=seed, **QUICK
    )


@cache
def references() -> list[dict[str, Any]]:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    return list(tables)


def reference(name: str) -> dict[int, tuple[float, float]]:
    parts = next(t for t in references() if t.get("file") == f"{name}.csv")["computed_evidence"]
    return {
        part["classes"]: (part["log_evidence"], part.get("mc_standard_error", 0.0))
        for part in parts
    }


@pytest.mark.parametrize("name", [STOUFFER, CARCINOMA, CHEATING])
def test_published_tables(name: str) -> None:
    exact = reference(name)
    found, joined = log_evidence_of_counts({k: fitted(name, k) for k in (1, 2, 3, 4)})
    assert joined.agrees
    for k, (value, error) in exact.items():
        assert found[k].reliable, found[k].reason
        assert found[k].mcse < 0.05
        gap = found[k].log_evidence - value
        assert abs(gap) < 4 * np.hypot(found[k].mcse, error) + 1e-5, (name, k, gap)


@pytest.mark.parametrize("name", [STOUFFER, CARCINOMA])
def test_one_model_alone(name: str) -> None:
    exact = reference(name)[2][0]
    found = log_evidence(fitted(name, 2))
    assert found.reliable
    assert {one.kind for one in found.estimates} == {"bridge", "ordinate"}
    for one in found.estimates:
        assert abs(one.value - exact) < 4 * one.mcse


@cache
def tiny(table: str) -> tuple[dict[int, Posterior], dict[int, float]]:
    frame = pd.read_csv(REFERENCES / "tiny_tables_made_up.csv", dtype=str)
    frame = frame[frame["table"] == table].astype({"count": int})
    items = [name for name in frame.columns if name.startswith("item")]
    responses = Responses.from_frame(frame, items=items, counts="count")
    parts = next(t for t in references() if t["id"] == "tiny_exact")["computed_evidence"]
    exact = next(part for part in parts if part["table"] == table)
    values = dict(zip(exact["classes"], exact["log_evidence"], strict=True))
    posteriors = {
        k: LatentClassModel(responses.items, k).sample(responses, seed=SEED, **QUICK)
        for k in values
    }
    return posteriors, values


@pytest.mark.parametrize("table", ["tiny_8", "tiny_12"])
def test_tiny_tables(table: str) -> None:
    posteriors, exact = tiny(table)
    found, _ = log_evidence_of_counts(posteriors)
    for k, value in exact.items():
        assert found[k].reliable, found[k].reason
        assert abs(found[k].log_evidence - value) < 4 * found[k].mcse + 1e-6


def test_two_tests_in_two_populations_with_expert_priors() -> None:
    # Priors of Branscum, Gardner & Johnson (2005); exact value by enumeration in references.toml.
    responses = Responses.read(
        REFERENCES / "trout_two_tests_two_populations.csv",
        items=["microscopy", "pcr"],
        group="population",
        counts="count",
    )
    model = LatentClassModel(
        responses.items,
        ("infected", "healthy"),
        (
            "P(microscopy=1 | infected) ~ Beta(2.82, 2.49)",
            "P(microscopy=0 | healthy) ~ Beta(15.7, 1.3)",
            "P(pcr=1 | infected) ~ Beta(8.29, 1.81)",
            "P(pcr=0 | healthy) ~ Beta(10.69, 2.71)",
            "P(infected | population=high_prevalence) ~ Beta(1.73, 2.71)",
            "P(infected | population=low_prevalence) ~ Beta(1.27, 9.65)",
        ),
        groups=responses.groups,
    )
    trout = next(t for t in references() if t["id"] == "trout_two_tests")
    name = "log evidence, individual level, plain model without Z"
    exact = next(part["value"] for part in trout["computed"] if part["name"] == name)
    found = log_evidence(model.sample(responses, seed=SEED, **QUICK))
    assert found.reliable, found.reason
    assert found.mcse < 0.05
    assert abs(found.log_evidence - exact) < 4 * found.mcse


Block = Callable[[str, int, int], object]
"""The block of an item in a group and class: equal blocks are one."""


def by_brute_force(
    rows: Sequence[tuple[str, tuple[str | None, ...]]],
    categories: Sequence[Sequence[str]],
    n_classes: int,
    a: float = 1.0,
    block: Block = lambda group, item, k: (item, k),
    known: dict[tuple[int, int], Sequence[float]] | None = None,
) -> float:
    """Sum p(answers, classes) over every way to put the cases into classes."""
    groups = sorted({group for group, _ in rows})
    terms = []
    for classes in product(range(n_classes), repeat=len(rows)):
        log_p = 0.0
        for group in groups:
            inside = [k for (g, _), k in zip(rows, classes, strict=True) if g == group]
            log_p += _dirichlet_multinomial(np.bincount(inside, minlength=n_classes), a)
        counts: dict[object, np.ndarray] = {}
        for (group, answers), k in zip(rows, classes, strict=True):
            for item, answer in enumerate(answers):
                if answer is None:
                    continue
                at = list(categories[item]).index(answer)
                if (item, k) in (known or {}):
                    log_p += np.log((known or {})[item, k][at])
                    continue
                key = block(group, item, k)
                counts.setdefault(key, np.zeros(len(categories[item])))[at] += 1
        log_p += sum(_dirichlet_multinomial(one, 1.0) for one in counts.values())
        terms.append(log_p)
    return float(np.logaddexp.reduce(terms))


def _dirichlet_multinomial(counts: np.ndarray, a: float) -> float:
    size = len(counts)
    value = gammaln(size * a) - gammaln(size * a + counts.sum())
    return float(value + np.sum(gammaln(a + counts) - gammaln(a)))


ROWS = (
    ("north", ("no", "low", "a")),
    ("north", ("yes", "low", "b")),
    ("north", ("yes", "high", None)),
    ("north", (None, "middle", "c")),
    ("south", ("no", "middle", "d")),
    ("south", ("yes", None, "d")),
    ("south", ("yes", "high", "a")),
    ("south", ("no", "high", None)),
)
CATEGORIES = (("no", "yes"), ("low", "middle", "high"), ("a", "b", "c", "d"))
NAMES = ("fees", "trust", "source")


@cache
def small(grouped: bool) -> Responses:
    from bayeslca.responses.item import ItemSpec

    frame = pd.DataFrame([dict(zip(NAMES, answers, strict=True)) for _, answers in ROWS])
    frame["district"] = [group for group, _ in ROWS]
    items = [
        ItemSpec(name, categories=values) for name, values in zip(NAMES, CATEGORIES, strict=True)
    ]
    return Responses.from_frame(frame, items=items, group="district" if grouped else None)


def check(responses: Responses, model: LatentClassModel, exact: float, seed: int = SEED) -> None:
    found = log_evidence(model.sample(responses, seed=seed, **QUICK))
    assert found.reliable, found.reason
    assert found.mcse < 0.05
    assert abs(found.log_evidence - exact) < 4 * found.mcse + 1e-9, (
        found.log_evidence,
        exact,
        found.mcse,
    )


@pytest.mark.parametrize("n_classes", [1, 2, 3])
def test_many_categories_and_missing_answers(n_classes: int) -> None:
    pooled = [("", answers) for _, answers in ROWS]
    check(
        small(grouped=False),
        LatentClassModel(small(grouped=False).items, n_classes),
        by_brute_force(pooled, CATEGORIES, n_classes),
    )


def test_prevalences_by_group() -> None:
    responses = small(grouped=True)
    model = LatentClassModel(responses.items, 2, groups=responses.groups)
    check(responses, model, by_brute_force(ROWS, CATEGORIES, 2))


def check_step(lower: Posterior, upper: Posterior, exact: float) -> None:
    one, two = rung_of(lower), rung_of(upper)
    assert one is not None
    assert two is not None
    assert can_be_joined(one, two)
    assert not can_be_joined(two, one)
    step = ladder_step(one, two, np.random.default_rng(SEED))
    assert step.ladder.mcse < 0.06
    for estimate in (step.ladder, step.emptied):
        assert estimate.is_usable
        assert estimate.mcse < 0.3
        assert abs(estimate.value - exact) < 4 * estimate.mcse


def test_the_ladder_alone_has_the_exact_step_with_groups() -> None:
    responses = small(grouped=True)
    lower, upper = (
        LatentClassModel(responses.items, k, groups=responses.groups).sample(
            responses, seed=SEED, **QUICK
        )
        for k in (1, 2)
    )
    exact = [by_brute_force(ROWS, CATEGORIES, k) for k in (1, 2)]
    check_step(lower, upper, exact[1] - exact[0])


def test_the_ladder_alone_has_the_exact_steps() -> None:
    posteriors, exact = tiny("tiny_8")
    for k in (2, 3):
        check_step(posteriors[k], posteriors[k + 1], exact[k + 1] - exact[k])


@pytest.mark.parametrize(
    ("classes", "statements"),
    [
        (
            ("one", "two"),
            ("P(fees=yes | one) = P(fees=yes | two)", "one is where P(trust=low) is highest"),
        ),
        (2, ("P(fees=yes | .) > 0.1",)),
        (("one", "two"), ("P(fees=yes | one) ~ Beta(3, 1)",)),
    ],
)
def test_restricted_models_are_no_rungs(classes: Any, statements: tuple[str, ...]) -> None:
    responses = small(grouped=False)
    model = LatentClassModel(responses.items, classes, statements)
    assert rung_of(model.sample(responses, seed=SEED, **QUICK)) is None


def test_groups_with_probabilities_of_their_own_add_up() -> None:
    responses = small(grouped=True)
    model = LatentClassModel(responses.items, 2, groups=responses.groups, free_by_group=True)
    exact = by_brute_force(ROWS, CATEGORIES, 2, block=lambda g, item, k: (g, item, k))
    parts = [
        by_brute_force([row for row in ROWS if row[0] == group], CATEGORIES, 2)
        for group in ("north", "south")
    ]
    assert exact == pytest.approx(sum(parts))
    check(responses, model, exact)


def test_equal_and_known_probabilities() -> None:
    responses = small(grouped=False)
    pooled = [("", answers) for _, answers in ROWS]
    model = LatentClassModel(
        responses.items,
        ("one", "two"),
        (
            "P(trust=low | one) = P(trust=low | two)",
            "P(trust=middle | one) = P(trust=middle | two)",
            "P(fees=yes | one) = 0.9",
        ),
    )
    exact = by_brute_force(
        pooled,
        CATEGORIES,
        2,
        block=lambda _g, item, k: (item, 0 if item == 1 else k),
        known={(0, 0): (0.1, 0.9)},
    )
    check(responses, model, exact)


def test_equal_answers_of_items_with_different_numbers_of_categories() -> None:
    # p(fees=yes) = p(source=a) in class one: Beta(1, 1) and the Beta(1, 3) margin of a uniform
    # Dirichlet given equality are Beta(1, 3); the other sources keep their uniform shares.
    responses = small(grouped=False)
    model = LatentClassModel(
        responses.items, ("one", "two"), ("P(fees=yes | one) = P(source=a | one)",)
    )
    terms = []
    for classes in product(range(2), repeat=len(ROWS)):
        log_p = _dirichlet_multinomial(np.bincount(classes, minlength=2), 1.0)
        for k in range(2):
            counts = [np.zeros(len(values)) for values in CATEGORIES]
            for (_, answers), mine in zip(ROWS, classes, strict=True):
                for item, answer in enumerate(answers):
                    if mine == k and answer is not None:
                        counts[item][CATEGORIES[item].index(answer)] += 1
            fees, trust, source = counts
            log_p += _dirichlet_multinomial(trust, 1.0)
            if k == 1:
                log_p += _dirichlet_multinomial(fees, 1.0) + _dirichlet_multinomial(source, 1.0)
                continue
            tied, rest = fees[1] + source[0], fees[0] + source[1:].sum()
            log_p += float(betaln(1 + tied, 3 + rest) - betaln(1, 3))
            log_p += _dirichlet_multinomial(source[1:], 1.0)
        terms.append(log_p)
    check(responses, model, float(np.logaddexp.reduce(terms)))


def test_equal_and_known_prevalences() -> None:
    responses = small(grouped=True)
    model = LatentClassModel(
        responses.items,
        ("one", "two"),
        ("P(one | district=north) = 0.3", "P(fees=yes | one) = 0.9"),
        groups=responses.groups,
    )
    terms = []
    for classes in product(range(2), repeat=len(ROWS)):
        inside = [
            [k for (g, _), k in zip(ROWS, classes, strict=True) if g == group]
            for group in ("north", "south")
        ]
        log_p = float(np.sum(np.log([(0.3, 0.7)[k] for k in inside[0]])))
        log_p += _dirichlet_multinomial(np.bincount(inside[1], minlength=2), 1.0)
        for k in range(2):
            for item, values in enumerate(CATEGORIES):
                given = [
                    values.index(answers[item])
                    for (_, answers), mine in zip(ROWS, classes, strict=True)
                    if mine == k and answers[item] is not None
                ]
                if (item, k) == (0, 0):
                    log_p += float(np.sum(np.log([(0.1, 0.9)[at] for at in given])))
                else:
                    log_p += _dirichlet_multinomial(np.bincount(given, minlength=len(values)), 1.0)
        terms.append(log_p)
    check(responses, model, float(np.logaddexp.reduce(terms)))


def test_a_known_probability_of_one_class_has_a_closed_form() -> None:
    responses = small(grouped=False)
    pooled = [("", answers) for _, answers in ROWS]
    model = LatentClassModel(responses.items, ("all",), ("P(fees=yes | all) = 0.9",))
    exact = by_brute_force(pooled, CATEGORIES, 1, known={(0, 0): (0.1, 0.9)})
    found = log_evidence(model.sample(responses, seed=SEED, **QUICK))
    assert found.mcse == 0.0
    assert found.log_evidence == pytest.approx(exact)


def test_an_order_that_only_picks_labels_changes_nothing() -> None:
    # Rule: the constrained prior is divided by the probability of its bounds, here 1/2.
    responses = published(CARCINOMA)
    first = responses.items[0].name
    model = LatentClassModel(
        responses.items, ("high", "low"), (f"P({first}=1 | high) > P({first}=1 | low)",)
    )
    found = log_evidence(model.sample(responses, seed=SEED, **QUICK))
    assert {one.kind for one in found.estimates} == {"bridge", "importance"}
    assert found.reliable, found.reason
    assert abs(found.log_evidence - reference(CARCINOMA)[2][0]) < 4 * found.mcse


def test_two_modes_are_weighed_by_their_evidence(monkeypatch: pytest.MonkeyPatch) -> None:
    # The order keeps the labels of one item only: with this table the swapped labelling has a mode
    # of its own some 10 nats lower, in which a chain is kept. Together they are the free model.
    responses = published(STOUFFER)
    first = responses.items[0].name
    model = LatentClassModel(
        responses.items, ("high", "low"), (f"P({first}=1 | high) > P({first}=1 | low)",)
    )
    mixed = log_evidence(model.sample(responses, seed=1, max_sweeps=20_000, **QUICK))
    assert mixed.reliable, mixed.reason
    assert abs(mixed.log_evidence - reference(STOUFFER)[2][0]) < 4 * mixed.mcse
    assert mixed.modes[0].share > 0.999
    # The same where the chains are left as they are.
    monkeypatch.setattr(mode_mixing, "MOST_SHARE_ERROR", -1.0)
    posterior = model.sample(responses, seed=1, max_sweeps=20_000, **QUICK)
    found = log_evidence(posterior)
    assert [len(mode.chains) for mode in found.modes] == [3, 1]
    assert found.reliable, found.reason
    assert abs(found.log_evidence - reference(STOUFFER)[2][0]) < 4 * found.mcse
    assert found.modes[0].share > 0.999
    assert found.modes[0].share + found.modes[1].share == pytest.approx(1.0)
    # All chains taken together as if they were one mode, the bridge is far off.
    assert posterior.draws.starts is not None
    draws = replace(posterior.draws, starts=None)
    alone = replace(posterior, relabelled=replace(posterior.relabelled, draws=draws))
    assert not log_evidence(alone).reliable


def test_stated_errors_are_the_spread_of_short_runs() -> None:
    exact = {k: value for k, (value, error) in reference(STOUFFER).items() if error < 0.015}
    scores = []
    for seed in range(12):
        posteriors = {
            k: LatentClassModel(published(STOUFFER).items, k).sample(
                published(STOUFFER), seed=seed, draws=250, ess=200, r_hat=1.1, progress=False
            )
            for k in (2, 3)
        }
        found, _ = log_evidence_of_counts(posteriors, seed=seed)
        for k in (2, 3):
            error = np.hypot(found[k].mcse, reference(STOUFFER)[k][1])
            scores.append((found[k].log_evidence - exact[k]) / error)
    # 24 squared standard scores, not quite independent within a run: .001 and .999 quantiles of
    # chi-square on 24 are 8.1 and 51.2.
    assert 8.1 < float(np.sum(np.square(scores))) < 51.2
    assert abs(float(np.mean(scores))) < 4 / np.sqrt(len(scores))


def test_without_the_other_labelling_the_evidence_would_be_wrong(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    from bayeslca.assess.evidence import model_evidence

    def one_labelling(free: Any, group: Any) -> Labels:
        return Labels((), np.arange(free.prior.size), None)

    monkeypatch.setattr(model_evidence, "labels_of", one_labelling)
    found = log_evidence(fitted(CARCINOMA, 2))
    gap = found.log_evidence - reference(CARCINOMA)[2][0]
    assert gap == pytest.approx(-np.log(2), abs=0.1)
    assert abs(gap) > 10 * found.mcse


def test_not_counting_the_labellings_would_be_wrong(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Labels, "log_size", property(lambda _self: 0.0))
    found = log_evidence(fitted(CARCINOMA, 2))
    gap = found.log_evidence - reference(CARCINOMA)[2][0]
    assert gap == pytest.approx(-np.log(2), abs=0.1)
    assert abs(gap) > 10 * found.mcse


def test_the_number_of_classes_sampled_agrees_with_the_evidences() -> None:
    found, joined = log_evidence_of_counts({k: fitted(CARCINOMA, k) for k in (1, 2, 3, 4)})
    weights = np.exp(joined.value - joined.value.max())
    expected = weights / weights.sum()
    sampled = sample_class_count(published(CARCINOMA), 4, seed=SEED, draws=10_000)
    errors = sampled.table["mcse"].to_numpy()
    assert errors.max() < 0.02
    gaps = np.abs(sampled.table["probability"].to_numpy() - expected)
    assert np.all(gaps < 4 * np.hypot(errors, 0.01 * expected) + 0.002)
    assert expected[2] > 0.8
    assert found[3].reliable
