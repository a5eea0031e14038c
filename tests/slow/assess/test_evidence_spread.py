"""Stated errors of the evidence against the spread of 20 runs; unknown numbers of classes.

Exact values and their errors: tests/references/references.toml.
"""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import chi2

from bayeslca.assess.class_count.class_counts import class_counts
from bayeslca.assess.class_count.unknown_count import sample_class_count
from bayeslca.assess.evidence.log_evidence import log_evidence_of_counts
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261216
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = ("stouffer_toby_1951", "carcinoma_raters_1977", "academic_cheating_dayton_1998")
RUNS = 20


@cache
def responses(name: str) -> Responses:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    return Responses.from_frame(frame, items=head[:-1], counts=head[-1])


def fitted(name: str, classes: int, seed: int) -> Posterior:
    model = LatentClassModel(responses(name).items, classes)
    return model.sample(responses(name), seed=seed, draws=500, ess=500, progress=False)


@pytest.mark.parametrize("name", TABLES)
def test_spread_of_runs_is_the_stated_error(name: str) -> None:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    parts = next(t for t in tables if t.get("file") == f"{name}.csv")["computed_evidence"]
    exact = {
        part["classes"]: (part["log_evidence"], part.get("mc_standard_error", 0.0))
        for part in parts
    }
    values, errors = [], []
    for seed in range(RUNS):
        found, joined = log_evidence_of_counts(
            {k: fitted(name, k, seed) for k in (2, 3, 4)}, seed=seed
        )
        assert joined.probability > 1e-4
        values.append([found[k].log_evidence for k in (2, 3, 4)])
        errors.append([found[k].mcse for k in (2, 3, 4)])
    spread, stated = np.std(values, axis=0, ddof=1), np.sqrt(np.mean(np.square(errors), axis=0))
    print(name, spread.round(4), stated.round(4))
    low, high = np.sqrt(chi2.ppf([0.001, 0.999], RUNS - 1) / (RUNS - 1))
    assert np.all(spread > low * stated)
    assert np.all(spread < high * stated)
    for at, k in enumerate((2, 3, 4)):
        error = np.hypot(stated[at] / np.sqrt(RUNS), exact[k][1])
        assert abs(np.mean(values, axis=0)[at] - exact[k][0]) < 4 * error


@pytest.mark.parametrize("name", TABLES)
def test_the_number_of_classes_sampled_agrees_with_the_evidences(name: str) -> None:
    found = class_counts({k: fitted(name, k, SEED) for k in range(1, 7)})
    sampled = sample_class_count(responses(name), 6, seed=SEED, draws=200_000)
    errors = np.hypot(sampled.table["mcse"], found.table["probability_mcse"])
    gaps = np.abs(sampled.table["probability"] - found.table["probability"])
    print(pd.DataFrame({"by evidence": found.table["probability"], **sampled.table}).round(4))
    assert errors.max() < 0.02
    assert np.all(gaps < 4 * errors + 0.001)
