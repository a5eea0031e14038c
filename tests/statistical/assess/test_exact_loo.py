"""Exact leave-one-out and K-fold against exact values: references, enumeration, closed forms."""

from __future__ import annotations

import csv
import math
import tomllib
from collections import Counter
from functools import cache
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy.special import betaln, gammaln, logsumexp

from bayeslca.assess.left_out.exact_loo import LeaveOneOut, leave_one_out
from bayeslca.assess.left_out.folds import k_fold, leave_one_group_out
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261221
REFERENCES = Path(__file__).parents[2] / "references"
CARCINOMA, CHEATING = "carcinoma_raters_1977", "academic_cheating_dayton_1998"
Z = 4.0
"""Standard errors that a figure may be off by."""


@cache
def published(name: str) -> Responses:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    return Responses.from_frame(frame, items=head[:-1], counts=head[-1])


@cache
def posterior(name: str, classes: int) -> Posterior:
    responses = published(name)
    return LatentClassModel(responses.items, classes).sample(responses, seed=SEED, progress=False)


@cache
def exact(name: str, classes: int) -> LeaveOneOut:
    return leave_one_out(posterior(name, classes), exact=True, progress=False)


def reference(name: str, classes: int) -> dict[str, Any]:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    parts = next(t for t in tables if t.get("file") == f"{name}.csv")["computed_loo"]
    return next(part for part in parts if part["classes"] == classes)


# Exact values: ratios of enumerated evidences (tests/references/SOURCES.md).
@pytest.mark.parametrize(("name", "classes"), [(CARCINOMA, 1), (CARCINOMA, 2), (CHEATING, 2)])
def test_every_pattern_of_published_tables(name: str, classes: int) -> None:
    found, truth = exact(name, classes), reference(name, classes)
    items = [item.name for item in published(name).items]
    patterns = found.table[items].astype(str).agg("".join, axis=1)
    patterns = patterns.str.translate(_as_zero_one(published(name)))
    wanted = dict(zip(truth["patterns"], truth["log_predictive_by_pattern"], strict=True))
    gap = found.table["log_density"] - patterns.map(wanted)
    z = gap / np.hypot(found.table["log_density_mcse"], 1e-5)
    assert found.table["reliable"].all()
    assert found.loo.n_refitted == len(found.table)
    assert np.abs(z).max() < Z, z
    assert abs(found.loo.elpd - truth["elpd_loo"]) < Z * found.loo.mcse + 1e-4
    # The stated errors are right, not only large enough: z is neither wide nor narrow.
    if classes == 2:
        assert 0.3 < math.sqrt(float((z**2).mean())) < 2.0


def _as_zero_one(responses: Responses) -> dict[int, str]:
    categories = {c for item in responses.items for c in item.categories}
    assert categories <= {"0", "1", "2"}
    return str.maketrans("12", "01") if "2" in categories else {}


def test_agrees_with_importance_sampling_where_that_is_reliable() -> None:
    found = exact(CARCINOMA, 3)
    good = found.psis.pareto_k < 0.5
    assert good.sum() > 10
    gap = found.loo.pointwise[good] - found.psis.pointwise[good]
    # Both errors of a single pattern: those of importance sampling are at least the refit's.
    assert np.abs(gap / found.table.loc[good, "log_density_mcse"]).max() < 2 * Z
    assert abs(found.loo.elpd - found.psis.elpd) < Z * np.hypot(found.loo.mcse, found.psis.mcse)


def odd_one_out() -> Responses:
    rows = [[1] * 8] * 5 + [[0] * 8] * 5 + [[0, 1] * 4]
    items = [f"item_{j}" for j in range(1, 9)]
    return Responses.from_frame(pd.DataFrame(rows, columns=items).astype(str), items=items)


def test_a_case_with_a_class_to_itself_is_refitted_and_exact() -> None:
    responses, a = odd_one_out(), 0.2
    statements = [f"P({item.name}=1 | .) ~ Beta({a}, {a})" for item in responses.items]
    model = LatentClassModel(responses.items, 2, statements=statements)
    found = leave_one_out(model.sample(responses, seed=SEED, progress=False), progress=False)
    row = int(np.flatnonzero(found.table["item_1"] != found.table["item_2"])[0])
    assert found.psis.pareto_k[row] > 0.7
    assert list(found.refits) == [row]
    rows = responses.codes.tolist()
    truth = log_evidence(rows, 2, a) - log_evidence(rows[:-1], 2, a)
    error = found.table.loc[row, "log_density_mcse"]
    assert error < 0.15
    assert abs(found.table.loc[row, "log_density"] - truth) < Z * error
    assert abs(found.psis.pointwise[row] - truth) > 0.3  # importance sampling is off
    assert found.table.loc[row, "reliable"]
    assert found.loo.n_unreliable == 0


def log_evidence(rows: list[list[int]], classes: int, a: float) -> float:
    """Sum over all allocations of cases to classes; binary items, Beta(a, a), Dirichlet(1)."""
    data, n = np.array(rows), len(rows)
    terms = []
    for z in product(range(classes), repeat=n):
        at = np.array(z)
        size = np.bincount(at, minlength=classes)
        log_p = gammaln(classes) - gammaln(classes + n) + gammaln(size + 1.0).sum()
        for k in range(classes):
            yes = data[at == k].sum(axis=0)
            log_p += (betaln(a + yes, a + size[k] - yes) - betaln(a, a)).sum()
        terms.append(float(log_p))
    return float(logsumexp(terms))


@cache
def grouped() -> Responses:
    rng = np.random.default_rng(SEED)
    frame = pd.DataFrame(
        {
            "fees": rng.choice(["no", "yes"], 30, p=[0.3, 0.7]),
            "type": rng.choice(["a", "b", "c"], 30, p=[0.2, 0.5, 0.3]),
            "district": np.repeat(["north", "south", "east"], [14, 10, 6]),
        }
    )
    frame.loc[4, "type"] = None
    return Responses.from_frame(frame, items=["fees", "type"], group="district")


def one_class() -> Posterior:
    responses = grouped()
    model = LatentClassModel(responses.items, 1, groups=responses.groups)
    return model.sample(responses, seed=SEED, progress=False)


def predictive(train: np.ndarray, code: np.ndarray) -> float:
    """One class, uniform priors: each item's answer is Dirichlet-multinomial (closed form)."""
    total = 0.0
    for j, categories in enumerate((2, 3)):
        if code[j] >= 0:
            seen = Counter(int(c) for c in train[:, j] if c >= 0)
            total += math.log((1 + seen[int(code[j])]) / (categories + sum(seen.values())))
    return total


def test_one_class_in_closed_form() -> None:
    codes, groups = grouped().codes, np.asarray(grouped().group_codes)
    found = leave_one_out(one_class(), exact=True, progress=False)
    truth = sum(predictive(np.delete(codes, i, axis=0), codes[i]) for i in range(len(codes)))
    assert found.loo.mcse < 0.1
    assert abs(found.loo.elpd - truth) < Z * found.loo.mcse

    by_group = leave_one_group_out(one_class(), progress=False)
    assert by_group.table["group"].tolist() == list(grouped().groups.levels)
    for g, row in enumerate(by_group.table.to_dict("records")):
        inside = groups == g
        truth = sum(predictive(codes[~inside], code) for code in codes[inside])
        assert row["cases"] == inside.sum()
        assert abs(row["elpd"] - truth) < Z * row["elpd_mcse"], row

    folds = k_fold(one_class(), 5, progress=False)
    units = grouped().units
    for f, row in enumerate(folds.table.to_dict("records")):
        gone = np.repeat(units.pattern, folds.counts[f], axis=0)
        left = np.repeat(units.pattern, units.count - folds.counts[f], axis=0)
        truth = sum(predictive(left, code) for code in gone)
        assert abs(row["elpd"] - truth) < Z * row["elpd_mcse"], row
    assert folds.elpd == pytest.approx(folds.table["elpd"].sum())


def test_the_prevalence_of_a_left_out_group_is_that_of_its_prior() -> None:
    # fees is known in both classes, so that a case's density takes the prevalence alone: without
    # its group that is Beta(2, 6) of mean 1/4. meets is alike in both: Beta-binomial.
    frame = pd.DataFrame(
        {
            "fees": ["yes"] * 9 + ["no"] * 9,
            "meets": ["yes", "no", "yes"] * 6,
            "district": ["north", "south"] * 9,
        }
    )
    responses = Responses.from_frame(frame, items=["fees", "meets"], group="district")
    model = LatentClassModel(
        responses.items,
        classes=["managed", "lapsed"],
        statements=[
            "P(fees=yes | managed) = 0.9",
            "P(fees=yes | lapsed) = 0.2",
            "P(meets=yes | managed) = P(meets=yes | lapsed)",
            "P(managed, lapsed) ~ Dirichlet(2, 6)",
        ],
        groups=responses.groups,
    )
    found = leave_one_group_out(model.sample(responses, seed=SEED, progress=False), progress=False)
    fees = 0.25 * 0.9 + 0.75 * 0.2
    for row in found.table.to_dict("records"):
        mine, others = (
            frame[(frame["district"] == row["group"]) == inside] for inside in (True, False)
        )
        meets = (1 + (others["meets"] == "yes").sum()) / (2 + len(others))
        truth = sum(
            math.log(p if answer == "yes" else 1 - p)
            for item, p in (("fees", fees), ("meets", meets))
            for answer in mine[item]
        )
        assert abs(row["elpd"] - truth) < Z * row["elpd_mcse"]
        assert row["elpd_mcse"] < 0.05
    assert "integrated over their prior" in found.meaning
