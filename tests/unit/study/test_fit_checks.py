"""The fit step of a run: on by default, left out where asked, recorded."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest

from bayeslca.exceptions import StudyError
from bayeslca.report.content import ReportContent
from bayeslca.study.fit_checks import record_of, with_fit_checks
from bayeslca.study.job import run_study
from bayeslca.study.load import load_study


def said(folder: Path, more: str) -> Path:
    path = folder / "study.toml"
    quick = "draws = 100\ness = 100\nr_hat = 1.1\n"
    path.write_text(path.read_text(encoding="utf-8") + quick + more, encoding="utf-8")
    return path


def test_a_run_checks_the_fit_and_keeps_a_record(folder: Path) -> None:
    run_study(said(folder, ""), folder / "results", quiet=True)
    record = json.loads((folder / "results" / "run.json").read_text(encoding="utf-8"))
    kept = record["predictive_checks"]
    assert kept["replicates"] == 400
    assert kept["seed"] == 7
    assert kept["simulated_studies"] == 0
    assert kept["verdict"].startswith("The model")
    checks = pd.read_csv(folder / "results" / "tables" / "fit_checks.csv")
    assert kept["reproduces"] == bool((checks["p"] >= 0.01).all())
    page = (folder / "results" / "report.html").read_text(encoding="utf-8")
    assert 'id="fit"' in page
    assert "The same checks with other numbers of classes" in page


def test_a_run_may_do_without(folder: Path) -> None:
    run_study(said(folder, "\n[fit]\ncheck = false\n"), folder / "results", quiet=True)
    record = json.loads((folder / "results" / "run.json").read_text(encoding="utf-8"))
    assert record["predictive_checks"] is None
    assert not (folder / "results" / "tables" / "fit_checks.csv").exists()
    page = (folder / "results" / "report.html").read_text(encoding="utf-8")
    assert 'id="fit"' not in page


def test_a_study_may_ask_for_calibrated_p_values(folder: Path) -> None:
    study = load_study(said(folder, "\n[fit]\ncalibrate = 2\n"))
    assert study.model is not None
    posterior = study.model.sample(study.responses, seed=1, draws=100, ess=100, progress=False)
    told: list[str] = []
    content = ReportContent(responses=study.responses, posterior=posterior)
    found = with_fit_checks(study, content, told.append)
    assert found.checks is not None
    assert found.checks.calibrated_in == 2
    assert found.checks_by_count == {}
    assert told[-1] == "Checking the fit: simulated study 2 of 2"
    kept = record_of(found.checks)
    assert kept is not None
    assert kept["simulated_studies"] == 2


def test_a_wrong_key_is_named(folder: Path) -> None:
    with pytest.raises(StudyError, match=r"\[fit\] calibrated.*calibrate"):
        load_study(said(folder, "\n[fit]\ncalibrated = 2\n"))
