"""Class counts 1 to 4 on published tables: what is compared, and what the verdict says."""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.comparison.compare import Comparison, compare_class_counts
from bayeslca.responses.responses import Responses

SEED = 20261205
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = ("stouffer_toby_1951", "carcinoma_raters_1977")


@cache
def comparison(name: str) -> Comparison:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    responses = Responses.from_frame(frame, items=head[:-1], counts=head[-1])
    return compare_class_counts(responses, range(1, 5), seed=SEED, progress=False)


@pytest.mark.parametrize("name", TABLES)
def test_sampling_of_every_count_is_to_be_trusted(name: str) -> None:
    found = comparison(name)
    assert found.table["trustworthy"].all()
    assert (found.table["pareto_k_high"] == 0).all()
    assert (found.table["elpd_mcse"] < 0.25).all()


@pytest.mark.parametrize(("name", "classes"), [(TABLES[0], 1), (TABLES[1], 1), (TABLES[1], 2)])
def test_accuracy_is_the_exact_leave_one_out(name: str, classes: int) -> None:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    parts = next(t for t in tables if t.get("file") == f"{name}.csv")["computed_loo"]
    exact = next(part["elpd_loo"] for part in parts if part["classes"] == classes)
    row = comparison(name).table.loc[classes]
    assert abs(row["elpd"] - exact) < 4 * row["elpd_mcse"] + 0.0001


def test_four_yes_no_items_do_not_settle_more_than_two_classes() -> None:
    # Goodman (1974): with four yes/no items three classes are not identified.
    found = comparison("stouffer_toby_1951")
    assert found.best == 2
    assert found.tied == (2, 3, 4)
    assert "smallest number within the tie is two classes" in found.verdict
    for n in (3, 4):
        kinds = {finding.kind for finding in found.posteriors[n].diagnostics().findings}
        assert "not_identified" in kinds
    two = {finding.kind for finding in found.posteriors[2].diagnostics().findings}
    assert "not_identified" not in two


def test_three_kinds_of_slides() -> None:
    # Agresti (2002), section 13.1, from memory (references.toml): three classes fit the seven
    # pathologists and two do not; their weights by maximum likelihood are .44, .37, .18.
    found = comparison("carcinoma_raters_1977")
    assert found.tied[0] == 3
    assert not found.table.loc[2, "tied"]
    assert found.table.loc[1, "weight"] < 0.05
    prevalence = np.sort(found.posteriors[3].prevalence()["median"])[::-1]
    assert prevalence == pytest.approx([0.44, 0.37, 0.18], abs=0.03)
    fourth = {finding.kind for finding in found.posteriors[4].diagnostics().findings}
    assert fourth & {"empty_class", "duplicate_classes"}
