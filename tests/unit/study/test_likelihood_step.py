"""Maximum likelihood in a run: only where asked, beside the comparison, kept in files."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import StudyError
from bayeslca.report.content import ReportContent
from bayeslca.study.job import run_study
from bayeslca.study.likelihood import with_maximum_likelihood
from bayeslca.study.load import load_study

QUICK = "draws = 100\ness = 100\nr_hat = 1.1\n"


def said(folder: Path, more: str) -> Path:
    path = folder / "study.toml"
    path.write_text(path.read_text(encoding="utf-8") + QUICK + more, encoding="utf-8")
    return path


def test_a_run_that_does_not_ask_has_none(folder: Path) -> None:
    study = load_study(said(folder, ""))
    content = ReportContent(responses=study.responses, posterior=None)  # type: ignore[arg-type]
    assert with_maximum_likelihood(study, content, print) is content


def test_a_run_shows_and_keeps_it(folder: Path) -> None:
    more = "\n[maximum_likelihood]\nstarting_points = 7\nbootstrap = 9\n"
    run_study(said(folder, more), folder / "results", quiet=True)
    tables = folder / "results" / "tables"
    fits = pd.read_csv(tables / "maximum_likelihood.csv").set_index("model")
    assert list(fits.index) == ["1", "2", "this study"]
    assert (fits["starting_points"] == 7).all()
    # One class: the log likelihood of independent items, by hand: 3 of 6 yes, 3 of 6, 3 of 5.
    by_hand = 12 * np.log(1 / 2) + 3 * np.log(3 / 5) + 2 * np.log(2 / 5)
    assert fits.loc["1", "log_likelihood"] == pytest.approx(by_hand, abs=1e-8)
    assert fits.loc["1", "n_parameters"] == 3
    assert fits.loc["1", "aic"] == pytest.approx(-2 * by_hand + 6)
    criteria = pd.read_csv(tables / "criteria.csv")
    assert set(criteria.columns) == {"model", "criterion", "value", "above_best"}
    test = pd.read_csv(tables / "one_class_fewer.csv")
    assert test[["smaller", "larger", "tables_drawn"]].to_numpy().tolist() == [[1, 2, 9]]
    page = (folder / "results" / "report.html").read_text(encoding="utf-8")
    assert 'id="maximum-likelihood"' in page
    assert "7 of 7" in page


def test_a_study_without_a_comparison_has_its_own_model_alone(folder: Path) -> None:
    path = said(folder, "\n[maximum_likelihood]\n")
    path.write_text(path.read_text(encoding="utf-8").replace("[1, 2]", "[]"), encoding="utf-8")
    study = load_study(path)
    assert study.model is not None
    posterior = study.model.sample(study.responses, seed=1, draws=100, ess=100, progress=False)
    content = ReportContent(responses=study.responses, posterior=posterior)
    told: list[str] = []
    found = with_maximum_likelihood(study, content, told.append)
    assert found.criteria is not None
    assert list(found.criteria.fits) == ["this study"]
    assert found.criteria.agreement == ""
    assert found.one_class_fewer == ()
    assert told == ["Maximum likelihood, this study"]


def test_a_wrong_key_is_named(folder: Path) -> None:
    with pytest.raises(StudyError, match=r"\[maximum_likelihood\] bootstraps.*bootstrap"):
        load_study(said(folder, "\n[maximum_likelihood]\nbootstraps = 2\n"))
