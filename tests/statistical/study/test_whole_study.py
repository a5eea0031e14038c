"""The whole job from a study file, and from a messy spreadsheet, to a folder of results."""

from __future__ import annotations

import json
import re
import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import ResponsesError, StorageError
from bayeslca.posterior.posterior import Posterior
from bayeslca.study.assign import assign_new_cases
from bayeslca.study.draft import write_draft
from bayeslca.study.job import run_study

SEED = 118
STUDY = """\
[study]
title = "Two kinds"
question = "How common is each kind?"

[answers]
file = "answers.csv"
case = "committee"
items = ["fees", "accounts", "meets", "parts"]

[model]
classes = ["managed", "lapsed"]
statements = ["managed is where P(fees=yes) is highest"]

[class_count]
compare = [1, 2]

[sampling]
seed = 7
"""


def write_study(folder: Path) -> Path:
    """Write a study of 90 invented committees of two kinds and return the study file."""
    rng = np.random.default_rng(SEED)
    managed = rng.random(90) < 0.5
    columns = {"committee": [f"C{i:03d}" for i in range(90)]}
    for name in ("fees", "accounts", "meets", "parts"):
        yes = rng.random(90) < np.where(managed, 0.9, 0.15)
        columns[name] = np.where(yes, "yes", "no").tolist()
    pd.DataFrame(columns).to_csv(folder / "answers.csv", index=False)
    (folder / "study.toml").write_text(STUDY, encoding="utf-8")
    return folder / "study.toml"


def change(study: Path, old: str, new: str) -> None:
    text = study.read_text(encoding="utf-8")
    assert old in text
    study.write_text(text.replace(old, new), encoding="utf-8")


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Run the study once and return its folder; tests that change it copy it first."""
    folder = tmp_path_factory.mktemp("finished")
    outcome = run_study(write_study(folder), folder / "results", quiet=True)
    assert outcome.trustworthy
    return folder


@pytest.fixture
def study(finished: Path, tmp_path: Path) -> Path:
    shutil.copytree(finished, tmp_path / "copy")
    return tmp_path / "copy" / "study.toml"


def test_everything_is_written_and_nothing_else(finished: Path) -> None:
    results = finished / "results"
    assert {path.name for path in results.iterdir()} == {
        "figures",
        "fit.nc",
        "fits",
        "membership.csv",
        "membership_of_patterns.csv",
        "report.html",
        "run.json",
        "study.toml",
        "tables",
        "tables.xlsx",
    }
    assert [path.name for path in finished.iterdir() if "partial" in path.name] == []


def test_tables_page_and_fit_say_the_same(finished: Path) -> None:
    results = finished / "results"
    table = pd.read_csv(results / "tables" / "prevalence.csv").set_index("latent_class")
    posterior = Posterior.load(results / "fit.nc")
    from_fit = posterior.prevalence().set_index("latent_class")
    assert table.loc["managed", "median"] == pytest.approx(from_fit.loc["managed", "median"])
    page = (results / "report.html").read_text(encoding="utf-8")
    share = table.loc["managed"]
    in_words = f"{share['median']:.0%} ({share['lower']:.0%} to {share['upper']:.0%})"
    spaced = in_words.replace("%", "").replace(" (", " % (")
    assert spaced in re.sub(r"[\s ]+", " ", re.sub("<[^>]+>", "", page))


def test_the_page_holds_no_case_and_the_membership_file_all(finished: Path) -> None:
    results = finished / "results"
    page = (results / "report.html").read_text(encoding="utf-8")
    assert not re.search(r"\bC\d{3}\b", page)
    membership = pd.read_csv(results / "membership.csv")
    assert membership["case"].tolist() == [f"C{i:03d}" for i in range(90)]
    assert membership[["probability_managed", "probability_lapsed"]].sum(axis=1).to_numpy() == (
        pytest.approx(1.0)
    )


def test_results_are_not_overwritten_unless_asked(study: Path) -> None:
    results = study.parent / "results"
    before = (results / "report.html").read_bytes()
    with pytest.raises(StorageError, match="--replace"):
        run_study(study, results, quiet=True)
    assert (results / "report.html").read_bytes() == before


def test_unchanged_fits_are_kept_byte_for_byte(study: Path) -> None:
    results = study.parent / "results"
    before = {path.name: path.read_bytes() for path in results.rglob("*.nc")}
    change(study, 'title = "Two kinds"', 'title = "Kinds"')
    outcome = run_study(study, results, replace=True, quiet=True)
    assert "3 of 3 fits" in outcome.words
    assert {path.name: path.read_bytes() for path in results.rglob("*.nc")} == before
    assert "Kinds" in (results / "report.html").read_text(encoding="utf-8")


def test_what_moved_is_shown(study: Path) -> None:
    results = study.parent / "results"
    change(
        study,
        '["managed is where P(fees=yes) is highest"]',
        '["managed is where P(fees=yes) is highest", "P(meets=yes | lapsed) ~ Beta(1, 20)"]',
    )
    outcome = run_study(study, results, replace=True, quiet=True)
    assert "2 of 3 fits" in outcome.words
    page = re.sub("<[^>]+>", " ", (results / "report.html").read_text(encoding="utf-8"))
    assert "meets = yes in lapsed" in page


def test_a_changed_answer_is_fitted_anew(study: Path) -> None:
    answers = study.parent / "answers.csv"
    frame = pd.read_csv(answers)
    frame.loc[0, "fees"] = "no" if frame.loc[0, "fees"] == "yes" else "yes"
    frame.to_csv(answers, index=False)
    outcome = run_study(study, study.parent / "results", replace=True, quiet=True)
    assert "unchanged" not in outcome.words


def test_a_failing_run_leaves_the_old_results(study: Path) -> None:
    results = study.parent / "results"
    before = sorted((path.name, path.stat().st_size) for path in results.rglob("*"))
    change(study, '"fees", "accounts"', '"feez", "accounts"')
    with pytest.raises(ResponsesError, match="near names: 'fees'"):
        run_study(study, results, replace=True, quiet=True)
    assert sorted((path.name, path.stat().st_size) for path in results.rglob("*")) == before


def test_too_few_sweeps_are_not_to_be_trusted(study: Path) -> None:
    change(study, "seed = 7", "seed = 7\nmax_sweeps = 1000\ndraws = 100\ness = 400")
    outcome = run_study(study, study.parent / "short", quiet=True)
    assert not outcome.trustworthy
    assert "Not to be trusted" in outcome.words
    page = (study.parent / "short" / "report.html").read_text(encoding="utf-8")
    assert "not to be trusted" in page.casefold()


def test_an_open_number_of_classes_shows_what_the_data_support(study: Path) -> None:
    change(study, 'classes = ["managed", "lapsed"]\n', "")
    change(study, 'statements = ["managed is where P(fees=yes) is highest"]\n', "")
    change(study, "compare = [1, 2]", "compare = [1, 2, 3]")
    results = study.parent / "open"
    run_study(study, results, quiet=True)
    record = json.loads((results / "run.json").read_text(encoding="utf-8"))
    assert record["answer_rests_on"] == "fits/classes-2.nc"
    assert Posterior.load(results / "fit.nc").model.n_classes == 2


def test_groups_that_answer_alike_are_compared_with_groups_that_do_not(study: Path) -> None:
    answers = study.parent / "answers.csv"
    frame = pd.read_csv(answers)
    frame["district"] = np.where(np.arange(len(frame)) % 2, "hill", "plain")
    # In the plain, managed committees do not meet: the same class answers another way there.
    managed = frame["fees"] == "yes"
    frame.loc[managed & (frame["district"] == "plain"), "meets"] = "no"
    frame.to_csv(answers, index=False)
    change(study, 'case = "committee"', 'case = "committee"\ngroup = "district"')
    change(study, 'classes = ["managed", "lapsed"]', "classes = 2")
    change(study, 'statements = ["managed is where P(fees=yes) is highest"]\n', "")
    change(study, "compare = [1, 2]", "compare = []\n\n[groups]\ncompare_free = true")
    run_study(study, study.parent / "groups", quiet=True)
    page = (study.parent / "groups" / "report.html").read_text(encoding="utf-8")
    assert "Do the groups answer alike" in page
    assert "differ by district predicts better" in page
    fits = {path.name for path in (study.parent / "groups" / "fits").iterdir()}
    assert fits == {"groups-alike.nc", "groups-free.nc"}


def test_the_same_seed_gives_the_same_numbers(study: Path) -> None:
    run_study(study, study.parent / "again", quiet=True)
    first = (study.parent / "results" / "tables" / "response_probabilities.csv").read_text("utf-8")
    again = (study.parent / "again" / "tables" / "response_probabilities.csv").read_text("utf-8")
    assert first == again


def test_new_cases_are_assigned_like_the_old(study: Path) -> None:
    results = study.parent / "results"
    assign_new_cases(results, study.parent / "answers.csv", study.parent / "out.csv")
    new = pd.read_csv(study.parent / "out.csv")
    old = pd.read_csv(results / "membership.csv")
    pd.testing.assert_frame_equal(new[old.columns], old)


def test_a_new_answer_is_refused_by_name(study: Path) -> None:
    (study.parent / "new.csv").write_text(
        "committee,fees,accounts,meets,parts\nx,perhaps,no,no,no\n", encoding="utf-8"
    )
    with pytest.raises(ResponsesError, match=r"fees.*perhaps"):
        assign_new_cases(study.parent / "results", study.parent / "new.csv", study.parent / "o.csv")
    assert not (study.parent / "o.csv").exists()


def test_the_messy_spreadsheet_goes_from_draft_to_report(messy: Path, tmp_path: Path) -> None:
    study = tmp_path / "study.toml"
    write_draft(messy, study)
    change(study, "compare = [1, 2, 3, 4, 5, 6]", "compare = [1, 2]")
    run_study(study, tmp_path / "results", quiet=True)
    page = (tmp_path / "results" / "report.html").read_text(encoding="utf-8")
    assert "118" in page
    assert "R-1000" not in page
    assert "nobody was there" not in page


def test_answers_that_changed_places_are_fitted_anew(study: Path) -> None:
    answers = study.parent / "answers.csv"
    frame = pd.read_csv(answers)
    frame["committee"] = frame["committee"].to_numpy()[::-1]  # the same answers of other cases
    frame.sort_values("committee").to_csv(answers, index=False)
    outcome = run_study(study, study.parent / "results", replace=True, quiet=True)
    assert "unchanged" not in outcome.words
