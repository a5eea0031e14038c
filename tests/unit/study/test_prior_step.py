"""The step of a run that looks at what the priors do."""

from __future__ import annotations

from pathlib import Path

import pytest

from bayeslca.exceptions import StudyError
from bayeslca.model.alternative_priors import ALTERNATIVES
from bayeslca.report.content import ReportContent
from bayeslca.study.job import run_study
from bayeslca.study.load import Study, load_study
from bayeslca.study.prior_sensitivity import with_prior_sensitivity
from bayeslca.study.schema import OTHER_PRIORS

STUDY = """
[answers]
file = "answers.csv"
items = ["fees", "meets", "fenced"]

[model]
classes = ["managed", "lapsed"]
statements = ["P(fees=yes | managed) ~ Beta(9, 2)"]

[class_count]
compare = []

[fit]
check = false

[sampling]
draws = 300
ess = 200
r_hat = 1.05

[quantities]
gap = "P(fees=yes | managed) - P(fees=yes | lapsed)"
"""


@pytest.fixture
def study(tmp_path: Path) -> Path:
    rows = ["yes,yes,yes"] * 12 + ["no,no,no"] * 10 + ["yes,no,yes", "no,yes,no", "no,no,yes"]
    (tmp_path / "answers.csv").write_text("fees,meets,fenced\n" + "\n".join(rows) + "\n")
    path = tmp_path / "study.toml"
    path.write_text(STUDY)
    return path


def test_the_study_file_knows_the_models_names() -> None:
    assert OTHER_PRIORS == ALTERNATIVES


def test_a_run_looks_at_the_priors_without_being_asked(study: Path, tmp_path: Path) -> None:
    run_study(study, tmp_path / "out", quiet=True)
    moved = (tmp_path / "out" / "tables" / "other_priors.csv").read_text()
    assert "half as strong" in moved
    assert "gap" in moved
    assert "uniform" not in moved


def content_of(study: Study) -> ReportContent:
    assert study.model is not None
    posterior = study.model.sample(
        study.responses, seed=1, progress=False, **study.sampling_options
    )
    return ReportContent(responses=study.responses, posterior=posterior)


def test_it_refits_under_the_priors_that_are_asked_for(study: Path) -> None:
    study.write_text(STUDY + '\n[priors]\nrefit = ["uniform"]\n')
    loaded, said = load_study(study), []
    found = with_prior_sensitivity(loaded, content_of(loaded), said.append).sensitivity
    assert found is not None
    tried = found.priors.set_index(["prior", "method"])
    assert ("uniform", "refit") in tried.index
    assert ("half as strong", "refit") not in tried.index
    assert said == [
        "Looking at what the priors do", "Fitting again under priors that are uniform"
    ]  # fmt: skip


def test_a_run_may_do_without(study: Path) -> None:
    study.write_text(STUDY + "\n[priors]\nsensitivity = false\n")
    loaded = load_study(study)
    content = content_of(loaded)
    assert with_prior_sensitivity(loaded, content, print) is content


def test_an_unknown_prior_is_refused(study: Path) -> None:
    study.write_text(STUDY + '\n[priors]\nrefit = ["twice as stong"]\n')
    with pytest.raises(StudyError, match="twice as strong"):
        load_study(study)
