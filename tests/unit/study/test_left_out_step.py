"""Leaving cases out in a run: exact, folds and influence, as the study file asks."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from bayeslca.exceptions import StudyError
from bayeslca.study.job import run_study
from bayeslca.study.load import load_study


def said(folder: Path, old: str, new: str) -> Path:
    path = folder / "study.toml"
    text = path.read_text(encoding="utf-8").replace(old, new)
    path.write_text(f"{text}draws = 100\ness = 100\nr_hat = 1.1\n", encoding="utf-8")
    return path


def test_a_run_leaves_cases_out_as_it_is_told(folder: Path) -> None:
    path = said(folder, "compare = [1, 2]", "compare = [1, 2]\nexact = true\nfolds = 3")
    run_study(path, folder / "results", quiet=True)
    tables = folder / "results" / "tables"
    counts = pd.read_csv(tables / "class_counts.csv")
    assert (counts["refitted"] == 5).all()  # five distinct patterns of six cases
    folds = pd.read_csv(tables / "class_counts_by_folds.csv")
    assert folds["elpd_diff"].max() == 0
    page = (folder / "results" / "report.html").read_text(encoding="utf-8")
    assert "Every pattern was refitted, in every model." in page
    assert "The same models by 3 folds of cases" in page
    assert 'id="influence"' in page
    influence = pd.read_csv(tables / "influence.csv")
    assert influence["count"].sum() == 6
    assert "fees" not in influence


def test_a_run_may_do_without_influence(folder: Path) -> None:
    path = said(folder, "[sampling]", "[fit]\ncheck = false\ninfluence = false\n\n[sampling]")
    run_study(path, folder / "results", quiet=True)
    assert not (folder / "results" / "tables" / "influence.csv").exists()
    page = (folder / "results" / "report.html").read_text(encoding="utf-8")
    assert 'id="influence"' not in page
    assert "No pattern was refitted." in page or "refitted with" in page


def test_wrong_values_are_refused(folder: Path) -> None:
    with pytest.raises(StudyError, match=r"folds.*must be 0"):
        load_study(said(folder, "compare = [1, 2]", "compare = [1, 2]\nfolds = 1"))
    text = (folder / "study.toml").read_text(encoding="utf-8")
    (folder / "study.toml").write_text(text.replace("folds = 1", "folds = 9"), encoding="utf-8")
    with pytest.raises(StudyError, match="folds=9 for 6 cases"):
        run_study(folder / "study.toml", folder / "results", quiet=True)
