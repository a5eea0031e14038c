"""A study of a sample with a design: what check, draft, run and ask say, and what is written."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest

from bayeslca.report.content import ReportContent
from bayeslca.report.facts import Facts
from bayeslca.report.sections.answer import answer_section
from bayeslca.study.load import load_study
from tests.unit.study.conftest import Run

QUICK = "draws = 100\ness = 100\nr_hat = 1.1\npseudo_samples = 20\n"
WEIGHTS = [9, 8, 1, 1, 7, 1.5]


@pytest.fixture
def weighted(folder: Path) -> Path:
    """Return the small study's file, with weights and villages."""
    answers = pd.read_csv(folder / "answers.csv", dtype=str)
    answers["weight"] = WEIGHTS
    answers["village"] = [1, 1, 2, 2, 3, 3]
    answers.to_csv(folder / "answers.csv", index=False)
    path = folder / "study.toml"
    text = path.read_text(encoding="utf-8").replace(
        'case = "committee"', 'case = "committee"\nweight = "weight"\ncluster = "village"'
    )
    path.write_text(text + QUICK, encoding="utf-8")
    return path


def test_check_says_what_will_be_weighed(weighted: Path, run: Run) -> None:
    code, out, _ = run("check", weighted)
    assert code == 0
    said = " ".join(out.split())
    assert "sample design: weights (weight) differ up to 9.0-fold, 3 clusters (village)" in said
    assert "fit 20 pseudo-samples for the population; everything else is unweighted" in said


def test_run_answers_for_the_population(weighted: Path, run: Run) -> None:
    results = weighted.parent / "results"
    code, out, err = run("run", weighted, "-o", results, "--quiet")
    assert (code in (0, 1), err) == (True, "")
    record = json.loads((results / "run.json").read_text(encoding="utf-8"))
    assert "n the population, weighted for how the cases were sampled" in record["headline"]
    assert " of 6" not in record["headline"]  # no cases: the share is not one of theirs
    assert record["sample_design"]["clusters"] == 3
    assert "few_clusters" in record["sample_design"]["findings"]
    page = (results / "report.html").read_text(encoding="utf-8")
    assert 'id="design"' in page
    for anchor in ("classes", "prevalence", "class-counts", "fit", "membership"):
        section = page.split(f'id="{anchor}"')[1].split("</section>")[0]
        assert "Unweighted: " in section, anchor
    beside = pd.read_csv(results / "tables" / "weighted_beside_unweighted.csv")
    shares = pd.read_csv(results / "tables" / "weighted_prevalence.csv")
    assert beside["weighted"].tolist() == shares["median"].tolist()
    assert f"{100 * beside['weighted'].max():.0f} %" in record["headline"].replace("\xa0", " ")
    counts = pd.read_csv(results / "tables" / "class_counts.csv")
    assert set(counts["weighting"]) == {"unweighted"}
    columns = pd.read_csv(results / "tables" / "columns.csv")
    mine = columns[columns["table"].str.startswith("weighted")]
    assert mine["meaning"].notna().all()
    code, out, _ = run("ask", results, "P(managed) > 0.5")
    assert "Unweighted: this is of the cases as they are" in " ".join(out.split())
    # Once more: the same figures, so nothing moved.
    run("run", weighted, "-o", results, "--replace", "--quiet")
    again = pd.read_csv(results / "tables" / "weighted_prevalence.csv")
    pd.testing.assert_frame_equal(shares, again)


def test_a_report_that_leaves_the_design_out_says_so(weighted: Path) -> None:
    study = load_study(weighted)
    assert study.model is not None
    posterior = study.model.sample(study.responses, seed=1, draws=100, ess=100, progress=False)
    content = ReportContent(responses=study.responses, posterior=posterior)
    texts = [getattr(block, "text", "") for block in answer_section(Facts(content)).blocks]
    assert any("All of this is unweighted, though" in text for text in texts)


def test_draft_offers_columns_that_are_called_so(weighted: Path, run: Run) -> None:
    answers = pd.read_csv(weighted.parent / "answers.csv", dtype=str)
    answers = answers.rename(columns={"village": "psu"})
    answers["stratum"] = ["a", "a", "a", "b", "b", "b"]
    answers.to_csv(weighted.parent / "more.csv", index=False)
    code, _, _ = run("draft", weighted.parent / "more.csv", "-o", weighted.parent / "draft.toml")
    text = (weighted.parent / "draft.toml").read_text(encoding="utf-8")
    assert code == 0
    for line in ('# weight = "weight"', '# cluster = "psu"', '# stratum = "stratum"'):
        assert line in text.splitlines()
    for line in ('    "weight",', '    "psu",', '    "stratum",'):
        assert line not in text  # none is proposed as an item


def test_a_bad_weight_is_one_line_and_exit_code_2(weighted: Path, run: Run) -> None:
    answers = (weighted.parent / "answers.csv").read_text(encoding="utf-8")
    (weighted.parent / "answers.csv").write_text(answers.replace(",9.0,", ",-9,"), encoding="utf-8")
    code, _, err = run("check", weighted)
    assert code == 2
    assert "weight column 'weight': negative weight ('-9') in line 2" in " ".join(err.split())
